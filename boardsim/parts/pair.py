"""Two conductors side by side, out and back: what a cable and the leads of a coil have in common."""

from __future__ import annotations

import math
import re
from typing import Annotated, Any, Self

from pydantic import BeforeValidator, model_validator

from boardsim.errors import QuantityError
from boardsim.parts.base import Corner, Part, Surroundings
from boardsim.parts.copper import T_20C, awg_diameter, loop_resistance, pair_inductance
from boardsim.parts.record import shown
from boardsim.quantities import AREA, LENGTH, Quantity, assume


def _gauge(value: Any) -> Any:
    if isinstance(value, str) and (match := re.fullmatch(r"\s*([0-9]{1,2}|[1-4]/0)\s*AWG\s*", value)):
        text = match[1]
        gauge = 1 - int(text[0]) if text.endswith("/0") else int(text)
        awg_diameter(gauge)
        return gauge
    raise QuantityError(f"{shown(value)} is not a wire gauge; write it such as '16 AWG' or '2/0 AWG'")


class Pair(Part):
    """Two conductors of the same cross-section, side by side; resistance at the ambient of the corner."""

    gauge: Annotated[int, BeforeValidator(_gauge, json_schema_input_type=str)] | None = None
    area: Annotated[Quantity, AREA] | None = None
    length: Annotated[Quantity, LENGTH]
    spacing: Annotated[Quantity, LENGTH] | None = None

    @model_validator(mode="after")
    def _one_size(self) -> Self:
        if (self.gauge is None) == (self.area is None):
            found = "neither is given" if self.gauge is None else "both are given"
            raise QuantityError(f"give either gauge (such as '16 AWG') or area (such as '1.5 mm2'); {found}")
        if self.spacing is not None and self.spacing.typ < self.diameter:
            raise QuantityError(f"spacing is smaller than the bare conductor, {self.diameter * 1e3:.2f} mm")
        return self

    @property
    def diameter(self) -> float:
        """Of the bare conductor, taken as solid and round. [m]"""
        if self.gauge is not None:
            return awg_diameter(self.gauge)
        assert self.area is not None  # one of the two, by validation
        return math.sqrt(4 * self.area.typ / math.pi)

    @property
    def section(self) -> float:
        """Cross-section of one conductor. [m^2]"""
        return math.pi * self.diameter**2 / 4

    @property
    def between_axes(self) -> Quantity:
        """Spacing of the two axes; assumed where it was not given. [m]"""
        return self.spacing or assume(
            f"{2 * self.diameter:.3g} m",
            LENGTH,
            "two conductors side by side, insulation half a diameter, from memory",
        )

    @property
    def inductance(self) -> float:
        """Of the loop out and back. [H]"""
        return pair_inductance(self.diameter, self.between_axes.typ, self.length.typ)

    def ohms(self, corner: Corner, around: Surroundings | None) -> float:
        """Resistance out and back at the ambient of a corner, 20 degC where none was given. [ohm]"""
        t = T_20C
        if around is not None:
            t = around.ambient_high if corner.winding == "hot" else around.ambient_low
        return loop_resistance(self.section, self.length.typ, t)
