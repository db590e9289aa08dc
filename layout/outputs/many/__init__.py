"""Tables of many cells."""
