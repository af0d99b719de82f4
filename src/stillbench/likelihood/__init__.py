"""The numeric engine on arrays: cosine transform, bins, fit, profile. Knows terms, not sensors."""
