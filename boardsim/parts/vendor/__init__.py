"""Vendors' SPICE models: untrusted text that is read, checked and worked out; nothing of the text itself reaches a deck."""
