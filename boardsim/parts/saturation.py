"""Iron that saturates: a smooth curve of flux linkage over current, from one or two measured points of a coil."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING, Annotated

from pydantic import Field, model_validator

from boardsim.errors import QuantityError
from boardsim.parts.base import Assumption
from boardsim.parts.record import Record
from boardsim.quantities import CURRENT, INDUCTANCE, SHARE, Quantity, in_units

if TYPE_CHECKING:
    import numpy as np
    from numpy.typing import NDArray

    Floats = NDArray[np.float64]

AIR_SHARE = 0.1  # of the inductance, that a coil keeps without its iron, where nobody says
KNEE = (
    0.1  # share of the reluctance that saturates, where one point is given: closed rings of pure iron come out at 0.07
)
_KNEES = (0.01, 10.0)  # an iron share of 1 % is a corner; above 1 the knee is softer than Froehlich's


@dataclass(frozen=True)
class Curve:
    """Current over flux linkage, and back.

    Attributes
    ----------
    henries : float
        Inductance L at small currents. [H]
    air : float
        What the iron's own part of the curve comes down to: A, above 0 and below `henries`. [H]
    flux : float
        Flux linkage S that the iron adds at the most. [Wb]
    knee : float
        Share k of the reluctance at small currents that is the iron's; the rest is gaps, which do not saturate. The smaller, the
        sharper the knee. [1]

    Notes
    -----
    Gaps in series with iron after Froehlich, which has air beside it. With M = L - A and for currents above 0 (the law is odd):

        i(lambda) = (1 - k) lambda/L + k j,  lambda = A j + M j S / (S + M j).

    Both directions are roots of quadratics: the current has no pole, and its slope lies between 1/L and that without iron:

        j(lambda) = 2 lambda S / (b + sqrt(b^2 + 4 A M lambda S)),  b = L S - M lambda.

    For k = 1, A = 0 it is lambda = L i S / (S + L i). The iron's co-energy is A j^2/2 + S (j - S/M ln(1 + M j / S)), and the field holds
    W = (1 - k) lambda^2 / (2 L) + k (lambda j - co-energy). Describes iron from its highest permeability upwards: through two points
    it meets pure iron within 8 % (tests/parts/test_parts_saturation.py); leaves out the lower permeability at very small flux,
    hysteresis, remanence, and how saturation shifts with temperature.

    References
    ----------
    O. Froehlich, Elektrotechnische Zeitschrift 2 (1881) 134; R. M. Bozorth, Ferromagnetism, chapter 11, on A. E. Kennelly's
    form of the same law with the air beside it; both from memory.

    Examples
    --------
    >>> curve = Curve(10e-3, 1e-3, 9e-3)
    >>> round(curve.flux_at(1.0), 6)
    0.0055
    >>> round(float(curve.current(0.0055)), 6)
    1.0
    """

    henries: float
    air: float
    flux: float
    knee: float = 1.0

    @property
    def _iron(self) -> float:
        return self.henries - self.air

    def _in_iron(self, flux: Floats | float) -> Floats:
        """j: the current that the iron alone would take, if all of the reluctance were like it. [Wb] -> [A]"""
        import numpy as np

        size = np.abs(flux)
        b = self.henries * self.flux - self._iron * size
        root = np.sqrt(b**2 + 4 * self.air * self._iron * size * self.flux)
        found: Floats = 2 * self.flux * np.asarray(flux) / (b + root)
        return found

    def _in_iron_at(self, amperes: float) -> float:
        """j at a current, by its size. [A] -> [A]"""
        i, across = abs(amperes), (1 - self.knee) / self.henries * self.air + self.knee
        b = self.flux - self._iron * i
        return 2 * i * self.flux / (b + math.sqrt(b * b + 4 * self._iron * across * i * self.flux))

    def current(self, flux: Floats | float) -> Floats:
        """The current at a flux linkage. [Wb] -> [A]"""
        found: Floats = flux / self.henries + self.excess(flux)
        return found

    def flux_at(self, amperes: float) -> float:
        """The flux linkage at a current. [A] -> [Wb]"""
        j = self._in_iron_at(amperes)
        return math.copysign(j * (self.air + self._iron * self.flux / (self.flux + self._iron * j)), amperes)

    def incremental(self, amperes: float) -> float:
        """The inductance for small changes about a current. [A] -> [H]"""
        left = self.flux / (self.flux + self._iron * self._in_iron_at(amperes))
        return 1 / ((1 - self.knee) / self.henries + self.knee / (self.air + self._iron * left**2))

    def excess(self, flux: Floats | float) -> Floats:
        """The current beyond that of the inductance at small currents. [Wb] -> [A]"""
        found: Floats = self.knee * (self._in_iron(flux) - flux / self.henries)
        return found

    def energy(self, flux: Floats | float) -> Floats:
        """What the field holds: the integral of the current over the flux linkage. [Wb] -> [J]"""
        found: Floats = flux**2 / (2 * self.henries) + self.excess_energy(flux)
        return found

    def excess_energy(self, flux: Floats | float) -> Floats:
        """What the field holds beyond lambda^2 / (2 L): the integral of `excess`. [Wb] -> [J]"""
        import numpy as np

        size = np.abs(flux)
        j = self._in_iron(size)
        co_energy = self.air * j**2 / 2 + self.flux * (
            j - np.log1p(self._iron * j / self.flux) * self.flux / self._iron
        )
        found: Floats = self.knee * (size * j - co_energy - size**2 / (2 * self.henries))
        return found

    def expression(self, i: str, henries: float) -> str:
        """`excess` for a deck. [A]

        Parameters
        ----------
        i : str
            Current of an inductor across which the flux linkage is.
        henries : float
            Of that inductor: the flux linkage is `henries` times its current. [H]
        """
        m = self._iron / self.henries
        k = m * henries / self.flux
        under = f"1+({2 * (1 - 2 * m) * k!r})*abs({i})+{k * k!r}*{i}*{i}"
        return f"{self.knee * henries / self.henries!r}*{i}*(2/(1-{k!r}*abs({i})+sqrt({under}))-1)"


@dataclass(frozen=True)
class Point:
    """What is left at a current: of the flux linkage, or of the inductance for small changes. [A], [1]"""

    current: float
    left: float
    of_flux: bool

    def through(self, henries: float, air: float, knee: float) -> Curve:
        """The curve of this knee that passes through the point.

        Parameters
        ----------
        henries, air : float
            At small currents, and without iron, of the whole coil. [H], [H]
        knee : float
            See `Curve`. [1]

        Notes
        -----
        Without iron 1/A' = (1 - k)/L + k/A, which gives A of the iron's part. At the point j/lambda = (1/(q L) - (1 - k)/L) / k for a share
        q of the flux, and the same is dj/d(lambda) for a share q of the inductance; S / (S + M j) is r = (lambda/j - A)/M, or the root of
        it, and S = M j r / (1 - r).
        """
        gaps = (1 - knee) / henries
        own = knee / (1 / air - gaps)
        iron = henries - own
        left = (knee / (1 / (self.left * henries) - gaps) - own) / iron
        rest = left if self.of_flux else math.sqrt(left)
        j = self.current / (gaps * (own + iron * rest) + knee)
        return Curve(henries, own, iron * j * rest / (1 - rest), knee)

    def of(self, curve: Curve) -> float:
        """The share that a curve leaves at this point's current. [1]"""
        if self.of_flux:
            return curve.flux_at(self.current) / (curve.henries * self.current)
        return curve.incremental(self.current) / curve.henries


