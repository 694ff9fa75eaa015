"""What moves: a mass between two stops, with its spring, friction, gravity and load. A coil's force drives it."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING, Annotated, Literal

from pydantic import Field, model_validator

from boardsim.errors import QuantityError
from boardsim.parts.base import Assumption, Corner, listed
from boardsim.parts.elements import GROUND, Capacitor, CurrentLaw, Element, Probe, Resistor, Transfer, scaled, voltage
from boardsim.parts.record import Record
from boardsim.parts.rules import Limit, MotionRule, Motions
from boardsim.quantities import (
    DAMPING,
    ENERGY,
    FORCE,
    LENGTH,
    MASS,
    POSITIVE_TIME,
    SHARE,
    STIFFNESS,
    Quantity,
    assume,
)

if TYPE_CHECKING:
    import numpy as np
    from numpy.typing import NDArray

    Floats = NDArray[np.float64]

GRAVITY = 9.80665  # [m/s^2], standard acceleration of free fall
_CREEP = 2e-3  # [m/s], below which dry friction fades: a slope for Newton's method
_MM = 1e3  # positions are held in mm: near 1, as ngspice's tolerances want it
_STIFFEST = 20.0  # damping ratio of a stop that gives back nothing to speak of
_NEAR_ONE = 1e-7  # where both formulas divide by nothing
SMALL = (
    1e-3  # of what integrators would be with one ampere for each newton, volt or m/s: at picosecond steps the rounding
)
# of the charge of a farad makes milliamperes, which Newton's method cannot meet
# And of the position's integrator once more: with the speed's equation and this one on one scale ngspice takes the speed's part in this as
# its pivot, and at picosecond steps loses the speed in the rounding of C/dt times the position ("timestep too small" at turn-off).
_FAINT = 1e-3
_LEAK = 1e12  # [ohm], gives the integrators a way to ground at direct current; hours against a run


def damping_of_bounce(restitution: float) -> float:
    """Damping ratio of a stop from its coefficient of restitution.

    Parameters
    ----------
    restitution : float
        Speed after an impact over the speed before it. [1]

    Returns
    -------
    float
        Damping over twice the root of stiffness times mass. [1]

    Notes
    -----
    The stop is a spring and a damper side by side, which push and never pull: the contact ends when their force is zero. For a
    damping ratio z below 1 it does so at w t = (pi - atan2(2 z r, 1 - 2 z^2)) / r with r = sqrt(1 - z^2), and the speed is then
    exp(-z w t) of what it was; above 1 at w t = ln((z + r) / (z - r)) / r with r = sqrt(z^2 - 1).

    References
    ----------
    T. Schwager, T. Poeschel, Coefficient of restitution and linear-dashpot model revisited, Granular Matter 9 (2007) 465.

    Examples
    --------
    >>> round(damping_of_bounce(0.3), 3)
    0.497
    """
    low, high = 0.0, _STIFFEST
    for _ in range(80):
        z = (low + high) / 2
        if _bounce(z) > restitution:
            low = z
        else:
            high = z
    return (low + high) / 2


def _bounce(z: float) -> float:
    """Speed after over speed before, at a damping ratio. [1]"""
    if abs(z - 1) < _NEAR_ONE:
        return math.exp(-2)
    if z < 1:
        r = math.sqrt(1 - z * z)
        return math.exp(-z / r * (math.pi - math.atan2(2 * z * r, 1 - 2 * z * z)))
    r = math.sqrt(z * z - 1)
    return math.exp(-z / r * math.log((z + r) / (z - r)))


class Motion(Record):
    """A mass that a coil moves from its rest at one stop towards the other.

    Notes
    -----
    m dv/dt = F - F_0 - k x - F_load - F_gravity - c v - F_friction tanh(v / 2 mm/s) - (stops), dx/dt = v. A stop is a spring and a damper
    that push back as long as the mass is in contact; its stiffness follows from how long a contact lasts, its damping from the
    coefficient of restitution. Ignores that a mass may turn, bend, or stick to its stop by remanence or grease.
    """

    travel: Annotated[Quantity, LENGTH] = Field(description="from stop to stop")
    mass: Annotated[Quantity, MASS] = Field(description="of all that moves")
    spring_preload: Annotated[Quantity, FORCE] = assume("0 N", FORCE, "no return spring given")
    spring_rate: Annotated[Quantity, STIFFNESS] = assume("0 N/m", STIFFNESS, "no return spring given")
    friction: Annotated[Quantity, FORCE] = assume("0 N", FORCE, "no friction given")
    damping: Annotated[Quantity, DAMPING] = assume("0 kg/s", DAMPING, "no friction that grows with speed given")
    load: Annotated[Quantity, FORCE] = assume("0 N", FORCE, "no load given")
    moves: Literal["sideways", "up", "down"] = Field(
        "sideways", description="which way the coil moves it, against gravity"
    )
    restitution: Annotated[Quantity, SHARE] = assume(
        "30 %", SHARE, "speed after an impact over that before it, metal on metal with a damper, from memory"
    )
    contact: Annotated[Quantity, POSITIVE_TIME] = assume(
        "100 us", POSITIVE_TIME, "how long an impact lasts, from memory"
    )
    arrives_within: Annotated[Quantity, POSITIVE_TIME] | None = Field(
        None, description="latest arrival after its pulse begins; the end of the pulse if absent"
    )
    impact: Annotated[Quantity, ENERGY] | None = Field(
        None, description="band that the energy of its blow has to lie in"
    )
    second_impact: Annotated[Quantity, SHARE] = assume(
        "20 %", SHARE, "share of the first blow's energy that a second one may have, from memory"
    )

    @model_validator(mode="after")
    def _comes_back(self) -> Motion:
        if not 0.02 <= self.restitution.typ <= 0.95:
            raise QuantityError("restitution must be between 2 % and 95 %")
        back = self.rest_force
        if back <= self.friction.max:
            raise QuantityError(
                f"nothing brings it back: spring, load and gravity press it to its rest with {back:.3g} N, and friction holds up to "
                f"{self.friction.max:.3g} N; give a spring_preload"
            )
        return self

    @property
    def weight(self) -> float:
        """What gravity presses towards the rest with. [N]"""
        return {"sideways": 0.0, "up": 1.0, "down": -1.0}[self.moves] * self.mass.typ * GRAVITY

    def tolerances(self) -> dict[str, Quantity]:
        """What the corners vary: what opposes the coil."""
        return {"opposing_force": self.spring_preload}

    def _steady(self, corner: Corner) -> float:
        """What presses it to its rest there, as it is run. [N]"""
        return corner.take(self.spring_preload, "opposing_force") + self.load.typ + self.weight

    @property
    def rest_force(self) -> float:
        """The least that presses it to its rest, there. [N]"""
        return self.spring_preload.min + self.load.typ + self.weight

    @property
    def return_time(self) -> float:
        """How long it flies back at the least, twice over to be sure. [s]"""
        free = self.rest_force - self.friction.max
        return 2 * math.sqrt(2 * self.mass.max * self.travel.max / free)

    def elements(self, name: str, force: str, corner: Corner) -> tuple[Element, ...]:
        """The mass in a deck: node `name`_x holds its position [mm], `name`_v its speed [m/s]; `force` is an expression. [N]"""
        x, v = f"V({name}_x)", f"V({name}_v)"
        s, m = self.travel.typ * _MM, self.mass.typ
        stiff = self._stiffness / _MM  # [N/mm]
        dash = 2 * damping_of_bounce(self.restitution.typ) * math.pi / self.contact.typ * m
        stiff, dash = SMALL * stiff, SMALL * dash
        near, far = f"-({stiff!r}*{x}+{dash!r}*{v})", f"-({stiff!r}*({x}-{s!r})+{dash!r}*{v})"
        node = f"{name}_v"
        # One source for each law: ngspice works out an expression once more for each node in it. What is a straight line is none.
        found: list[Element] = [
            Capacitor(node, node, GROUND, SMALL * m),  # a force is a current
            CurrentLaw(node, node, GROUND, f"{SMALL!r}*({force}-{self._steady(corner)!r})"),
            CurrentLaw(f"{name}_stops", node, GROUND, f"{x}<0 ? max({near},0) : ({x}>{s!r} ? min({far},0) : 0)"),
            Capacitor(f"{name}_x", f"{name}_x", GROUND, _FAINT * SMALL),
            Transfer(f"{name}_x", f"{name}_x", GROUND, node, GROUND, _FAINT * SMALL * _MM),
            Resistor(f"{name}_x", f"{name}_x", GROUND, _LEAK),
        ]
        if self.spring_rate.typ:
            found.append(
                Transfer(f"{name}_spring", GROUND, node, f"{name}_x", GROUND, SMALL * self.spring_rate.typ / _MM)
            )
        if self.friction.typ:
            found.append(
                CurrentLaw(f"{name}_rub", node, GROUND, f"-{SMALL * self.friction.typ!r}*tanh({v}/{_CREEP!r})")
            )
        if self.damping.typ:
            found.append(Resistor(f"{name}_drag", node, GROUND, 1 / (SMALL * self.damping.typ)))
        return tuple(found)

    @property
    def _stiffness(self) -> float:
        """Of a stop. [N/m]"""
        return self.mass.typ * (math.pi / self.contact.typ) ** 2

    def stored(self, x: Floats, v: Floats, corner: Corner) -> Floats:
        """Energy of the moving mass, its spring, gravity and what its stops hold.

        Parameters
        ----------
        x, v : (n,) array
            Position [m] and speed [m/s].
        corner : Corner

        Returns
        -------
        (n,) array
            [J]
        """
        import numpy as np

        past = np.maximum(x - self.travel.typ, 0.0) + np.minimum(x, 0.0)
        spring = (self._steady(corner) + self.spring_rate.typ / 2 * x) * x
        found: Floats = self.mass.typ / 2 * v**2 + spring + self._stiffness / 2 * past**2
        return found

    def probes(self, name: str) -> tuple[Probe, ...]:
        """Where it is, and how fast it moves."""
        return (
            Probe("position", scaled(1 / _MM, voltage(f"{name}_x")), "m"),
            Probe("speed", voltage(f"{name}_v"), "m/s"),
        )

    def rules(self, stays: str = MotionRule.stays) -> tuple[MotionRule, ...]:
        """What its motion is held against; `stays` is what to try where it does not move."""
        due = Limit.of(
            self.arrives_within, "latest arrival", "s", None, self.arrives_within.max if self.arrives_within else None
        )
        most = Limit.of(self.impact, "energy of the blow", "J", None, self.impact.max if self.impact else None)
        again = Limit.of(self.second_impact, "second blow's share", "1", None, self.second_impact.max)
        stop = Limit(None, "m", None, str(self.travel.origin), "travel")

        def rule(check: Motions, limit: Limit, least: float | None = None) -> MotionRule:
            return MotionRule(check, "position", "speed", self.travel.typ, self.mass.typ, limit, least, stays)

        return (
            rule("stroke", due),
            rule("held-in", stop),
            rule("impact", most, self.impact.min if self.impact else None),
            rule("second-impact", again),
            rule("return", stop),
        )

    def assumed(self, label: str) -> tuple[Assumption, ...]:
        """What had to be supplied."""
        return listed(
            label,
            spring_preload=self.spring_preload,
            spring_rate=self.spring_rate,
            friction=self.friction,
            damping=self.damping,
            load=self.load,
            restitution=self.restitution,
            length_of_an_impact=self.contact,
            second_impact=self.second_impact,
        )
