"""Waveforms in a raw file on disk, read in blocks so that memory stays bounded."""

from __future__ import annotations

import re
from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from boardsim.errors import NoConvergence

BLOCK = 4096  # points at a time; 24 channels make about 8 MB of them

_HEADER = 1 << 20


@dataclass(frozen=True)
class Waves:
    """One run's waveforms.

    Attributes
    ----------
    path : Path
        ngspice's binary raw file.
    names : tuple of str
        Columns: "time" first, then the saved vectors as ngspice names them.
    points : int
    offset : int
        Where the numbers begin. [byte]
    """

    path: Path
    names: tuple[str, ...]
    points: int
    offset: int

    def blocks(self, size: int = BLOCK) -> Iterator[NDArray[np.float64]]:
        """Rows of (time, vectors...), a block at a time; each block begins with the last row of the one before.

        Parameters
        ----------
        size : int
            Rows per block.

        Yields
        ------
        (n, len(names)) array
            [s], then [V] or [A]
        """
        columns = len(self.names)
        with self.path.open("rb") as handle:
            handle.seek(self.offset)
            last = np.empty((0, columns))
            left = self.points
            while left > 0:
                count = min(size, left)
                rows = np.fromfile(handle, dtype=np.float64, count=count * columns).reshape(-1, columns)
                yield np.concatenate([last, rows])
                last = rows[-1:]
                left -= count

    def end(self) -> float:
        """Time of the last point. [s]"""
        with self.path.open("rb") as handle:
            handle.seek(self.offset + (self.points - 1) * len(self.names) * 8)
            return float(np.fromfile(handle, dtype=np.float64, count=1)[0])


def read_waves(path: Path) -> Waves:
    """Open a binary raw file.

    Raises
    ------
    NoConvergence
        If it holds no points, or was cut off.
    """
    with path.open("rb") as handle:
        head = handle.read(_HEADER)
    while (at := head.find(b"Binary:\n")) < 0:
        with path.open("rb") as handle:
            bigger = handle.read(2 * len(head))
        if len(bigger) == len(head):
            raise NoConvergence("ngspice wrote no waveforms")
        head = bigger
    text = head[:at].decode("latin-1")
    columns = int(_field(text, "No. Variables"))
    points = int(_field(text, "No. Points"))
    names = tuple(line.split()[1].lower() for line in text.split("Variables:\n", 1)[1].splitlines()[:columns])
    offset = at + len(b"Binary:\n")
    if points < 2:
        raise NoConvergence("ngspice wrote no waveforms")
    if path.stat().st_size < offset + points * columns * 8:
        raise NoConvergence("ngspice's waveforms are cut off")
    return Waves(path, names, points, offset)


def _field(text: str, name: str) -> str:
    match = re.search(rf"^{re.escape(name)}:\s*(\d+)", text, re.MULTILINE)
    if not match:
        raise NoConvergence(f"ngspice's waveform file has no {name!r}")
    return match[1]
