"""A reference writer of captures: what a controller's SPI puts on the lines to a chain of registers, through pyvcd.

It knows nothing of the tool's own registers: a frame is a list of outputs that are to be on, sent in mode 0 (the data is
set half a clock period before each rising edge), the bit of the last output first, as a chain of 74HC595 wants it (NXP
74HC595; 74HCT595 rev. 6, table 3: what was shifted in first ends at the last output).
"""

from __future__ import annotations

import io
from collections.abc import Iterable, Iterator, Mapping, Sequence
from dataclasses import dataclass, field

from vcd import VCDWriter

LINES = ("data", "clock", "latch", "enable", "clear")
IDLE = {"data": 0, "clock": 0, "latch": 0, "enable": 0, "clear": 1}


@dataclass
class BusWriter:
    """Levels of the lines by time, in units of the dump.

    Attributes
    ----------
    outputs : int
        Of the whole chain.
    half : int
        Half a clock period.
    settle : int
        From the last rising clock's period to the rising latch.
    """

    outputs: int
    half: int
    settle: int
    changes: list[tuple[int, str, int]] = field(default_factory=list)

    def put(self, at: int, line: str, level: int) -> None:
        self.changes.append((at, line, level))

    def frame(self, at: int, on: Iterable[int], bits: int | None = None) -> int:
        """Send one frame with these outputs on; `bits` of it only, the last ones. Returns when the latch rises."""
        word = set(on)
        sent = [int(k in word) for k in reversed(range(self.outputs))][-bits if bits else None :]
        return self.raw(at, sent)

    def raw(self, at: int, bits: Sequence[int], latch: bool = True) -> int:
        for k, bit in enumerate(bits):
            t = at + 2 * self.half * k
            self.put(t, "data", bit)
            self.put(t + self.half, "clock", 1)
            self.put(t + 2 * self.half, "clock", 0)
        done = at + 2 * self.half * len(bits) + self.settle
        if latch:
            self.put(done, "latch", 1)
            self.put(done + 2 * self.half, "latch", 0)
        return done

    def text(
        self,
        end: int,
        *,
        timescale: str = "1 ns",
        lines: Sequence[str] = LINES[:3],
        every: int = 1,
        idle: Mapping[str, int | None] = IDLE,
    ) -> str:
        """The dump; `every` samples the lines on a grid, as an analyser does, and `end` is its last time.

        `idle` are the levels before the first change, None where there is none.
        """
        out = io.StringIO()
        with VCDWriter(out, timescale=timescale, date="", version="reference writer") as writer:
            var = {line: writer.register_var("probe", line, "wire", size=1, init=idle[line]) for line in lines}
            for at, line, level in sampled(sorted(self.changes, key=lambda c: c[0]), every):
                if line in var:
                    writer.change(var[line], at, level)
            writer.close(end)
        return out.getvalue()


def sampled(changes: Iterable[tuple[int, str, int]], every: int) -> Iterator[tuple[int, str, int]]:
    """What an analyser sees that looks every so often: at each of its times the level that holds then."""
    if every == 1:
        yield from changes
        return
    seen: dict[tuple[int, str], int] = {}
    for at, line, level in changes:
        seen[-(-at // every) * every, line] = level
    yield from ((at, line, level) for (at, line), level in sorted(seen.items(), key=lambda item: item[0][0]))


def frames_of(pulses: Iterable[tuple[int, int, int]]) -> list[tuple[int, set[int]]]:
    """When a controller with a timer sends which outputs: at every time at which (output, start, width) changes one."""
    edges: dict[int, list[tuple[int, bool]]] = {}
    for output, start, width in pulses:
        edges.setdefault(start, []).append((output, True))
        edges.setdefault(start + width, []).append((output, False))
    on: set[int] = set()
    frames = []
    for at in sorted(edges):
        on = on.difference(o for o, turn in edges[at] if not turn).union(o for o, turn in edges[at] if turn)
        frames.append((at, set(on)))
    return frames


CAPTURE = """\
capture = "bus.vcd"
[signals]
data = "data"
clock = "probe.clock"
latch = "latch"
"""
