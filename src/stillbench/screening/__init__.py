"""Screening: one check a file. A check chooses, marks and explains; it never edits a sample silently."""
