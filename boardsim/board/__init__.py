"""Reading and resolving board files."""
