"""A winding from what one winds: turns, wire and bobbin -> layers, length, resistance, inductance, mass, or that it does not fit."""

from __future__ import annotations

import itertools
import math
import re
from dataclasses import dataclass
from typing import Annotated, Any, Literal

from pydantic import BeforeValidator, Field, model_validator

from boardsim.errors import QuantityError
from boardsim.parts.copper import RESISTIVITY_20C, awg_diameter
from boardsim.parts.record import Record, shown
from boardsim.quantities import LENGTH, Quantity, in_units, read_quantity

_DENSITY = 8890.0  # [kg/m^3], annealed copper, IEC 60028
_INCH = 0.0254  # [m]
_NESTED = math.sqrt(3) / 2  # pitch of layers that lie in the grooves of those below, in wire diameters
_NEARLY = 1e-9  # share by which rounding may miss a whole number of turns

# Largest diameter over the enamel, grades 1 and 2, against the bare nominal one. [mm]
# IEC 60317-0-1, table of dimensions; from memory, but for 0.100 mm grade 1, which a maker's page confirms.
_OVER_ENAMEL = (
    (0.020, 0.024, 0.027),
    (0.025, 0.031, 0.034),
    (0.032, 0.039, 0.043),
    (0.040, 0.049, 0.054),
    (0.050, 0.060, 0.066),
    (0.063, 0.076, 0.083),
    (0.080, 0.094, 0.101),
    (0.100, 0.117, 0.125),
    (0.125, 0.144, 0.154),
    (0.160, 0.182, 0.194),
    (0.200, 0.226, 0.239),
    (0.250, 0.281, 0.297),
    (0.315, 0.349, 0.367),
    (0.400, 0.439, 0.459),
    (0.500, 0.544, 0.566),
    (0.630, 0.684, 0.709),
    (0.800, 0.861, 0.885),
    (1.000, 1.068, 1.094),
)
ENAMEL_SOURCE = "largest diameter over the enamel, IEC 60317-0-1, from memory; between two sizes on a straight line"


def over_enamel(diameter: float, grade: int) -> float:
    """Largest diameter of an enamelled round wire.

    Parameters
    ----------
    diameter : float
        Of the bare wire. [m]
    grade : int
        Of the enamel, 1 or 2.

    Returns
    -------
    float
        [m]

    Raises
    ------
    QuantityError
        If the wire is thinner or thicker than the table.

    Notes
    -----
    Straight lines between the sizes of the table.

    References
    ----------
    IEC 60317-0-1, table of dimensions; from memory.

    Examples
    --------
    >>> round(over_enamel(0.2e-3, 1) * 1e3, 3)
    0.226
    """
    d = diameter * 1e3
    if not _OVER_ENAMEL[0][0] * (1 - _NEARLY) <= d <= _OVER_ENAMEL[-1][0] * (1 + _NEARLY):
        raise QuantityError(
            f"the enamel of a wire of {d:.3g} mm is not known: the table goes from {_OVER_ENAMEL[0][0]} to {_OVER_ENAMEL[-1][0]} mm; "
            "give over_enamel, the diameter over the enamel"
        )
    for (a, *low), (b, *high) in itertools.pairwise(_OVER_ENAMEL):
        if d <= b:
            share = max(d - a, 0.0) / (b - a)
            return 1e-3 * (low[grade - 1] + share * (high[grade - 1] - low[grade - 1]))
    return 1e-3 * _OVER_ENAMEL[-1][grade]


def one_layer_inductance(turns: float, radius: float, length: float) -> float:
    """Inductance of a coil of one layer without iron.

    Parameters
    ----------
    turns : float
        [1]
    radius, length : float
        To the middle of the wire; of the winding. [m]

    Returns
    -------
    float
        [H]

    Notes
    -----
    L = a^2 n^2 / (9 a + 10 b) uH with a and b in inches. Within 1 % where the winding is longer than 0.8 times its radius.

    References
    ----------
    H. A. Wheeler, Simple inductance formulas for radio coils, Proc. IRE 16 (1928) 1398.
    """
    a, b = radius / _INCH, length / _INCH
    return 1e-6 * a**2 * turns**2 / (9 * a + 10 * b)


def multilayer_inductance(turns: float, radius: float, length: float, depth: float) -> float:
    """Inductance of a coil of many layers without iron.

    Parameters
    ----------
    turns : float
        [1]
    radius, length, depth : float
        To the middle of the winding; of the winding along its axis; from its inside to its outside. [m]

    Returns
    -------
    float
        [H]

    Notes
    -----
    L = 0.8 a^2 n^2 / (6 a + 9 b + 10 c) uH with lengths in inches. Within 1 % where the three terms are alike; it falls short by up
    to 11 % for a coil that is very long.

    References
    ----------
    H. A. Wheeler, Simple inductance formulas for radio coils, Proc. IRE 16 (1928) 1398.
    """
    a, b, c = radius / _INCH, length / _INCH, depth / _INCH
    return 1e-6 * 0.8 * a**2 * turns**2 / (6 * a + 9 * b + 10 * c)


def _wire(value: Any) -> Any:
    if isinstance(value, str) and (match := re.fullmatch(r"\s*([0-9]{1,2})\s*AWG\s*", value)):
        return read_quantity(f"{awg_diameter(int(match[1])) * 1e3:.6g} mm", LENGTH)
    if isinstance(value, str) and "AWG" in value:
        raise QuantityError(f"{shown(value)} is not a wire gauge; write it such as '32 AWG', or the bare diameter")
    return value


