"""A solenoid that pulls an iron plunger into itself: the inductance grows as the gap closes, and the growth is the force."""

from __future__ import annotations

from typing import TYPE_CHECKING, Annotated, ClassVar, Literal

from pydantic import Field, model_validator

from boardsim.errors import QuantityError
from boardsim.parts.base import Assumption, Corner
from boardsim.parts.coil import Coil
from boardsim.parts.elements import (
    CurrentLaw,
    Element,
    Inductor,
    Probe,
    Stored,
    scaled,
)
from boardsim.parts.motion import Motion
from boardsim.parts.rules import Rule
from boardsim.quantities import INDUCTANCE, Quantity

if TYPE_CHECKING:
    from boardsim.parts.motion import Floats

_MM = 1e3  # positions are held in mm


class PlungerCoil(Coil):
    """A coil with a plunger of iron in it.

    Notes
    -----
    Flux linkage is the state: d(lambda)/dt = v - R i. The gap's reluctance falls in proportion to the way x that the plunger has
    gone, so that with N turns 1/L = R_m/N^2 lies on a straight line between the open and the closed coil:

        i = lambda g(x),  g(x) = 1/L_open + (1/L_closed - 1/L_open) x / s.

    The force is that of the co-energy, F = dW'/dx at constant i, which in terms of lambda reads F = -lambda^2/2 dg/dx. What the source gives
    is heat, field lambda^2 g / 2 and motion, to the last joule. Holds for one working gap with an even field and iron that
    does not saturate; fringing makes the real force larger at a wide gap. The core-loss resistance lies across the flux.

    References
    ----------
    A. E. Fitzgerald, C. Kingsley, S. D. Umans, Electric Machinery, chapter 3 (energy and co-energy of a singly excited
    system); from memory.
    """

    role: ClassVar[str] = "coil"
    kind: Literal["plunger"] = "plunger"  # type: ignore[assignment]  # a kind of its own
    closed_inductance: Annotated[Quantity, INDUCTANCE] = Field(
        description="with the plunger all the way in; inductance is that at its rest"
    )
    motion: Motion

    @model_validator(mode="after")
    def _pulls(self) -> PlungerCoil:
        if self.closed_inductance.min <= self.inductance.max:
            raise QuantityError(
                "closed_inductance must be larger than inductance, which is that of the coil with its plunger at rest: the growth is its force"
            )
        return self

    def tolerances(self) -> dict[str, Quantity]:
        """What the corners vary in this part."""
        return {**super().tolerances(), "closed_inductance": self.closed_inductance, **self.motion.tolerances()}

    def held(self, amperes: float, corner: Corner) -> float:
        """The most that its field can hold at a current, with the plunger in. [A] -> [J]"""
        return 0.5 * corner.take(self.closed_inductance, "inductance") * amperes**2

    @property
    def inductances(self) -> tuple[float, float]:
        """The least and the largest that it has. [H]"""
        return self.inductance.min, self.closed_inductance.max

    @property
    def return_time(self) -> float:
        """How long what it moves needs to come back. [s]"""
        return self.motion.return_time

    def _slopes(self, corner: Corner) -> tuple[float, float]:
        """1/L at rest, and how much it falls with each metre. [1/H], [1/(H m)]"""
        opened, closed = (corner.take(q, "inductance") for q in (self.inductance, self.closed_inductance))
        return 1 / opened, (1 / closed - 1 / opened) / self.motion.travel.typ

    def field(self, name: str, a: str, b: str, corner: Corner) -> tuple[tuple[Element, ...], None]:
        """The open coil, beside it the current that the plunger's way takes off, and the plunger.

        The flux linkage is the open inductance times its own current; what flows in all is read at the winding's resistance.
        """
        rest, slope = self._slopes(corner)
        coil = Inductor(f"{name}_l", a, b, 1 / rest)
        i = f"I(L{name}_l)"
        return (
            coil,
            CurrentLaw(f"{name}_l", b, a, f"{slope / rest / _MM!r}*{i}*(V({name}_x)+{self.motion.travel.typ * _MM!r})"),
            *self.motion.elements(name, f"{-slope / 2 / rest**2!r}*{i}*{i}", corner),
        ), None

    def stored(self, corner: Corner) -> Stored:
        """What field and motion hold."""
        rest, slope = self._slopes(corner)

        def law(flux: Floats, x: Floats, v: Floats) -> Floats:
            return flux**2 * (rest + slope * x) / 2 + self.motion.stored(x, v, corner)

        return Stored(("flux", "position", "speed"), law)

    def more_probes(self, name: str, corner: Corner) -> tuple[Probe, ...]:
        """Its flux linkage, and what moves."""
        rest, _ = self._slopes(corner)
        return (Probe("flux", scaled(1 / rest, ((1.0, f"i(l{name}_l)"),)), "Wb"), *self.motion.probes(name))

    def taken_at_ends(self) -> tuple[Quantity, ...]:
        """The limits of its motion."""
        return self.motion.limits()

    def more_rules(self) -> tuple[Rule, ...]:
        """What the motion is held against."""
        return self.motion.rules()

    def more_assumed(self, label: str) -> tuple[Assumption, ...]:
        """What had to be supplied for the motion."""
        return self.motion.assumed(f"coil {label}")
