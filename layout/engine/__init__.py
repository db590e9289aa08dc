"""Optimal choice from candidates: arrays in, arrays out. Knows nothing about heads."""
