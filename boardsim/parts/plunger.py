"""A solenoid that pulls an iron plunger into itself: the inductance grows as the gap closes, and the growth is the force."""

from __future__ import annotations

import itertools
from typing import TYPE_CHECKING, Annotated, ClassVar, Literal

from pydantic import Field, model_validator

from boardsim.errors import QuantityError
from boardsim.parts.base import Assumption, Corner
from boardsim.parts.coil import Coil, without_default
from boardsim.parts.elements import (
    CurrentLaw,
    Element,
    Inductor,
    Probe,
    Stored,
    scaled,
)
from boardsim.parts.gap import AtPosition, Gap, straight, through
from boardsim.parts.motion import Motion
from boardsim.parts.rules import Rule
from boardsim.quantities import INDUCTANCE, Quantity, in_units

if TYPE_CHECKING:
    from boardsim.parts.motion import Floats

_SAME_PLACE = 1e-6  # share of the travel by which a table's end may miss it: rounding of units
_SAMPLES = 200  # of the flux linkage, for the most that a field can hold at a current


class PlungerCoil(Coil):
    """A coil with a plunger of iron in it.

    Notes
    -----
    Flux linkage is the state: d(lambda)/dt = v - R i, and the current follows from it and from the way x that the plunger has gone:

        i = lambda g(x) + e(lambda).

    g is 1/L: with N turns the reluctance over N^2. The gap's falls in proportion to x, so that it lies on a straight line between the open and
    the closed coil, unless `over_travel` tells it; e is what the iron takes beyond that where `saturation`, measured with the plunger
    in, is given (parts/saturation.py). The force is that of the co-energy, F = dW'/dx at constant i, which in terms of lambda reads
    F = -lambda^2/2 dg/dx, whatever e is. What the source gives is heat, field lambda^2 g / 2 + integral of e, and motion, to the last
    joule. The straight line holds for one working gap with an even field; fringing makes the real force larger at a wide
    gap. That iron and gap carry the same flux leaves out the leakage beside them, which matters far beyond the knee with the
    plunger out. The core-loss resistance lies across the flux.

    References
    ----------
    A. E. Fitzgerald, C. Kingsley, S. D. Umans, Electric Machinery, chapter 3 (energy and co-energy of a singly excited
    system); from memory.
    """

    role: ClassVar[str] = "coil"
    kind: Literal["plunger"] = "plunger"  # type: ignore[assignment]  # a kind of its own
    saturates: ClassVar[bool] = True
    closed_inductance: Annotated[Quantity, INDUCTANCE] = Field(
        None,
        description="with the plunger all the way in; inductance is that at its rest",
        json_schema_extra=without_default,
    )  # type: ignore[assignment]  # never None once the coil is read
    over_travel: tuple[AtPosition, ...] | None = Field(
        None, description="inductance at three positions or more, from its rest to all the way in, instead of those two"
    )
    motion: Motion

    def told_inductance(self) -> Quantity | None:
        """That with the plunger at its rest; takes over both ends of the table where there is one. [H]

        Raises
        ------
        QuantityError
            If nothing tells the inductance of the closed coil, or two things do.
        """
        given = {"inductance", "closed_inductance", "measured_rise"} & self.model_fields_set
        if self.over_travel is None:
            if "closed_inductance" not in given:
                raise QuantityError(
                    "closed_inductance is missing, that with the plunger all the way in; or give over_travel, a table of positions"
                )
            return super().told_inductance()
        if given:
            raise QuantityError(
                f"over_travel tells the inductance at both ends; leave out {' and '.join(sorted(given))}"
            )
        _table(self.over_travel, self.motion.travel)
        # Frozen for everybody else, as in the coil itself.
        object.__setattr__(self, "closed_inductance", self.over_travel[-1].inductance)
        return self.over_travel[0].inductance

    @model_validator(mode="after")
    def _pulls(self) -> PlungerCoil:
        if self.closed_inductance.min <= self.inductance.max and self.over_travel is None:
            raise QuantityError(
                "closed_inductance must be larger than inductance, which is that of the coil with its plunger at rest: the growth is its force"
            )
        return self

    def tolerances(self) -> dict[str, Quantity]:
        """What the corners vary in this part."""
        return {**super().tolerances(), "closed_inductance": self.closed_inductance, **self.motion.tolerances()}

    def held(self, amperes: float, corner: Corner) -> float:
        """The most that its field can hold at a current: with the plunger in or, of iron that saturates, on its way. [A] -> [J]

        Notes
        -----
        With lambda g(x) = i - e(lambda) the energy is lambda (i - e)/2 + integral of e, over all flux linkages between open and closed coil.
        """
        import numpy as np

        curve = self.curve(corner)
        if curve is None or not amperes:
            return 0.5 * corner.take(self.closed_inductance, "inductance") * amperes**2
        flux = np.linspace(0, curve.flux_at(abs(amperes)), _SAMPLES)
        g = (abs(amperes) - curve.excess(flux[1:])) / flux[1:]
        kept = np.concatenate([[False], g <= (1 + 1e-9) * self.gap(corner).rest])
        return float(np.max((flux * (abs(amperes) - curve.excess(flux)) / 2 + curve.excess_energy(flux))[kept]))

    @property
    def inductances(self) -> tuple[float, float]:
        """The least and the largest that it has. [H]"""
        return self.inductance.min, self.closed_inductance.max

    @property
    def full_inductance(self) -> Quantity:
        """That which its saturation counts from: with the plunger in. [H]"""
        return self.closed_inductance

    @property
    def return_time(self) -> float:
        """How long what it moves needs to come back. [s]"""
        return self.motion.return_time

    def gap(self, corner: Corner) -> Gap:
        """1/L over its way in a corner."""
        if self.over_travel is None:
            opened, closed = (corner.take(q, "inductance") for q in (self.inductance, self.closed_inductance))
            return straight(opened, closed, self.motion.travel.typ)
        rows = [corner.take(row.inductance, "inductance") for row in self.over_travel]
        return through([*(row.position.typ for row in self.over_travel[:-1]), self.motion.travel.typ], rows)

    def field(self, name: str, a: str, b: str, corner: Corner) -> tuple[tuple[Element, ...], None]:
        """The open coil, beside it the current that the plunger's way takes off and its iron takes more, and the plunger.

        The flux linkage is the open inductance times its own current; what flows in all is read at the winding's resistance.
        """
        gap, curve = self.gap(corner), self.curve(corner)
        coil = Inductor(f"{name}_l", a, b, 1 / gap.rest)
        i, x = f"I(L{name}_l)", self.motion.position(name)
        beside = gap.current(i, x)
        if curve is not None:
            beside = f"{beside}+{curve.expression(i, coil.henries)}"
        return (
            coil,
            CurrentLaw(f"{name}_l", b, a, beside),
            *self.motion.elements(name, gap.force(i, x), corner),
        ), None

    def stored(self, corner: Corner) -> Stored:
        """What field and motion hold."""
        gap, curve = self.gap(corner), self.curve(corner)

        def law(flux: Floats, x: Floats, v: Floats) -> Floats:
            iron = 0.0 if curve is None else curve.excess_energy(flux)
            return flux**2 * gap.reciprocal(x) / 2 + iron + self.motion.stored(x, v, corner)

        return Stored(("flux", "position", "speed"), law)

    def more_probes(self, name: str, corner: Corner) -> tuple[Probe, ...]:
        """Its flux linkage, and what moves."""
        flux = Probe("flux", scaled(1 / self.gap(corner).rest, ((1.0, f"i(l{name}_l)"),)), "Wb")
        return (flux, *self.motion.probes(name))

    def taken_at_ends(self) -> tuple[Quantity, ...]:
        """The limits of its motion."""
        return self.motion.limits()

    def more_rules(self) -> tuple[Rule, ...]:
        """What the motion is held against."""
        return self.motion.rules()

    def more_assumed(self, label: str) -> tuple[Assumption, ...]:
        """What had to be supplied for the motion."""
        return self.motion.assumed(f"coil {label}")


