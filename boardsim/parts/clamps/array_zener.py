"""The diodes of a sink array, their common pin tied to the coil rail through one Zener for the whole package."""

from __future__ import annotations

from typing import TYPE_CHECKING, Annotated, ClassVar, Literal

from pydantic import AfterValidator

from boardsim.parts.base import Corner, Part, Shelf, Stamp, named_part
from boardsim.parts.clamp import in_series
from boardsim.parts.clamps.array import ArrayClamp, with_diode
from boardsim.parts.darlington import DarlingtonArray
from boardsim.parts.elements import Ammeter, current
from boardsim.parts.tvs import Tvs
from boardsim.parts.zener import Zener
from boardsim.quantities import Quantity

if TYPE_CHECKING:
    from boardsim.parts.coil import Coil


class ArrayZenerClamp(Part):
    """The array's own diodes and a Zener in its common pin: a quicker release for one part more per package.

    Notes
    -----
    Every output that turns off sends its coil's current through its own diode to the common pin, and the Zener takes the sum:
    with n coils of the same current I_0 together n I_0, n times the energy of one, and the pin rises with n I_0 Z. The
    output sees V + V_Z + V_F. L di/dt = -R i - V_Z - V_F for each coil while V_Z hardly depends on the current
    (Kirchhoff). The diode of an output that is on blocks V + V_Z.

    The Zener exists once per package: its peak current, its energy per pulse, its average power and its heat are judged on
    the package. `array` describes the diodes. The coils of one package share one rail, and the Zener's leads count for nothing.
    """

    role: ClassVar[str] = "clamp"
    kind: Literal["array-zener"] = "array-zener"
    to: Literal["rail"] = "rail"
    part: Annotated[named_part(DarlingtonArray), AfterValidator(with_diode)]  # type: ignore[valid-type]
    zener: named_part(Zener, Tvs)  # type: ignore[valid-type]

    @classmethod
    def candidates(cls, shelf: Shelf, coil: Coil, rail: float) -> tuple[ArrayZenerClamp, ...]:
        """One array of each sort of diode with every Zener."""
        arrays = ArrayClamp.candidates(shelf, coil, rail)
        return tuple(cls(part=a.part, zener=z) for a in arrays for z in shelf(Zener))

    def tolerances(self) -> dict[str, Quantity]:
        """What the corners vary in this clamp."""
        return {"clamp_voltage": self.zener.clamping}

    def matched(self, switch: Part) -> Part:
        """With the switch's own array, where the switch is in one that has diodes."""
        return self.model_copy(update={"part": self._diode.matched(switch).part})  # type: ignore[attr-defined]

    def beside(self, switch: Part) -> str:
        """The diodes belong to the switch's own package."""
        return self._diode.beside(switch)

    @property
    def _diode(self) -> ArrayClamp:
        return ArrayClamp(part=self.part)

    def common(self, name: str, a: str, b: str, corner: Corner) -> Stamp:
        """The Zener from the common pin `a` to the rail `b`."""
        meter = Ammeter(f"{name}_a", a, f"{name}_in")
        label = "common Zener" if isinstance(self.zener, Zener) else "common suppressor"
        zener = self.zener.stamp(f"{name}_z", label, f"{name}_in", b, current(meter), corner)
        return in_series((meter,), zener)

    def stamp(self, name: str, a: str, b: str, corner: Corner, control: str = "") -> Stamp:
        """One output's diode, from the coil's node `a` to the common pin `b`."""
        return self._diode.stamp(name, a, b, corner)
