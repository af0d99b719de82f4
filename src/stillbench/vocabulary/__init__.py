"""The nouns: frozen dataclasses, one a file, no algorithms. The metadata key "json" names a field in result.json."""
