"""Noise: sensors, background brain, eyes, surroundings."""
