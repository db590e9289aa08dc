"""Chooses and certifies where EEG electrodes and on-scalp magnetometers go, and which way they point."""

__version__ = "0.3.0"
