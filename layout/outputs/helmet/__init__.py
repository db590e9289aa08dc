"""Helmets: poses of the housings, clash check, models of sensors and shell."""
