"""Peak and hold: a pulse that begins with full drive and is chopped afterwards, and how register frames count such a chop."""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass

from boardsim.board.schema import Chain
from boardsim.errors import QuantityError
from boardsim.firing.registers import frame_time
from boardsim.parts.controller import Controller
from boardsim.quantities import Quantity, in_units

KEYS = ("peak", "hold", "hold_frequency")
MOST_CHOPS = 1_000_000
_ROUNDING = 1e-9  # share of a register frame within which a moment is the frame's own; decimal times are no binary ones

Span = tuple[float, float]
"""From when to when. [s]"""


@dataclass(frozen=True)
class Hold:
    """What a pulse does after its peak.

    Attributes
    ----------
    peak : float
        How long it is driven without a break. [s]
    duty : float
        Share of each period for which it is driven afterwards. [1]
    frequency : float
        [Hz]
    """

    peak: float
    duty: float
    frequency: float

    @property
    def period(self) -> float:
        """Of the chop, as it is asked for. [s]"""
        return 1 / self.frequency


@dataclass(frozen=True)
class FrameChop:
    """A chop counted in register frames: of so many per period the output is on for some.

    Attributes
    ----------
    slot : float
        From one frame's start to the next one's. [s]
    frames, on : int
        Per period.

    Notes
    -----
    Every edge of an output takes a register frame, so nothing finer than a frame can be sent. All channels are chopped on the
    same beat of frames: one frame carries the changes of all of them, and their number does not matter.
    """

    slot: float
    frames: int
    on: int

    @property
    def duty(self) -> float:
        """[1]"""
        return self.on / self.frames

    @property
    def period(self) -> float:
        """[s]"""
        return self.frames * self.slot

    def after(self, t: float) -> int:
        """The number of the first frame that begins at a time or after it, counted from 0 at 0. [s]"""
        return math.ceil(t / self.slot - _ROUNDING)


def slot_time(chain: Chain, controller: Controller | None) -> float:
    """From the start of one register frame to the earliest start of the next, in whole ticks of the controller. [s]"""
    timer = controller or Controller()
    least = frame_time(chain) + timer.frame_gap.typ
    tick = timer.tick.typ
    return least if tick <= 0 else round(math.ceil(least / tick - _ROUNDING) * tick, 12)


def frame_chop(hold: Hold, slot: float) -> FrameChop:
    """How a chop is counted in register frames.

    Parameters
    ----------
    hold : Hold
    slot : float
        From one frame's start to the next one's. [s]

    Raises
    ------
    QuantityError
        If too few frames fit into a period; says the highest frequency that is possible.

    Notes
    -----
    A period of T has the whole number of frames n that is nearest to T / slot, and the output is on for the whole number k that
    is nearest to n times the duty. With k = 0 it would never be on, with k = n never off.

    Examples
    --------
    At 10 us from frame to frame a period of 1 kHz has 100 frames, of which 30 are 30 %:

    >>> frame_chop(Hold(8e-3, 0.3, 1e3), 10e-6)
    FrameChop(slot=1e-05, frames=100, on=30)
    """
    frames = _nearest(hold.period / slot)
    least = fewest_frames(hold.duty)
    if frames < least:
        raise QuantityError(
            f"a period of {in_units(hold.period, 's')} has room for {frames} register frame{'' if frames == 1 else 's'} of {in_units(slot, 's')}, and a duty of "
            f"{hold.duty:.3g} needs at least {least}, since each edge takes one; hold_frequency may be up to "
            f"{_written_down(1 / (least * slot))} through the chain of registers"
        )
    return FrameChop(slot, frames, _nearest(hold.duty * frames))


def fewest_frames(duty: float) -> int:
    """With how many register frames per period a duty leaves at least one on and one off.

    Parameters
    ----------
    duty : float
        Between 0 and 1. [1]

    Examples
    --------
    >>> [fewest_frames(d) for d in (0.5, 0.3, 0.1, 0.9)]
    [2, 2, 5, 6]
    """
    n = 2
    while not 1 <= _nearest(duty * n) <= n - 1:
        n += 1
    return n


def _nearest(x: float) -> int:
    """The nearest whole number, halves upwards; what is one but for rounding of decimals is that one."""
    return math.floor(x + 0.5 + _ROUNDING)


def _written_down(hertz: float) -> str:
    """A frequency that may be typed as it is written: never rounded up."""
    step = 10 ** (math.floor(math.log10(hertz)) - 2)
    return in_units(math.floor(hertz / step) * step, "Hz")


def chopped(start: float, stop: float, hold: Hold, chop: FrameChop) -> Iterator[Span]:
    """When a held pulse is driven, as register frames command it. [s]

    Parameters
    ----------
    start, stop : float
        Of the pulse. [s]
    hold : Hold
    chop : FrameChop

    Notes
    -----
    The peak ends with the first frame of the beat at or after its time. The chop begins with its off-time, since the current has
    to fall from the peak's to the hold's.
    """
    first = chop.after(start + hold.peak)
    end = round(first * chop.slot, 12)  # to the picosecond, as all times of pulses are
    yield start, min(end, stop)
    while True:
        on, off = ((first + k) * chop.slot for k in (chop.frames - chop.on, chop.frames))
        if on >= stop:
            return
        yield round(on, 12), round(min(off, stop), 12)
        first += chop.frames


def joined(spans: Sequence[Span]) -> list[Span]:
    """Spans by time, those that touch or overlap made one. [s]

    Examples
    --------
    >>> joined([(3.0, 4.0), (0.0, 1.0), (1.0, 2.0)])
    [(0.0, 2.0), (3.0, 4.0)]
    """
    found: list[Span] = []
    for a, b in sorted(spans):
        if found and a <= found[-1][1]:
            found[-1] = (found[-1][0], max(found[-1][1], b))
        else:
            found.append((a, b))
    return found


def hold_of(given: Mapping[str, Quantity | None], width: float) -> Hold | None:
    """The hold that the keys `peak`, `hold` and `hold_frequency` of a pulse say; none where none of them is given.

    Parameters
    ----------
    given : mapping of key to Quantity or None
        [s], [1], [Hz]
    width : float
        Of the pulse. [s]

    Raises
    ------
    QuantityError
        If they do not go together; says why.
    """
    if all(given.get(key) is None for key in KEYS):
        return None
    if missing := [key for key in KEYS if given.get(key) is None]:
        raise QuantityError(
            f"a pulse that is held needs peak (its time of full drive), hold (the duty after it) and hold_frequency; "
            f"{' and '.join(missing)} {'is' if len(missing) == 1 else 'are'} missing"
        )
    peak, duty, frequency = (q for key in KEYS if (q := given[key]) is not None)
    if toleranced := [key for key in KEYS if (q := given[key]) is not None and q.toleranced]:
        raise QuantityError(f"{toleranced[0]} is commanded and has no tolerance; leave it out")
    if not 0 < peak.typ < width:
        raise QuantityError(
            f"a peak of {in_units(peak.typ, 's')} is not within the pulse of {in_units(width, 's')}; a pulse that is not held has "
            "neither peak nor hold"
        )
    if duty.typ >= 1:
        raise QuantityError("a hold of 100 % is full drive; leave peak, hold and hold_frequency out")
    return Hold(peak.typ, duty.typ, frequency.typ)