def _table(rows: tuple[AtPosition, ...], travel: Quantity) -> None:
    """Hold a table of inductances against what it must be like.

    Raises
    ------
    QuantityError
        If it is no table from the plunger's rest to its end, with an inductance that grows all the way.
    """
    if len(rows) < 3:
        raise QuantityError(
            f"over_travel has {len(rows)} {'row' if len(rows) == 1 else 'rows'}; give three or more, or inductance and closed_inductance"
        )
    if any(row.position.toleranced for row in rows):
        raise QuantityError("positions in over_travel are measured, without tolerance")
    places = [row.position.typ for row in rows]
    if places[0] != 0 or abs(places[-1] - travel.typ) > _SAME_PLACE * travel.typ:
        raise QuantityError(
            f"over_travel runs from {in_units(places[0], 'm')} to {in_units(places[-1], 'm')}; it must run from 0 mm, at rest, to the travel, "
            f"{in_units(travel.typ, 'm')}"
        )
    for one, two in itertools.pairwise(rows):
        if two.position.typ <= one.position.typ:
            raise QuantityError(
                f"over_travel: {two.position} comes after {one.position}; positions must grow from row to row"
            )
        low, high = one.inductance, two.inductance
        if high.typ <= low.typ or high.min <= low.min or high.max <= low.max:
            raise QuantityError(
                f"over_travel: {high} at {two.position} after {low} at {one.position}; the inductance must grow from row to row: the growth is "
                "the force"
            )
