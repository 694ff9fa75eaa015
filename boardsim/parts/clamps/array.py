"""The diode to the common pin that every output of a sink array has of its own."""

from __future__ import annotations

from typing import TYPE_CHECKING, Annotated, ClassVar, Literal

from pydantic import AfterValidator

from boardsim.errors import QuantityError
from boardsim.parts.base import Corner, Part, Shelf, Stamp, Total, listed, named_part
from boardsim.parts.clamp import in_series
from boardsim.parts.darlington import DarlingtonArray
from boardsim.parts.diode import EMISSION, junction_parameters
from boardsim.parts.elements import Ammeter, Junction, Model, Port, Probe, current, scaled, voltage
from boardsim.parts.heat import junction_heat
from boardsim.parts.rules import HeatRule, Limit, MeanRule, PeakRule
from boardsim.parts.temperature import in_celsius
from boardsim.quantities import VOLTAGE_DRIFT, assume

if TYPE_CHECKING:
    from boardsim.parts.coil import Coil

_DRIFT = assume("-2 mV/K", VOLTAGE_DRIFT, "forward voltage of a silicon junction against temperature, common practice")
_CAPACITANCE = 10e-12  # [F] at 0 V, a part of what the output's own capacitance is given with; from memory


def with_diode(part: DarlingtonArray) -> DarlingtonArray:
    """An array that has diodes of its own.

    Raises
    ------
    QuantityError
        If it has none.
    """
    if part.clamp_forward is None:
        raise QuantityError(
            f"{part.title or 'the array'} has no clamp_forward: without a diode of its own it is no clamp"
        )
    return part


class ArrayClamp(Part):
    """The array's own diode, its common pin tied to the coil rail: a plain freewheel diode without a part more.

    Notes
    -----
    V = N V_T ln(I / I_S) + R_S I through the array's forward points at 25 degC, N = 1.75 where they leave it open, and
    -2 mV/K of junction temperature. Its
    heat adds to that of the package's outputs. Its reverse voltage is rated like that of the output.
    """

    role: ClassVar[str] = "clamp"
    kind: Literal["array"] = "array"
    to: Literal["rail"] = "rail"
    part: Annotated[named_part(DarlingtonArray), AfterValidator(with_diode)]  # type: ignore[valid-type]

    @classmethod
    def candidates(cls, shelf: Shelf, coil: Coil, rail: float) -> tuple[ArrayClamp, ...]:
        """One array of each sort of diode: packages of seven and of eight have the same."""
        sorts = {
            (*((f.voltage.typ, f.current.typ) for f in p.clamp_forward), str(p.clamp_current), str(p.output_voltage)): p
            for p in shelf(DarlingtonArray)
            if isinstance(p, DarlingtonArray) and p.clamp_forward is not None
        }
        return tuple(cls(part=p) for p in sorts.values())

    def matched(self, switch: Part) -> Part:
        """With the switch's own array, where the switch is in one that has diodes."""
        part = getattr(switch, "part", None)
        fits = isinstance(part, DarlingtonArray) and part.clamp_forward is not None
        return self.model_copy(update={"part": part}) if fits else self

    def beside(self, switch: Part) -> str:
        """The diode belongs to the switch's own package: its heat and its ground are shared."""
        if getattr(switch, "part", None) == self.part:
            return ""
        return (
            f"the clamp is the diode inside {self.part.title or 'an array'}, and the switch is another part; make both the same "
            "array, or choose another clamp"
        )

    def stamp(self, name: str, a: str, b: str, corner: Corner, control: str = "") -> Stamp:
        """The clamp from node `a` to node `b`: the coil's ends, in the direction of its current after the turn-off."""
        part: DarlingtonArray = self.part
        label, title = "array diode", part.title or "array"
        inside = f"{name}_in"
        meter = Ammeter(f"{name}_a", a, inside)
        i_s, n, r_s = junction_parameters(part.clamp_forward or (), _DRIFT, EMISSION, corner.junction)
        tnom = in_celsius(corner.junction)
        model = Model(f"{name}_m", "D", {"IS": i_s, "N": n, "RS": r_s, "CJO": _CAPACITANCE, "TNOM": tnom})
        v, i, v_r = f"v_{label}", f"i_{label}", f"vr_{label}"
        rating = Limit.of(part.clamp_current, "clamp diode current", "A", "current")
        diode = Stamp(
            elements=(Junction(f"{name}_d", inside, b, model),),
            probes=(
                Probe(v, voltage(inside, b), "V"),
                Probe(v_r, scaled(-1, voltage(inside, b)), "V"),
                Probe(i, current(meter), "A"),
            ),
            ports=(Port(label, ((v, i),), holds=0.5 * _CAPACITANCE * part.output_voltage.typ**2),),
            rules=(
                PeakRule(
                    "overvoltage",
                    v_r,
                    Limit.of(part.output_voltage, "output voltage", "V", "voltage", part.output_voltage.min),
                    "destroy",
                    f"reverse voltage of the {label}",
                    "an array of a higher voltage",
                    part=title,
                ),
                PeakRule(
                    "overcurrent",
                    i,
                    rating,
                    "destroy",
                    f"peak current of the {label}",
                    "a clamp of its own beside the array",
                    part=title,
                ),
                MeanRule(
                    "overcurrent",
                    (i,),
                    rating,
                    "destroy",
                    f"average current of the {label}",
                    "a clamp of its own beside the array, or fire less often",
                    part=title,
                ),
            ),
            totals=(Total(self._heat(part, title, (v, i), corner)),),
            assumptions=listed("array diode", drift_of_the_forward_voltage=_DRIFT),
        )
        return in_series((meter,), diode)

    def _heat(self, part: DarlingtonArray, title: str, power: tuple[str, str], corner: Corner) -> HeatRule:
        return junction_heat(
            title,
            "package",
            (power,),
            part.thermal_resistance,
            part.junction_rating,
            corner.ambient,
            "fire less often, or spread the channels over more packages",
        )
