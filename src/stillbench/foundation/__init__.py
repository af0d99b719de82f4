"""Ground floor: errors, units, checks, progress, whole-file writing. Knows no sensor and no noise."""
