"""Drawings: a noun -> matplotlib Axes. They compute nothing but the course of a model on a grid."""
