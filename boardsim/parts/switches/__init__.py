"""Switches: what turns a coil on, with the network at its input. One kind per file."""
