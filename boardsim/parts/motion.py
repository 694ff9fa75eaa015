"""What moves: a mass between two stops, with its spring, friction, gravity and load. A coil's force drives it."""

from __future__ import annotations

import math
from functools import cache
from typing import TYPE_CHECKING, Annotated, Literal

from pydantic import Field, model_validator

from boardsim.errors import QuantityError
from boardsim.parts.base import Assumption, Corner, listed
from boardsim.parts.elements import (
    GROUND,
    ONE,
    AtRest,
    Capacitor,
    CurrentLaw,
    Element,
    One,
    Probe,
    Resistor,
    Transfer,
    plus,
    scaled,
    voltage,
)
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
    in_units,
)

if TYPE_CHECKING:
    import numpy as np
    from numpy.typing import NDArray

    Floats = NDArray[np.float64]

GRAVITY = 9.80665  # [m/s^2], standard acceleration of free fall
_CREEP = 2e-3  # [m/s], below which dry friction fades: a slope for Newton's method
_MM = 1e3  # positions are held in mm: near 1, as ngspice's tolerances want it
_STIFFEST = 20.0  # damping ratio of a stop that gives back 1 or 2 %
_ONSET = 2.5  # how much stiffer than its spring a stop is at the onset of an impact, at the most
_SHORTEST_CONTACT = 1e-6  # [s], hard metal on hard metal lasts tens of these
_MOST_SAG = 0.02  # of the travel: what is within it counts as back at its rest
_STILL = 1e-6  # [m/s], slower than which a stop's damping is left out: most of a board's coils rest most of the time
_PANELS = 400  # of Simpson's rule
# [A/N], [A s/m]: how many amperes stand for a newton or for a speed. At picosecond steps the rounding of the charge of a farad, which
# one ampere would need, makes milliamperes, which Newton's method cannot meet.
_SMALL = 1e-3


