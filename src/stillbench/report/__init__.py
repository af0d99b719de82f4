"""The result as a page to be signed: one HTML file, readable from its JSON alone."""
