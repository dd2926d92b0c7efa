"""Media: packets come in, streams and calls go out."""
