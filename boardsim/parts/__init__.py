"""Kinds of part, one file each, and the library of part records as data."""