@dataclass(frozen=True)
class Wound:
    """What a winding comes out as. [H], [ohm], [m], [kg]

    Attributes
    ----------
    layers, per_layer : int
    wire : float
        Length of the wire. [m]
    resistance : float
        At 20 degC. [ohm]
    inductance : float
        Without iron. [H]
    mass : float
        Of the copper. [kg]
    filling : float
        Copper's share of the winding space. [1]
    depth : float
        From the bobbin's core to the outermost layer's outside. [m]
    """

    layers: int
    per_layer: int
    wire: float
    resistance: float
    inductance: float
    mass: float
    filling: float
    depth: float

    def __str__(self) -> str:
        layers = "1 layer" if self.layers == 1 else f"{self.layers} layers"
        return (
            f"{layers} of up to {self.per_layer} turns, {in_units(self.wire, 'm')} of wire, "
            f"{in_units(self.resistance, 'ohm')} at 20 degC, {in_units(self.inductance, 'H')} without iron, "
            f"{self.mass * 1e3:.3g} g of copper that fill {self.filling:.0%} of the space"
        )


class Winding(Record):
    """What one winds: so many turns of a wire on a bobbin.

    Notes
    -----
    Layers fill the length of the bobbin one after the other, each as many whole turns as fit, the last one maybe less; each
    layer lies a wire's diameter above the one below, or, nested, in its grooves, at 0.87 of it. With D_k the diameter of layer
    k from middle to middle of the wire, the wire's length is the sum of n_k pi D_k, R = rho l / A at 20 degC. A hand-wound coil
    takes more room than this, and its turns are longer.
    """

    turns: Annotated[int, Field(strict=True, ge=1, le=1_000_000)]
    wire: Annotated[Annotated[Quantity, LENGTH], BeforeValidator(_wire)] = Field(
        description="diameter of the bare copper, or its gauge such as '32 AWG'"
    )
    grade: Literal[1, 2] = Field(1, description="of the enamel, IEC 60317")
    over_enamel: Annotated[Quantity, LENGTH] | None = Field(
        None, description="diameter over the enamel; from grade and wire if absent"
    )
    inner: Annotated[Quantity, LENGTH] = Field(
        description="diameter of the bobbin's core, on which the first layer lies"
    )
    outer: Annotated[Quantity, LENGTH] = Field(description="largest diameter that the winding may have")
    length: Annotated[Quantity, LENGTH] = Field(description="of the winding space along the axis")
    nested: bool = Field(False, description="whether each layer lies in the grooves of the one below")
    core_factor: Annotated[float, Field(ge=1, le=1000)] | None = Field(
        None, description="how many times the inductance without iron it has with its core; 1 for a coil without iron"
    )

    @model_validator(mode="after")
    def _fits(self) -> Winding:
        if self.outer.typ <= self.inner.typ:
            raise QuantityError("outer must be larger than inner: between them lies the winding")
        if self.over_enamel is not None and self.over_enamel.typ < self.wire.typ:
            raise QuantityError("over_enamel is smaller than the bare wire")
        wire, room = self.diameter, (self.outer.typ - self.inner.typ) / 2
        if self.length.typ < wire:
            raise QuantityError(
                f"not one turn fits: the wire is {_mm(wire)} and the bobbin {_mm(self.length.typ)} long"
            )
        depth = self.wound().depth
        if depth > room * (1 + _NEARLY):
            most = self._most_layers(room) * self._per_layer
            raise QuantityError(
                f"{self.turns} turns do not fit on the bobbin: {self._layers} layers of {_mm(wire)} wire are {_mm(depth)} deep, "
                f"and there are {_mm(room)} between inner and outer diameter; at most {most} turns of it fit"
            )
        return self

    @property
    def diameter(self) -> float:
        """Over the enamel. [m]"""
        return over_enamel(self.wire.typ, self.grade) if self.over_enamel is None else self.over_enamel.typ

    @property
    def _per_layer(self) -> int:
        return math.floor(self.length.typ / self.diameter * (1 + _NEARLY))

    @property
    def _layers(self) -> int:
        return math.ceil(self.turns / self._per_layer)

    @property
    def _pitch(self) -> float:
        return self.diameter * (_NESTED if self.nested else 1.0)

    def _most_layers(self, room: float) -> int:
        return (
            max(math.floor((room - self.diameter) / self._pitch * (1 + _NEARLY)) + 1, 0) if room >= self.diameter else 0
        )

    def wound(self) -> Wound:
        """What comes out."""
        wire, layers, per_layer = self.diameter, self._layers, self._per_layer
        depth = wire + (layers - 1) * self._pitch
        length, left = 0.0, self.turns
        for k in range(layers):
            here = min(per_layer, left)
            length += here * math.pi * (self.inner.typ + wire + 2 * k * self._pitch)
            left -= here
        section = math.pi * self.wire.typ**2 / 4
        along = min(per_layer, self.turns) * wire
        middle = (self.inner.typ + depth) / 2
        if layers == 1:
            henries = one_layer_inductance(self.turns, middle, along)
        else:
            henries = multilayer_inductance(self.turns, middle, along, depth)
        space = self.length.typ * (self.outer.typ - self.inner.typ) / 2
        return Wound(
            layers,
            per_layer,
            length,
            RESISTIVITY_20C * length / section,
            henries,
            _DENSITY * length * section,
            self.turns * section / space,
            depth,
        )


def _mm(length: float) -> str:
    return f"{length * 1e3:.3g} mm"
