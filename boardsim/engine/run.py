"""Runs decks: a worker process per run series, with a time limit; every failure is one of the project's errors."""

from __future__ import annotations

import contextlib
import json
import queue
import shutil
import subprocess
import sys
import tempfile
import threading
import time
from collections.abc import Callable, Iterator
from dataclasses import dataclass, field
from pathlib import Path
from typing import IO, Any

from boardsim.circuit.deck import Deck, Settings
from boardsim.engine.waves import Waves, read_waves
from boardsim.errors import (
    BoardsimError,
    DeckRejected,
    EngineCrash,
    EngineMissing,
    EngineStopped,
    EngineTimeout,
    NoConvergence,
)
from boardsim.parts.elements import MODEL_FILE

DEFAULT_TIME_LIMIT = 900.0  # [s] per run
_KEPT_DECK, _KEPT_LOG = "failed.cir", "failed.log"
_LISTEN = 0.2  # [s] between looks at whether somebody wants to stop

Progress = Callable[[float], None]


def _ignore(share: float) -> None:
    pass


@dataclass
class Engine:
    """A worker process with one libngspice, in a scratch folder.

    The worker is started at the first run, and again after a failure. The folder goes with the engine, unless a
    run failed: then deck and log are kept in `keep` and the error names them. Setting `cancel` ends a run from
    another thread.
    """

    keep: Path
    time_limit: float = DEFAULT_TIME_LIMIT
    cancel: threading.Event = field(default_factory=threading.Event)
    command: tuple[str, ...] = (sys.executable, "-m", "boardsim.engine.worker")
    version: int | None = None
    _folder: Path | None = None
    _process: subprocess.Popen[str] | None = None
    _answers: queue.Queue[str | None] = field(default_factory=queue.Queue)
    _runs: int = 0

    def __enter__(self) -> Engine:
        self._folder = Path(tempfile.mkdtemp(prefix="boardsim-"))
        return self

    def __exit__(self, *_: object) -> None:
        self._stop()
        if self._folder is not None:
            shutil.rmtree(self._folder, ignore_errors=True)
            self._folder = None

    def discard_kept(self) -> None:
        """Remove what earlier failures left in `keep`, once a later run has made it pointless."""
        for name in (_KEPT_DECK, _KEPT_LOG):
            (self.keep / name).unlink(missing_ok=True)
        with contextlib.suppress(OSError):
            self.keep.rmdir()  # only if nothing else is in it

    @property
    def name(self) -> str:
        """The engine and its version, once it has been started."""
        return f"ngspice {self.version}" if self.version else "ngspice"

    @property
    def folder(self) -> Path:
        """The scratch folder.

        Raises
        ------
        RuntimeError
            Outside a `with` statement, where there is none.
        """
        if self._folder is None:
            raise RuntimeError("an Engine runs inside a with statement only")
        return self._folder

    @contextlib.contextmanager
    def run(self, deck: Deck, settings: Settings, progress: Progress = _ignore) -> Iterator[Waves]:
        """Run a deck; its waveforms exist inside the `with` only.

        Raises
        ------
        EngineMissing
            If libngspice cannot be loaded.
        EngineCrash, EngineTimeout, DeckRejected, NoConvergence
            If the run came to nothing; deck and log are kept and named.
        """
        with self.run_text(
            deck.text(settings, measures=False), deck.window.stop - deck.window.start, progress
        ) as waves:
            yield waves

    @contextlib.contextmanager
    def run_text(self, text: str, duration: float, progress: Progress = _ignore) -> Iterator[Waves]:
        """Run the text of a deck that lasts `duration` [s]; raises as `run` does."""
        self._runs += 1
        name = f"run{self._runs}"
        deck, raw = self.folder / f"{name}.cir", self.folder / f"{name}.raw"
        deck.write_text(text, encoding="utf-8")
        try:
            failed = self._ask(deck, raw, progress)
            if failed:
                kind = DeckRejected if not raw.exists() else NoConvergence
                raise self._failure(kind, f"ngspice failed: {failed[0].strip()}", deck)
            try:
                waves = read_waves(raw)
            except NoConvergence as err:
                raise self._failure(NoConvergence, str(err), deck) from err
            except OSError as err:
                raise self._failure(DeckRejected, "ngspice did not start the run", deck) from err
            if waves.end() < duration * (1 - 1e-6):
                raise self._failure(NoConvergence, f"ngspice stopped at {waves.end():.6g} s of {duration:.6g} s", deck)
            yield waves
        finally:
            raw.unlink(missing_ok=True)
            deck.unlink(missing_ok=True)

    # ------------------------------------------------------------------------------------------------ worker

    def _ask(self, deck: Path, raw: Path, progress: Progress) -> list[str]:
        process = self._worker(deck)
        deadline = time.monotonic() + self.time_limit
        assert process.stdin is not None
        try:
            process.stdin.write(json.dumps({"deck": deck.name, "raw": raw.name}) + "\n")
            process.stdin.flush()
        except OSError:
            raise self._crashed(deck) from None
        while True:
            answer = self._answer(deck, deadline)
            if "progress" in answer:
                progress(answer["progress"])
            elif "done" in answer:
                return list(answer["failed"])

    def _worker(self, deck: Path) -> subprocess.Popen[str]:
        if self._process is not None and self._process.poll() is None:
            return self._process
        self._answers = queue.Queue()
        try:
            self._process = subprocess.Popen(
                self.command,
                cwd=self.folder,
                stdin=subprocess.PIPE,
                stdout=subprocess.PIPE,
                stderr=subprocess.DEVNULL,
                text=True,
                start_new_session=True,
            )
        except OSError as err:
            raise EngineMissing(f"the engine's worker cannot be started: {err}") from err
        threading.Thread(target=_forward, args=(self._process.stdout, self._answers), daemon=True).start()
        first = self._answer(deck, time.monotonic() + self.time_limit)
        if "missing" in first:
            self._stop()
            raise EngineMissing(f"libngspice cannot be loaded: {first['missing']}")
        self.version = first.get("version")
        return self._process

    def _answer(self, deck: Path, deadline: float) -> dict[str, Any]:
        while True:
            left = deadline - time.monotonic()
            try:
                line = self._answers.get(timeout=max(0.0, min(left, _LISTEN)))
                break
            except queue.Empty:
                if self.cancel.is_set():
                    self._stop()
                    raise EngineStopped("interrupted") from None
                if left <= 0:
                    self._stop()
                    text = f"ngspice did not finish within {self.time_limit:g} s (--time-limit)"
                    raise self._failure(EngineTimeout, text, deck) from None
        if line is None:
            raise self._crashed(deck)
        answer: dict[str, Any] = json.loads(line)
        return answer

    def _crashed(self, deck: Path) -> BoardsimError:
        code = self._process.wait() if self._process else None
        self._stop()
        how = f"signal {-code}" if code is not None and code < 0 else f"status {code}"
        return self._failure(EngineCrash, f"ngspice's process ended by itself ({how})", deck)

    def _stop(self) -> None:
        if self._process is not None:
            for stream in (self._process.stdin, self._process.stdout):
                if stream is self._process.stdin and stream is not None:
                    with contextlib.suppress(OSError):
                        stream.close()
            self._process.kill()
            self._process.wait()
            self._process = None

    def _failure(
        self, kind: type[EngineCrash | EngineTimeout | NoConvergence | DeckRejected], text: str, deck: Path
    ) -> BoardsimError:
        """The error for a failed run, with deck and log copied to where the user finds them."""
        self.keep.mkdir(parents=True, exist_ok=True)
        kept_deck, kept_log = self.keep / _KEPT_DECK, self.keep / _KEPT_LOG
        shutil.copyfile(deck, kept_deck)
        if files := _model_files(deck):
            text += f" (the deck holds vendors' models, which can be the cause: {', '.join(files)})"
        log = self.folder / "ngspice.log"
        if log.exists():
            shutil.copyfile(log, kept_log)
        else:
            kept_log.write_text("ngspice wrote no log\n", encoding="utf-8")
        return kind(text, kept_deck, kept_log)


def _model_files(deck: Path) -> tuple[str, ...]:
    """The vendors' files that a deck names."""
    lines = deck.read_text(encoding="utf-8").splitlines()
    return tuple(line.rpartition(MODEL_FILE)[2].strip() for line in lines if line.startswith(f"* {MODEL_FILE}"))


def _forward(stream: IO[str] | None, answers: queue.Queue[str | None]) -> None:
    """Move the worker's lines into a queue, which can be read with a time limit; None marks the end."""
    if stream is not None:
        with stream:
            for line in stream:
                answers.put(line)
    answers.put(None)
