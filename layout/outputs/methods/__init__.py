"""The methods section of a paper, from the result's own numbers."""
