"""One command a file, loaded when it is called."""
