"""The edges of the register outputs as a value change dump (IEEE 1364), for waveform viewers and firmware tests."""

from __future__ import annotations

import io
import re
from collections.abc import Mapping, Sequence

_PICOSECOND = 1e-12  # [s], the step of the dump's times; edges are told apart to that


def safe_names(labels: Sequence[str]) -> tuple[str, ...]:
    """Labels as names that every reader of such dumps takes: ASCII letters, digits and underscores, each one once.

    Examples
    --------
    >>> safe_names(["lane 0", "lane-0", "7th (left)"])
    ('lane_0', 'lane_0_2', 'n7th_left')
    """
    found: dict[str, None] = {}
    for label in labels:
        stem = re.sub(r"[^A-Za-z0-9]+", "_", label).strip("_") or "channel"
        stem = stem if stem[0].isalpha() else f"n{stem}"
        name, k = stem, 2
        while name in found:
            name, k = f"{stem}_{k}", k + 1
        found[name] = None
    return tuple(found)


def edges_text(
    scope: str, labels: Mapping[int, str], levels: Mapping[int, Sequence[tuple[float, bool]]], duration: float
) -> str:
    """A value change dump with one signal of one bit per channel.

    Parameters
    ----------
    scope : str
        Name of the board.
    labels : mapping of channel to str
    levels : mapping of channel to sequence of (time, level)
        Of the register output that drives it, the first entry at 0. [s]
    duration : float
        The dump's last time. [s]

    Notes
    -----
    Times are in picoseconds: rounding moves no edge by more than half of one. An output is 1 while it is high, which turns the
    coil on or off as the channel's switch has it.
    """
    from vcd import VCDWriter

    text = io.StringIO()
    names = dict(zip(labels, safe_names([*labels.values()]), strict=True))
    (module,) = safe_names([scope])
    with VCDWriter(text, timescale="1 ps", date="", version="boardsim: register outputs") as writer:
        lines = {c: writer.register_var(module, names[c], "wire", size=1, init=int(levels[c][0][1])) for c in labels}
        edges = sorted(
            ((round(t / _PICOSECOND), c, int(level)) for c in labels for t, level in levels[c][1:]),
            key=lambda edge: edge[0],
        )
        for at, channel, level in edges:
            writer.change(lines[channel], at, level)
        writer.close(max(round(duration / _PICOSECOND), edges[-1][0] if edges else 0))
    return text.getvalue()
