"""Wavekin."""
