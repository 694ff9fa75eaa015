"""Clamps: what takes over a coil's current when its switch opens. One kind per file."""
