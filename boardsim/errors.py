"""The whole tree of exceptions, and the exit codes.

Every mistake that a user can make ends in one of these; `cli` turns it into a message and a status.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from pathlib import Path

EXIT_PASS = 0
EXIT_LIMIT_BROKEN = 1
EXIT_WRONG_INPUT = 2
EXIT_UNPROVEN = 3


class BoardsimError(Exception):
    """Root of all errors that boardsim raises on purpose; `exit_status` is what the command returns."""

    exit_status = EXIT_WRONG_INPUT


class QuantityError(BoardsimError, ValueError):
    """A number, its unit or its tolerance cannot be used; the message says what is allowed."""


@dataclass(frozen=True)
class Problem:
    """One mistake in a file: where it is (file, line, path of keys) and what to do about it."""

    file: str
    line: int | None
    text: str

    def __str__(self) -> str:
        place = self.file if self.line is None else f"{self.file}:{self.line}"
        return f"{place}: {self.text}"


class InputError(BoardsimError):
    """A file or a call is wrong; carries every problem that was found, not only the first."""

    def __init__(self, problems: Iterable[Problem] | str):
        self.problems: tuple[Problem, ...] = () if isinstance(problems, str) else tuple(problems)
        text = problems if isinstance(problems, str) else "\n".join(str(p) for p in self.problems)
        super().__init__(text)


class EngineError(BoardsimError):
    """ngspice did not deliver waveforms; names the deck and the log that were kept."""

    exit_status = EXIT_UNPROVEN

    def __init__(self, text: str, deck: Path | None = None, log: Path | None = None):
        self.deck = deck
        self.log = log
        kept = [f"the {what} is kept at {path}" for what, path in (("deck", deck), ("log", log)) if path]
        super().__init__(text + (": " + " and ".join(kept) if kept else ""))


class EngineMissing(EngineError):
    """libngspice cannot be loaded; the message says what to install."""


class EngineCrash(EngineError):
    """The worker process ended without an answer."""


class EngineTimeout(EngineError):
    """The time limit ran out."""


class EngineStopped(EngineError):
    """Somebody interrupted the run."""


class NoConvergence(EngineError):
    """ngspice gave up, or stopped before the end of the pattern."""


class DeckRejected(EngineError):
    """ngspice did not accept the deck."""
