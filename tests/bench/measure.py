"""Times whole commands as a user starts them, cold, and holds them against their budgets.

    .venv/bin/python tests/bench/measure.py            all
    .venv/bin/python tests/bench/measure.py help       only the start-up
    .venv/bin/python tests/bench/measure.py fire       only the fruit sorter's steady pattern
    .venv/bin/python tests/bench/measure.py verify     only all demonstration scenarios
    .venv/bin/python tests/bench/measure.py plungers   only how many times as long 24 plungers take as the same coils without motion

Budgets are for two cores. Exit status 1 if one is missed. Compare two versions by their ratio in one sitting, not by
seconds of different days.
"""

from __future__ import annotations

import json
import statistics
import subprocess
import sys
import tempfile
import time
from pathlib import Path

HERE = Path(__file__).resolve().parents[2]
SORTER = HERE / "netlists" / "fruit-sorter"
PLUNGERS = HERE / "tests" / "bench" / "plungers"
BUDGETS = {"help": 0.5, "fire": 60.0, "verify": 90.0, "plungers": 2.0}  # [s], of plungers a ratio


def timed(*arguments: str) -> float:
    """Wall time of one command. [s]"""
    begin = time.perf_counter()
    done = subprocess.run(
        [sys.executable, "-m", "boardsim.cli", *arguments], capture_output=True, cwd=HERE, check=False
    )
    spent = time.perf_counter() - begin
    if done.returncode != 0:
        sys.exit(f"{' '.join(arguments)} ended with status {done.returncode}:\n{done.stderr.decode()}")
    return spent


def plungers(pattern: str) -> tuple[float, float]:
    """Wall times of the plungers' board and of the same board with fixed inductance, one after the other. [s]"""
    text = (PLUNGERS / "board.toml").read_text(encoding="utf-8")
    with tempfile.TemporaryDirectory() as out:
        fixed = Path(out) / "board.toml"
        fixed.write_text(text.replace('coil = "pusher"', 'coil = "fixed"'), encoding="utf-8")
        times = [
            timed("fire", str(board), str(PLUNGERS / "patterns" / f"{pattern}.toml"), "--out", f"{out}/{k}")
            for k, board in enumerate((PLUNGERS / "board.toml", fixed))
        ]
    return times[0], times[1]


def main() -> None:
    """Measure what the arguments name, or everything."""
    missed = False
    for name in sys.argv[1:] or list(BUDGETS):
        if name == "help":
            spent = statistics.median(timed("--help") for _ in range(5))
            detail = "median of 5"
        elif name == "plungers":
            moving, still = plungers("groups")
            one, other = plungers("singly")
            spent = moving / still
            detail = f"{moving:.1f} s against {still:.1f} s, six at a time; one after the other {one:.1f} s against {other:.1f} s"
        elif name == "verify":
            with tempfile.TemporaryDirectory() as out:
                spent = timed("verify", str(HERE / "netlists"), "--out", out)
                found = json.loads((Path(out) / "findings.json").read_text(encoding="utf-8"))
            detail = "; ".join(f"{s['name']} {s['seconds']:.1f} s" for s in found["scenarios"])
        else:
            with tempfile.TemporaryDirectory() as out:
                spent = timed(
                    "fire", str(SORTER / "board.toml"), str(SORTER / "patterns" / "steady.toml"), "--out", out
                )
                found = json.loads((Path(out) / "findings.json").read_text(encoding="utf-8"))
            detail = "; ".join(f"{t['stage']} {t['seconds']:.2f} s" for t in found["timings"])
        missed |= spent > BUDGETS[name]
        unit = "times" if name == "plungers" else "s"
        print(f"{name}: {spent:.2f} of {BUDGETS[name]:g} {unit} ({detail})")
    sys.exit(missed)


if __name__ == "__main__":
    main()