class Farther(Record):
    """A second point, at a larger current."""

    current: Annotated[Quantity, CURRENT]
    flux_left: Annotated[Quantity, SHARE] | None = None
    inductance_left: Annotated[Quantity, SHARE] | None = None

    @model_validator(mode="after")
    def _measured(self) -> Farther:
        if (self.flux_left is None) == (self.inductance_left is None):
            raise QuantityError(
                "saturation needs one of flux_left (flux linkage over inductance times current) and inductance_left (for small changes)"
            )
        if any(q is not None and q.toleranced for q in (self.current, self.flux_left, self.inductance_left)):
            raise QuantityError("what is told of its saturation are measured points, without tolerance")
        if self.point.left >= 1:
            raise QuantityError(
                f"nothing is missing at {in_units(self.current.typ, 'A')}; give a current at which less than 100 % is left, or no saturation"
            )
        return self

    @property
    def point(self) -> Point:
        """The point by itself."""
        share = self.flux_left or self.inductance_left
        return Point(self.current.typ, share.typ if share is not None else 1.0, self.flux_left is not None)


class Saturation(Farther):
    """What is known of a coil's iron: how much is left at a current; of a plunger with it all the way in."""

    current: Annotated[Quantity, CURRENT] = Field(description="at which this was measured")
    flux_left: Annotated[Quantity, SHARE] | None = Field(
        None, description="flux linkage there, as a share of inductance times current"
    )
    inductance_left: Annotated[Quantity, SHARE] | None = Field(
        None,
        description="inductance for small changes there, as a share of that without current, as meters with a bias show it",
    )
    farther: Farther | None = Field(None, description="a second point, which tells how sharp the knee is")
    air_core: Annotated[Quantity, INDUCTANCE] | None = Field(
        None, description="inductance without iron, which is left in the end; from the winding if absent"
    )

    @model_validator(mode="after")
    def _points(self) -> Saturation:
        if self.air_core is not None and self.air_core.toleranced:
            raise QuantityError("air_core is one number, without tolerance")
        if self.farther is not None and self.farther.current.typ <= self.current.typ:
            raise QuantityError("the farther point needs a larger current than the first")
        return self

    def assumed(self, label: str) -> tuple[Assumption, ...]:
        """What had to be supplied."""
        if self.farther is not None:
            return ()
        why = "as sharp as that of soft iron without a gap; a gap makes it sharper, hard iron softer: give a farther point"
        return (Assumption(label, "share of the reluctance that saturates", f"{KNEE:.0%}", why),)

    def curve(self, henries: float, air: float) -> Curve:
        """The curve through the points.

        Parameters
        ----------
        henries, air : float
            At small currents, and without iron. [H], [H]

        Returns
        -------
        Curve
            With the knee of soft iron, or with that which the second point tells.

        Raises
        ------
        QuantityError
            If no such curve passes through them.

        Examples
        --------
        >>> from boardsim.quantities import parse
        >>> half = Saturation(current=parse("1 A", CURRENT), flux_left=parse("55 %", SHARE))
        >>> round(half.curve(10e-3, 1e-3).flux_at(1.0), 6)
        0.0055
        """
        first, second = self.point, None if self.farther is None else self.farther.point
        for point in (first, second):
            if point is not None and point.left * henries <= air:
                raise QuantityError(
                    f"{point.left:.3g} of {in_units(henries, 'H')} are left at {in_units(point.current, 'A')}, and {in_units(air, 'H')} are left "
                    "without iron, which must be less; correct one of them, or give air_core"
                )
        if second is None:
            return first.through(henries, air, KNEE)
        low, high = (math.log(k) for k in _KNEES)
        least, most = (second.of(first.through(henries, air, k)) for k in _KNEES)
        if not least <= second.left <= most:
            raise QuantityError(
                f"{second.left:.1%} are left at {in_units(second.current, 'A')}, and after the first point it can be {least:.1%} (a sharp knee) to "
                f"{most:.1%} (the softest that iron has); correct a point, or give air_core"
            )
        for _ in range(50):
            middle = (low + high) / 2
            sharper = second.of(first.through(henries, air, math.exp(middle))) < second.left
            low, high = (middle, high) if sharper else (low, middle)
        return first.through(henries, air, math.exp((low + high) / 2))
