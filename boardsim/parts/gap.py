"""How a plunger's reluctance falls with its way: a straight line, or a smooth curve through a table of inductances."""

from __future__ import annotations

import itertools
from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, Annotated

from boardsim.parts.record import Record
from boardsim.quantities import INDUCTANCE, LENGTH, Quantity

if TYPE_CHECKING:
    import numpy as np
    from numpy.typing import NDArray

    Floats = NDArray[np.float64]

_MM = 1e3  # decks hold positions in mm
POSITION = replace(LENGTH, name="position", example="2 mm", zero=True)


class AtPosition(Record):
    """One row of a table: the inductance with the plunger held there."""

    position: Annotated[Quantity, POSITION]
    inductance: Annotated[Quantity, INDUCTANCE]


@dataclass(frozen=True)
class Gap:
    """1/L over the plunger's way, in pieces; beyond both ends it goes on straight.

    Attributes
    ----------
    rest : float
        1/L where the way begins. [1/H]
    knots : tuple of float
        Where pieces begin and end, from 0 to the travel. [m]
    pieces : tuple of tuple of float
        Of each: how far 1/L is from `rest` where it begins, and the factors of the way from there, its square and its
        cube. [1/H], [1/(H m)], [1/(H m^2)], [1/(H m^3)]

    Notes
    -----
    Between two rows 1/L is the cubic that has their values and given slopes at both, so that 1/L and its slope, which is the force, have
    no steps. The slope at an inner row is the weighted harmonic mean of those of the two chords beside it, with which
    nothing overshoots; at the ends it is such that the curve leaves straight, (3 d - m) / 2 for the chord's slope d and m at the
    next row, which is never 0: a plunger at rest is pulled. Holds as far as the table was measured with the plunger held.

    References
    ----------
    F. N. Fritsch, J. Butland, A method for constructing local monotone piecewise cubic interpolants, SIAM Journal on
    Scientific and Statistical Computing 5 (1984) 300; from memory.
    """

    rest: float
    knots: tuple[float, ...]
    pieces: tuple[tuple[float, float, float, float], ...]

    @property
    def straight(self) -> bool:
        """Whether it is a straight line."""
        return len(self.pieces) == 1 and not any(self.pieces[0][2:])

    def _ends(self) -> tuple[float, float, float]:
        """Slope at the beginning; how far 1/L has come at the end, and its slope there. [1/(H m)], [1/H], [1/(H m)]"""
        a, b, c, d = self.pieces[-1]
        h = self.knots[-1] - self.knots[-2]
        return self.pieces[0][1], a + h * (b + h * (c + h * d)), b + h * (2 * c + 3 * h * d)

    def reciprocal(self, x: Floats) -> Floats:
        """1/L at positions. [m] -> [1/H]"""
        import numpy as np

        first, last, slope = self._ends()
        k = np.clip(np.searchsorted(self.knots, x) - 1, 0, len(self.pieces) - 1)
        a, b, c, d = np.array(self.pieces).T[:, k]
        u = x - np.array(self.knots)[k]
        inside = a + u * (b + u * (c + u * d))
        beyond = np.where(x < 0, first * x, last + slope * (x - self.knots[-1]))
        found: Floats = self.rest + np.where((x < 0) | (x > self.knots[-1]), beyond, inside)
        return found

    def current(self, i: str, x: str) -> str:
        """What the way takes off the current of the coil at rest, for a deck. [A]

        Parameters
        ----------
        i : str
            Current of an inductor 1 / `rest`, across which the flux linkage is.
        x : str
            Position, in mm.
        """
        if self.straight:
            return f"{self.pieces[0][1] / self.rest / _MM!r}*{i}*{x}"
        return f"{i}*({self._written(x, [tuple(v / self.rest for v in p) for p in self.pieces])})"

    def force(self, i: str, x: str) -> str:
        """The force of the field, -lambda^2/2 d(1/L)/dx, for a deck; what `current` takes. [N]"""
        if self.straight:
            return f"{-self.pieces[0][1] / 2 / self.rest**2!r}*{i}*{i}"
        slopes = [tuple(-v / 2 / self.rest**2 for v in (b, 2 * c, 3 * d)) for _, b, c, d in self.pieces]
        return f"{i}*{i}*({self._written(x, slopes, level=True)})"

    def _written(self, x: str, polynomials: Sequence[Sequence[float]], level: bool = False) -> str:
        """Polynomials piece by piece, with x in mm; beyond the ends they go on straight, or `level`."""
        last, h = polynomials[-1], self.knots[-1] - self.knots[-2]
        end = sum(v * h**n for n, v in enumerate(last))
        slope = sum(n * v * h ** (n - 1) for n, v in enumerate(last) if n) / _MM
        first = polynomials[0]
        before = f"({first[0]!r})" if level else f"({first[1] / _MM!r})*{x}"
        after = f"({end!r})" if level else f"({end!r})+({slope!r})*({x}-{self.knots[-1] * _MM!r})"
        text = after
        for start, stop, p in reversed(
            [(*ends, p) for ends, p in zip(itertools.pairwise(self.knots), polynomials, strict=True)]
        ):
            u = f"({x}-{start * _MM!r})" if start else x
            inner = f"({p[-1] / _MM ** (len(p) - 1)!r})"
            for n in range(len(p) - 2, -1, -1):
                inner = f"({p[n] / _MM**n!r}+{u}*{inner})"
            text = f"{x}<{stop * _MM!r} ? {inner} : ({text})"
        return f"{x}<0 ? {before} : ({text})"


def straight(opened: float, closed: float, travel: float) -> Gap:
    """1/L on a straight line between the open and the closed coil. [H], [H], [m]"""
    return Gap(1 / opened, (0.0, travel), ((0.0, (1 / closed - 1 / opened) / travel, 0.0, 0.0),))


def through(positions: Sequence[float], henries: Sequence[float]) -> Gap:
    """1/L as a smooth curve through a table.

    Parameters
    ----------
    positions : sequence of float
        From 0 up, at least three. [m]
    henries : sequence of float
        Inductances there, which grow. [H]

    Examples
    --------
    >>> import numpy as np
    >>> gap = through([0.0, 2e-3, 5e-3], [12e-3, 15e-3, 30e-3])
    >>> [round(1e3 / float(g), 6) for g in gap.reciprocal(np.array([0.0, 2e-3, 5e-3]))]
    [12.0, 15.0, 30.0]
    """
    steps = [b - a for a, b in itertools.pairwise(positions)]
    g = [1 / v for v in henries]
    chords = [(b - a) / h for (a, b), h in zip(itertools.pairwise(g), steps, strict=True)]
    inner = []
    for (h, k), (d, e) in zip(itertools.pairwise(steps), itertools.pairwise(chords), strict=True):
        one, two = 2 * k + h, k + 2 * h
        inner.append((one + two) / (one / d + two / e))
    slopes = [(3 * chords[0] - inner[0]) / 2, *inner, (3 * chords[-1] - inner[-1]) / 2]
    pieces = []
    for k, (h, d) in enumerate(zip(steps, chords, strict=True)):
        m, n = slopes[k], slopes[k + 1]
        pieces.append((g[k] - g[0], m, (3 * d - 2 * m - n) / h, (m + n - 2 * d) / h**2))
    return Gap(g[0], tuple(positions), tuple(pieces))
