"""Deck -> waveforms. The only place that knows PySpice's and ngspice's run-time."""
