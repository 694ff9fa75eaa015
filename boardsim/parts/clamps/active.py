"""An active clamp: a Zener and a diode from the switch's drain to its gate turn it on again, and it takes the energy itself."""

from __future__ import annotations

from typing import TYPE_CHECKING, ClassVar, Literal

from boardsim.parts.base import Corner, Part, Shelf, Stamp, named_part
from boardsim.parts.clamp import in_series
from boardsim.parts.diode import Diode, most_current
from boardsim.parts.elements import Ammeter, current
from boardsim.parts.tvs import Tvs
from boardsim.parts.zener import Zener
from boardsim.quantities import Quantity

if TYPE_CHECKING:
    from boardsim.parts.coil import Coil


class ActiveClamp(Part):
    """A Zener and a diode in series between drain and gate: the switch stays on just enough to hold its own voltage.

    Notes
    -----
    When the switch opens its drain rises until the Zener conducts into the gate. The gate then settles where the channel carries
    the coil's current I: V_GS = V_GS(I), and the Zener carries what the gate's network takes at that voltage,
    I_Z = V_GS / R_pulldown + (V_GS - V_low) / (R_gate + R_out) with the output low (Kirchhoff at the gate). The drain holds V_Z +
    V_F + V_GS, and L di/dt = V - V_DS - R i: the circuit of a Zener across the switch, but the switch's channel is what takes
    the coil's energy and what the supply adds, V_DS L/R [I_0 - (V_DS - V)/R ln(1 + R I_0 / (V_DS - V))]. The diode keeps the
    gate from feeding the coil's node while the switch is on.

    This is no avalanche, and its ratings do not count: the switch works in its linear region, and is judged by its safe area or
    its thermal impedance (`parts/linear.py`). Zener and diode carry milliamperes. A Zener of less than the highest rail turns
    the switch on for good.

    Holds while the gate network is quicker than the coil; before it has settled the drain overshoots by what charging the gate
    takes of the Zener's impedance. The loop drain-Zener-gate has no inductance of its own here; long traces make it ring.

    References
    ----------
    The equation of the energy: Infineon, TLE8108EM data sheet rev. 1.0 (2011-03-23), p. 12, eq. (1), for a switch that is its own
    clamp.
    """

    role: ClassVar[str] = "clamp"
    kind: Literal["active"] = "active"
    holds_switch: ClassVar[bool] = True
    zener: named_part(Zener, Tvs)  # type: ignore[valid-type]
    diode: named_part(Diode)  # type: ignore[valid-type]

    @property
    def across(self) -> Literal["coil", "switch"]:
        """The switch."""
        return "switch"

    @classmethod
    def candidates(cls, shelf: Shelf, coil: Coil, rail: float) -> tuple[ActiveClamp, ...]:
        """Every Zener and every suppressor with the diode of the least current: that of the gate's network is small."""
        smallest = min(shelf(Diode), key=most_current, default=None)  # type: ignore[arg-type]  # a shelf of diodes
        zeners = (*shelf(Zener), *shelf(Tvs))
        return tuple(cls(zener=z, diode=smallest) for z in zeners) if smallest is not None else ()

    def tolerances(self) -> dict[str, Quantity]:
        """What the corners vary in this clamp."""
        return {"clamp_voltage": self.zener.clamping}

    def blocks(self, volts: float) -> bool:
        """Whether its lowest voltage is above that of the rail, which would turn the switch on through it. [V]"""
        return bool(self.zener.clamping.min > volts)

    def takes_over(self, current: float) -> float:
        """None of the coil's current goes through its own parts. [A]"""
        return 0.0

    def beside(self, switch: Part) -> str:
        """The switch must have a gate that it can be led to, and be tied to ground with its source."""
        if not switch.control("switch"):
            return f"an active clamp leads to the switch's gate, and the {switch.kind} has none; choose another clamp or switch"
        if switch.side != "low":
            return f"an active clamp is for a switch that ties the coil to ground, and the {switch.kind} lies at the rail; choose another clamp"
        return ""

    def stamp(self, name: str, a: str, b: str, corner: Corner, control: str = "") -> Stamp:
        """The clamp from the switch's drain `a` to its gate `control`; its source is at `b`."""
        gate = control or f"{name}_gate"  # without a switch only its parts are looked at
        meter = Ammeter(f"{name}_a", a, f"{name}_in")
        through, middle = current(meter), f"{name}_mid"
        label = "clamp Zener" if isinstance(self.zener, Zener) else "clamp suppressor"
        zener = self.zener.stamp(f"{name}_z", label, f"{name}_in", middle, through, corner)
        diode = self.diode.stamp(f"{name}_d", "clamp diode", middle, gate, through, corner)
        # What it feeds into the gate is power that the switch's network takes: the audit counts it there.
        return in_series((meter,), zener, diode, Stamp(joins=(("i_g", through),)))
