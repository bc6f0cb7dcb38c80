"""Number formats, rounding, constants, bounds."""
