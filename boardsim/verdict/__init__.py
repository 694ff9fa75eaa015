"""Waveforms -> readings -> findings."""
