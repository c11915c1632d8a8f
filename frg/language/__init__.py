"""The safe mathematics parser, the truncation-file reader and `Truncation`."""
