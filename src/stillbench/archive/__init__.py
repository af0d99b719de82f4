"""Results to JSON and back: versioned schema, read for ever."""
