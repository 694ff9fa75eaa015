"""Small boards for firing tests: a chain of registers with one coil on every output."""

from __future__ import annotations

from pathlib import Path

from boardsim.board.reader import Board, read_board
from boardsim.firing.pattern import Pattern, Pulse

TEXT = """\
name = "needle selector"
supply = {{ voltage = "12 V" }}
cable = {{ area = "1 mm2", length = "1 m" }}
bulk = {{ capacitance = "1000 uF", esr = "50 mohm" }}
logic = {{ voltage = "5 V" }}

[chain]
register = "74HC595"
count = {count}
clock = "{clock}"
latch_time = "{latch_time}"
bit_order = "{bit_order}"
first_out = "{first_out}"
active = "{active}"

{controller}

[coils.needle]
resistance = "30 ohm"
inductance = "9 mH"

[channels."{channels}"]
coil = "needle"
switch = {{ part = "n-logic-60v", gate = "100 ohm"{pulldown} }}
clamp = {{ kind = "diode", diode = "fast-2a" }}
{columns}
"""


def board(
    folder: Path,
    *,
    count: int = 2,
    clock: str = "1 MHz",
    latch_time: str = "1 us",
    bit_order: str = "msb",
    first_out: str = "far",
    active: str = "high",
    channels: str = "",
    columns: str = "",
    controller: str = "",
    held: bool = True,
) -> Board:
    """A board with a coil on every output of its chain, unless told otherwise; `held` by a pull-down at each gate."""
    path = folder / "board.toml"
    path.write_text(
        TEXT.format(
            count=count,
            clock=clock,
            latch_time=latch_time,
            bit_order=bit_order,
            first_out=first_out,
            active=active,
            channels=channels or f"0-{8 * count - 1}",
            columns=columns,
            pulldown=', pulldown = "10 kohm"' if held else "",
            controller=f"[controller]\n{controller}" if controller else "",
        ),
        encoding="utf-8",
    )
    return read_board(path)


def pattern(*pulses: tuple[int, float, float], duration: float | None = None) -> Pattern:
    """A pattern of (channel, start, width). [s]"""
    made = (Pulse(channel, start, width) for channel, start, width in pulses)
    return Pattern(Path("pattern.toml"), "made here", duration, tuple(sorted(made, key=lambda p: (p.start, p.channel))))
