"""libngspice inside the worker process, through PySpice: where it is found, and which of its messages matter."""

from __future__ import annotations

import ctypes.util
import logging
import os
import re
from collections.abc import Callable
from pathlib import Path
from typing import Any

from PySpice.Spice.NgSpice.Shared import FFI, NgSpiceShared, ffi, ffi_string_utf8

HOW_TO_INSTALL = "install ngspice and libngspice0 (Debian, Ubuntu: apt-get install ngspice libngspice0), or name the library in NGSPICE_LIBRARY_PATH"

# Only these mean that a run failed. Other lines on its stderr are talk: progress, and since version 42 the name
# of the matrix solver, which PySpice would take for an error.
_FATAL = re.compile(
    r"timestep too small|singular matrix|no such parameter|unrecognized parameter|unknown (?:model|device|subckt)"
    r"|unable to find definition|could not find a valid modelname|can't find model|error on line|fatal|aborted"
    r"|incomplete or empty netlist|syntax error|undefined|no circuit loaded|out of memory|gmin stepping failed"
    r"|source stepping failed|iteration limit reached|circuit not parsed",
    re.IGNORECASE,
)
# ngspice writes what it is about to try without an end of line, so that what became of the try stands behind it.
_RETRIED = re.compile(
    r"gmin stepping failed|source stepping failed|iteration limit reached"
    r"|^(?:trying gmin =\s*\S+\s+|supplies reduced to\s*\S+\s*%\s+)*warning:\s*singular matrix",
    re.IGNORECASE,
)


def fatal_lines(messages: list[str]) -> list[str]:
    """The messages that mean failure.

    Notes
    -----
    A failed gmin or source stepping, or a matrix that is singular at a try, is only a step on the way to the
    operating point: it counts by what follows (a run that does not reach its end is refused), not by itself.
    """
    return [m for m in messages if _FATAL.search(m) and not _RETRIED.search(m)]


def find_library() -> str:
    """Path or name under which libngspice can be opened, if it is there."""
    named = os.environ.get("NGSPICE_LIBRARY_PATH")
    if named:
        return named
    # Debian ships libngspice.so.0 without the bare name that PySpice asks for.
    return ctypes.util.find_library("ngspice") or "libngspice.so.0"


class _WithoutInitData:
    """The library, with the callback for a run's vectors left out.

    ngspice 39 crashes when it streams a run to a file ("run FILE") while that callback is set, since such a run
    has no plot in memory that could be described. Streaming is what keeps memory bounded.
    """

    def __init__(self, library: Any) -> None:
        self._library = library

    def __getattr__(self, name: str) -> Any:
        return getattr(self._library, name)

    def ngSpice_Init(self, *callbacks: Any) -> Any:  # noqa: N802 - the library's name
        send_char, send_stat, leave, send_data, _send_init_data, background, user = callbacks
        return self._library.ngSpice_Init(send_char, send_stat, leave, send_data, FFI.NULL, background, user)


class Ngspice(NgSpiceShared):  # type: ignore[misc]  # PySpice has no types
    """One libngspice; its messages are collected and judged here, not by PySpice."""

    def __init__(self, library: str, on_status: Callable[[str], None]) -> None:
        self.messages: list[str] = []
        self._on_status = on_status
        type(self).LIBRARY_PATH = library
        logging.getLogger("PySpice").setLevel(logging.CRITICAL)
        super().__init__()

    def _load_library(self, verbose: bool) -> None:
        super()._load_library(verbose)
        self._ngspice_shared: Any = _WithoutInitData(self._ngspice_shared)

    @staticmethod
    def _send_char(message_c: Any, ngspice_id: int, user_data: Any) -> int:
        """Keep the message. PySpice's own version raises on any text on stderr."""
        self = ffi.from_handle(user_data)
        message = ffi_string_utf8(message_c)
        stream, _, text = message.partition(" ")
        self.messages.append(text)
        if stream == "stdout":
            self._stdout.append(text)
        return 0

    def send_stat(self, message: str, ngspice_id: int) -> int:
        """Pass progress on."""
        self._on_status(message)
        return 0

    def simulate(self, deck: str, raw: Path) -> list[str]:
        """Run a deck, streaming its waveforms to a raw file.

        Returns
        -------
        list of str
            The messages that mean failure; none if it went well.
        """
        start = len(self.messages)
        try:
            self.load_circuit(deck)
            failed = fatal_lines(self.messages[start:])
            if not failed:
                # ngspice folds names to lower case but keeps quoted ones.
                self.exec_command("set filetype=binary")
                self.exec_command(f"run {raw.name}")
                failed = fatal_lines(self.messages[start:])
        except NameError as err:  # PySpice's way to say that a call returned an error code
            failed = [*fatal_lines(self.messages[start:]), str(err)]
        self.exec_command("destroy all")
        self.exec_command("remcirc")
        return failed
