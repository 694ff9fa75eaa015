"""Value change dumps read by a second library, vcdvcd, which shares nothing with the one that writes and reads them here."""

from __future__ import annotations

import signal

_before = signal.getsignal(signal.SIGPIPE)
from vcdvcd import VCDVCD  # noqa: E402 - importing it lets a closed pipe kill the process, which is undone below

signal.signal(signal.SIGPIPE, _before)


def levels_in(text: str) -> tuple[float, dict[str, list[tuple[int, str]]]]:
    """The step of a dump's times [s], and every signal's (time, value) by its full name.

    It takes one change per line and is told nothing of damage; dumps that a library wrote are of that form.
    """
    dump = VCDVCD(vcd_string=text)
    return float(dump.timescale["timescale"]), {name: dump[name].tv for name in dump.signals}
