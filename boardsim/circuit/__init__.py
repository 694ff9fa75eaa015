"""Board and output edges -> deck. The only place that knows PySpice's builder."""
