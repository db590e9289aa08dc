"""Tables, files and pictures made from a result."""
