"""Heads: surfaces, cortex, landmarks, the 10-20 family of positions, regions."""
