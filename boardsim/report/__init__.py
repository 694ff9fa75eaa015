"""Terminal, picture, JSON: they render findings and waveforms, they compute nothing."""
