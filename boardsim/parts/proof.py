"""A line of a datasheet and the test circuit that reproduces it on the model. Values only: `scenarios` runs them."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

from boardsim.parts.elements import Element, Signal
from boardsim.quantities import Quantity


@dataclass(frozen=True)
class AtEnd:
    """The value of a signal at the end of the run. [its unit]"""

    signal: Signal


@dataclass(frozen=True)
class Ratio:
    """One signal over another at the end of the run, such as a resistance from voltage and current."""

    over: Signal
    under: Signal


@dataclass(frozen=True)
class Between:
    """The time from one signal's crossing of a level to another's, times a factor.

    The factor is 1 for a time, and the constant current for a charge.

    Attributes
    ----------
    first, second : Signal
    first_level, second_level : float
        [unit of the signal]
    first_edge, second_edge : {"rise", "fall"}
    factor : float
    relative : bool
        The second level counts from what the second signal is when the first crosses, as where a plateau ends.
    """

    first: Signal
    first_level: float
    first_edge: Literal["rise", "fall"]
    second: Signal
    second_level: float
    second_edge: Literal["rise", "fall"]
    factor: float = 1.0
    relative: bool = False


@dataclass(frozen=True)
class Proof:
    """What a datasheet prints, and how to measure it on the model.

    Attributes
    ----------
    quantity, unit : str
        Such as "on-resistance at V_GS 4.5 V", "ohm".
    printed : Quantity
        What is printed; a band where minimum and maximum are. [unit]
    elements : tuple of Element
        The test circuit with the part in it; node "0" is ground.
    duration : float
        [s]
    reading : AtEnd, Ratio or Between
    tolerance : float
        How far the model may be from the typical point, as a share of it.
    why : str
        Why that tolerance.
    shapes : bool
        Whether the printed number shapes the model; False where it only bounds it (a maximum without a typical figure):
        then the model must lie inside the band, however far from its middle.
    temperature : float
        Of the junction in the test circuit; 25 degC unless the datasheet says so. [K]
    """

    quantity: str
    unit: str
    printed: Quantity
    elements: tuple[Element, ...]
    duration: float
    reading: AtEnd | Ratio | Between
    tolerance: float = 0.10
    why: str = ""
    shapes: bool = True
    temperature: float = 298.15
