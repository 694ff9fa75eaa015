"""Questions put to a board: each makes a pattern and conditions, runs them, and judges. One file per question."""
