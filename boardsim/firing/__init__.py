"""Pattern -> register frames, bit by bit -> latched output edges."""
