"""From a file to a record: one reader a format, clock audit, front end."""
