"""The worker process: one libngspice, which can end or crash its process without harm to the caller.

Runs one deck per line of standard input (JSON: deck, raw) and answers with lines of JSON: progress, then the end.
Everything that ngspice itself prints goes to the log.
"""

from __future__ import annotations

import ctypes
import json
import os
import re
import signal
import sys
import time
from pathlib import Path
from typing import Any

_PR_SET_PDEATHSIG = 1


def main() -> None:
    """Serve runs until standard input ends."""
    if sys.platform == "linux":
        # Go when the caller goes, also in the middle of a run.
        ctypes.CDLL(None).prctl(_PR_SET_PDEATHSIG, signal.SIGKILL)
    answers = os.fdopen(os.dup(1), "w", buffering=1)
    log = os.open("ngspice.log", os.O_WRONLY | os.O_CREAT | os.O_APPEND, 0o644)
    os.dup2(log, 1)
    os.dup2(log, 2)

    def answer(**what: Any) -> None:
        answers.write(json.dumps(what) + "\n")

    from boardsim.engine.library import HOW_TO_INSTALL, Ngspice, find_library

    said = 0.0

    def on_status(text: str) -> None:
        nonlocal said
        match = re.search(r"([\d.]+)%", text)
        if match and time.monotonic() - said > 0.2:
            said = time.monotonic()
            answer(progress=float(match[1]) / 100)

    try:
        engine = Ngspice(find_library(), on_status)
    except (OSError, NameError) as err:
        answer(missing=f"{err}; {HOW_TO_INSTALL}")
        return
    answer(version=engine.ngspice_version)
    for line in sys.stdin:
        job = json.loads(line)
        deck = Path(job["deck"]).read_text(encoding="utf-8")
        start = len(engine.messages)
        failed = engine.simulate(deck, Path(job["raw"]))
        os.write(log, ("\n".join(engine.messages[start:]) + "\n").encode())
        answer(done=True, failed=failed)


if __name__ == "__main__":
    main()
