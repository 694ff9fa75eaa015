"""A coil that pushes a magnet, or a coil that moves in a magnet's field: the force follows the current, and so does its sign."""

from __future__ import annotations

from typing import TYPE_CHECKING, Annotated, ClassVar, Literal

from pydantic import Field

from boardsim.parts.base import Assumption, Corner
from boardsim.parts.coil import Coil
from boardsim.parts.elements import Element, Inductor, Probe, Signal, Stored, VoltageLaw, current
from boardsim.parts.motion import Motion
from boardsim.parts.rules import Rule
from boardsim.quantities import FORCE_CONSTANT, Quantity

if TYPE_CHECKING:
    from boardsim.parts.motion import Floats

_POLARITY = "the other polarity (wired), more current, or a weaker spring"


class MovingMagnetCoil(Coil):
    """A coil whose force is its current times a constant.

    Notes
    -----
    F = K i, and the motion induces K dx/dt against the current (the two constants are one, in N/A and V s/m: what the source
    gives is heat, field and motion): v = R i + L di/dt + K dx/dt. Holds while the magnet stays where the coil's field is
    even, for currents that do not demagnetise it, and for iron that does not saturate; the attraction between magnet and iron nearby is left out. Wired the other way
    round the coil pulls the magnet against its stop.

    References
    ----------
    J. Gogue, J. Stupak, Theory and practice of electromagnetic design of DC motors and actuators, chapter on voice coils: force
    constant and back-EMF constant are the same number.
    """

    role: ClassVar[str] = "coil"
    kind: Literal["moving-magnet"] = "moving-magnet"  # type: ignore[assignment]  # a kind of its own
    force_constant: Annotated[Quantity, FORCE_CONSTANT] = Field(
        description="force per current, which is volts per speed"
    )
    wired: Literal["right", "reversed"] = Field("right", description="whether a pulse pushes it away from its rest")
    motion: Motion

    @property
    def return_time(self) -> float:
        """How long what it moves needs to come back. [s]"""
        return self.motion.return_time

    def tolerances(self) -> dict[str, Quantity]:
        """What the corners vary in this part."""
        return {**super().tolerances(), **self.motion.tolerances()}

    def field(self, name: str, a: str, b: str, corner: Corner) -> tuple[tuple[Element, ...], Signal]:
        """Inductance, the voltage of the motion, and the magnet."""
        henries = corner.take(self.inductance, "inductance")
        k = self.force_constant.typ * (1 if self.wired == "right" else -1)
        coil = Inductor(f"{name}_l", a, f"{name}_li", henries)
        return (
            coil,
            VoltageLaw(f"{name}_b", f"{name}_li", b, f"{k!r}*V({name}_v)"),
            *self.motion.elements(name, f"{k!r}*I(L{name}_l)", corner),
        ), current(coil)

    def stored(self, corner: Corner) -> Stored:
        """What field and motion hold."""
        henries = corner.take(self.inductance, "inductance")

        def law(i: Floats, x: Floats, v: Floats) -> Floats:
            return henries / 2 * i**2 + self.motion.stored(x, v, corner)

        return Stored(("i_l", "position", "speed"), law)

    def more_probes(self, name: str, corner: Corner) -> tuple[Probe, ...]:
        """What moves."""
        return self.motion.probes(name)

    def taken_at_ends(self) -> tuple[Quantity, ...]:
        """The limits of its motion."""
        return self.motion.limits()

    def more_rules(self) -> tuple[Rule, ...]:
        """What the motion is held against."""
        return self.motion.rules(_POLARITY)

    def more_assumed(self, label: str) -> tuple[Assumption, ...]:
        """What had to be supplied for the motion."""
        return self.motion.assumed(f"coil {label}")