@cache
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
    The stop is that of `Motion`. With w^2 = k/m, u = r cos(p), w d = r sin(p) and h = max(min(sin p + 2 z cos p, C sin p), 0) its law makes
    d(ln r)/dp = cos(p) (sin(p) - h) / (cos(p)^2 + h sin(p)), whatever the speed: the restitution hangs on z alone. The mass leaves where the
    force ends, at tan(p) = -2 z, with r |cos p|. Simpson's rule where the integral is not closed.

    Examples
    --------
    >>> round(damping_of_bounce(0.3), 3)
    0.722
    """
    low, high = 0.0, _STIFFEST
    for _ in range(40):
        z = (low + high) / 2
        if _bounce(z) > restitution:
            low = z
        else:
            high = z
    return (low + high) / 2


def _bounce(z: float) -> float:
    """Speed after over speed before, at a damping ratio. [1]"""
    onset, end = math.atan(2 * z / (_ONSET - 1)), math.pi - math.atan(2 * z)
    total = -math.log(1 + (_ONSET - 1) * math.sin(onset) ** 2) / 2  # closed as long as the bound holds
    step = (end - onset) / _PANELS
    for k in range(_PANELS + 1):
        sine, cosine = math.sin(onset + k * step), math.cos(onset + k * step)
        slope = -2 * z * cosine**2 / (cosine**2 + (sine + 2 * z * cosine) * sine)
        total += (1 if k in (0, _PANELS) else 4 if k % 2 else 2) * step / 3 * slope
    return math.exp(total) * abs(math.cos(end))


class Motion(Record):
    """A mass that a coil moves from its rest at one stop towards the other.

    Notes
    -----
    m dv/dt = F - F_0 - k x - F_load - F_gravity - c v - F_friction tanh(v / 2 mm/s) - (stops), dx/dt = v. A stop is
    a spring and a damper that push and never pull, and whose force begins with the way and not with a step: d deep and pressed in
    at a speed u it pushes with max(min(k d + c u, 2.5 k d), 0). The restitution is then the same at every speed, as for the
    well-known spring and damper without the bound, whose step costs ngspice its accuracy. k = m (pi / T)^2 follows from how long a contact
    would last without loss, c from the restitution.
    Ignores that a mass may turn, bend, or stick to its stop by remanence or grease.

    References
    ----------
    T. Schwager, T. Poeschel, Coefficient of restitution and linear-dashpot model revisited, Granular Matter 9 (2007) 465: the spring and
    damper that do not pull. The bound at the onset is ours.
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
        "300 us", POSITIVE_TIME, "how long an impact lasts, on a stop with a thin washer, from memory"
    )
    arrives_within: Annotated[Quantity, POSITIVE_TIME] | None = Field(
        None, description="latest arrival after its pulse begins; the end of the pulse if absent"
    )
    impact: Annotated[Quantity, ENERGY] | None = Field(
        None, description="band that the energy of its blow has to lie in"
    )
    second_impact: Annotated[Quantity, SHARE] = assume(
        "25 %", SHARE, "share of the first blow's energy that a second one may have, from memory"
    )

    @model_validator(mode="after")
    def _comes_back(self) -> Motion:
        if not 0.02 <= self.restitution.typ <= 0.95:
            raise QuantityError("restitution must be between 2 % and 95 %")
        if self.impact is not None and self.impact.min == self.impact.max:
            raise QuantityError(
                f"impact is the band that the energy of a blow has to lie in, and {self.impact} is none; write it such as '2 to 12 mJ'"
            )
        sag = (self.spring_preload.max + self.load.max + max(self.weight, 0.0)) / self._stiffness
        if self.contact.typ < _SHORTEST_CONTACT or sag > _MOST_SAG * self.travel.typ:
            raise QuantityError(
                f"contact of {in_units(self.contact.typ, 's')} cannot be: an impact lasts {in_units(_SHORTEST_CONTACT, 's')} at least, and a stop "
                f"as soft as that would give way by {in_units(sag, 'm')} under what presses on it at rest; up to {_MOST_SAG:.0%} of the travel may be"
            )
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

    def limits(self) -> tuple[Quantity, ...]:
        """What it is held against, each at its worse end in every corner."""
        return tuple(q for q in (self.arrives_within, self.impact, self.second_impact) if q is not None)

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

    def position(self, name: str) -> str:
        """How far it is from its rest, as an expression. [mm]"""
        return f"(V({name}_x)+{self.travel.typ * _MM!r})"

    def elements(self, name: str, force: str, corner: Corner) -> tuple[Element, ...]:
        """The mass in a deck: node `name`_v holds its speed [m/s]; `force` is an expression. [N]

        Node `name`_x holds how far it is beyond the far stop [mm], so below zero on its way: ngspice's tolerances are shares of what a node
        holds, and it is the blow at the far stop that is read.
        """
        x, v = f"V({name}_x)", f"V({name}_v)"
        s, m = self.travel.typ * _MM, self.mass.typ
        stiff = _SMALL * self._stiffness / _MM  # of a current for a newton: [A/mm]
        dash = _SMALL * self._dash

        def push(d: str, u: str) -> str:
            return f"max(min({stiff!r}*{d}+{dash!r}*{u},{_ONSET * stiff!r}*{d}),0)"

        out = f"(-{s!r}-{x})"
        near = f"({v}*{v}<{_STILL**2!r} ? {stiff!r}*{out} : {push(out, f'(-{v})')})"
        far = push(x, v)
        node = f"{name}_v"
        # One source for each law: ngspice works out an expression once more for each node in it. What is a straight line is none.
        found: list[Element] = [
            Capacitor(node, node, GROUND, _SMALL * m),  # a force is a current
            CurrentLaw(
                node,
                node,
                GROUND,
                f"{_SMALL!r}*({force}-{self._steady(corner) + self.spring_rate.typ * self.travel.typ!r})",
            ),
            CurrentLaw(f"{name}_stops", node, GROUND, f"{x}<-{s!r} ? {near} : ({x}>0 ? -{far} : 0)"),
            Capacitor(f"{name}_x", f"{name}_x", GROUND, _SMALL),
            Transfer(f"{name}_x", f"{name}_x", GROUND, node, GROUND, _SMALL * _MM),
            AtRest(node, 0.0),
            AtRest(f"{name}_x", -self._steady(corner) / (self._stiffness + self.spring_rate.typ) * _MM - s),
            One(),
        ]
        if self.spring_rate.typ:
            found.append(
                Transfer(f"{name}_spring", GROUND, node, f"{name}_x", GROUND, _SMALL * self.spring_rate.typ / _MM)
            )
        if self.friction.typ:
            found.append(
                CurrentLaw(
                    f"{name}_rub",
                    node,
                    GROUND,
                    f"{v}*{v}<{_STILL**2!r} ? -{_SMALL * self.friction.typ / _CREEP!r}*{v} : -{_SMALL * self.friction.typ!r}*tanh({v}/{_CREEP!r})",
                )
            )
        if self.damping.typ:
            found.append(Resistor(f"{name}_drag", node, GROUND, 1 / (_SMALL * self.damping.typ)))
        return tuple(found)

    def pushed_back(self, x: float, v: float) -> float:
        """What its stops do to it. [m], [m/s] -> [N]"""
        if 0 <= x <= self.travel.typ:
            return 0.0
        deep, speed, sign = (-x, -v, 1.0) if x < 0 else (x - self.travel.typ, v, -1.0)
        force = self._stiffness * deep + self._dash * speed
        return sign * max(min(force, _ONSET * self._stiffness * deep), 0.0)

    @property
    def _dash(self) -> float:
        """Damping of a stop. [kg/s]"""
        return 2 * damping_of_bounce(self.restitution.typ) * math.pi / self.contact.typ * self.mass.typ

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
            Probe("position", plus(scaled(1 / _MM, voltage(f"{name}_x")), scaled(self.travel.typ, voltage(ONE))), "m"),
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
