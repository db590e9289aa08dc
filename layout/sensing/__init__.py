"""Sensor kinds, the sites where they can sit, and the candidates that can be chosen."""
