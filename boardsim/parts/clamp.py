"""What clamps have in common: where they sit, how their parts add up, and the resistor that several of them have."""

from __future__ import annotations

import itertools
import math
from collections.abc import Sequence
from typing import Annotated, Literal

from boardsim.errors import QuantityError
from boardsim.parts.base import Part, Stamp
from boardsim.parts.elements import Element, Port, Probe, Resistor, Signal, voltage
from boardsim.parts.record import Record
from boardsim.parts.rules import Limit, MeanRule, PulseRule
from boardsim.quantities import POSITIVE_TIME, POWER, Quantity

_E_FOLD = math.exp(
    -1.0
)  # share of its peak at which a power that decays exponentially has half of its energy before it


class CoilClamp(Part):
    """A clamp between the ends of a coil: on the board, or at the coil's own ends where the coil has leads."""

    to: Literal["rail"] = "rail"
    at: Literal["board", "coil"] = "board"

    def at_the_coil(self) -> bool:
        """Whether it sits at the coil's own ends."""
        return self.at == "coil"


class PulsePower(Record):
    """The highest power that a resistor stands in a single pulse of a length, as its datasheet's pulse load chart has it."""

    power: Annotated[Quantity, POWER]
    lasting: Annotated[Quantity, POSITIVE_TIME]


def pulse_points(points: Sequence[PulsePower]) -> tuple[tuple[float, float], ...]:
    """Lengths [s] and powers [W] of pulse ratings, the lengths rising.

    Raises
    ------
    QuantityError
        If a longer pulse may be higher, or two points have the same length.
    """
    found = sorted((p.lasting.typ, p.power.min) for p in points)
    for (t1, p1), (t2, p2) in itertools.pairwise(found):
        if t1 == t2 or p2 > p1:
            raise QuantityError("pulse points must fall in power as they rise in length, one for each length")
    return tuple(found)


def refuse_rising(points: tuple[PulsePower, ...]) -> tuple[PulsePower, ...]:
    """Pulse ratings as they were given.

    Raises
    ------
    QuantityError
        As `pulse_points`.
    """
    pulse_points(points)
    return points


def clamp_resistor(
    name: str,
    label: str,
    a: str,
    b: str,
    through: Signal,
    ohms: float,
    power: Quantity | None,
    pulse: Sequence[PulsePower],
) -> Stamp:
    """A resistor of a clamp, held against its power on average and in every pulse.

    Parameters
    ----------
    name : str
        Of its element.
    label : str
        For people, such as "snubber resistor".
    a, b : str
        Its nodes; `through` is the current from a to b.
    through : Signal
    ohms : float
        [ohm]
    power : Quantity or None
        What it stands for ever. [W]
    pulse : sequence of PulsePower

    Notes
    -----
    A pulse counts as long as its power is above 1/e of its peak. A current that decays with the time constant T makes a
    power that decays with T/2, whose energy is that of its peak lasting T/2: the same length. Makers' pulse load charts are
    drawn for rectangles, and treat exponential pulses so (common practice). Beyond the longest point see `PulseRule`.

    A swing makes a row of pulses: each is held against the ratings by itself, all of them together against the average.
    """
    v, i = f"v_{label}", f"i_{label}"
    points = pulse_points(pulse)
    advice = "choose a resistor that stands such pulses, a larger one, or several"
    return Stamp(
        elements=(Resistor(name, a, b, ohms),),
        probes=(Probe(v, voltage(a, b), "V"), Probe(i, through, "A")),
        ports=(Port(label, ((v, i),)),),
        rules=(
            MeanRule(
                "overpower",
                (v, i),
                Limit.of(power, "power", "W", "power"),
                "destroy",
                f"average power of the {label}",
                "choose a larger resistor, or fire less often",
                part=label,
            ),
            PulseRule(
                "surge",
                (v, i),
                Limit.of(pulse[0].power, "pulse power", "W", "power", points[0][1])
                if pulse
                else Limit.of(None, "pulse power", "W", "power"),
                points,
                power.min if power is not None else 0.0,
                _E_FOLD,
                "destroy",
                f"pulse power of the {label}",
                advice,
                part=label,
            ),
        ),
    )


def in_series(first: tuple[Element, ...], *stamps: Stamp) -> Stamp:
    """The stamps of a clamp's parts as one, after elements of its own."""
    return Stamp(
        elements=(*first, *(e for s in stamps for e in s.elements)),
        probes=tuple(p for s in stamps for p in s.probes),
        ports=tuple(p for s in stamps for p in s.ports),
        rules=tuple(r for s in stamps for r in s.rules),
        assumptions=tuple(a for s in stamps for a in s.assumptions),
        totals=tuple(t for s in stamps for t in s.totals),
        joins=tuple(j for s in stamps for j in s.joins),
    )
