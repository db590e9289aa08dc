"""Placement sheets: what a technician carries to the head."""
