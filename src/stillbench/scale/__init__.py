"""From known turns, rates or positions to a scale factor."""
