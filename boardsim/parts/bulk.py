"""The bulk capacitor on the coil rail."""

from __future__ import annotations

from typing import Annotated, ClassVar, Literal

from boardsim.parts.base import Corner, Part, Stamp, listed
from boardsim.parts.elements import GROUND, Capacitor, Inductor, Port, Probe, Resistor, current, plus, scaled, voltage
from boardsim.parts.rules import Limit, PeakRule
from boardsim.quantities import (
    CAPACITANCE,
    INDUCTANCE,
    POSITIVE_RESISTANCE,
    RESISTANCE,
    VOLTAGE,
    Quantity,
    assume,
)

_MIN_ESR = 1e-4  # [ohm], keeps the branch resistive where 0 ohm was given


class Bulk(Part):
    """Capacitance with equivalent series resistance and inductance.

    Notes
    -----
    The series inductance has a loss resistance across it: above some MHz the windings and plates are lossy, and
    without it the rail would ring against the switches' output capacitances for as long as no real rail does.
    """

    role: ClassVar[str] = "bulk"
    kind: Literal["bulk"] = "bulk"
    capacitance: Annotated[Quantity, CAPACITANCE]
    esr: Annotated[Quantity, RESISTANCE]
    esl: Annotated[Quantity, INDUCTANCE] = assume("20 nH", INDUCTANCE, "radial electrolytic capacitor, from memory")
    esl_loss: Annotated[Quantity, POSITIVE_RESISTANCE] = assume(
        "1 ohm", POSITIVE_RESISTANCE, "damping of the capacitor's inductance above some MHz, from memory"
    )
    rated: Annotated[Quantity, VOLTAGE] | None = None

    def stamp(self, rail: str, corner: Corner) -> Stamp:
        """The capacitor from node `rail` to ground."""
        c = corner.take(self.capacitance, "bulk")
        esr = max(corner.take(self.esr, "esr"), _MIN_ESR)
        coil = Inductor("bulk_esl", rail, "bulk_mid", self.esl.typ)
        through = plus(current(coil), scaled(1 / self.esl_loss.typ, voltage(rail, "bulk_mid")))
        return Stamp(
            elements=(
                # The capacitor lies at ground: what its charge is rounded by, microamperes at steps of picoseconds, then
                # meets its own conductance and not the loss resistance, where Newton's method could not get below it.
                coil,
                Resistor("bulk_loss", rail, "bulk_mid", self.esl_loss.typ),
                Resistor("bulk_esr", "bulk_mid", "bulk_top", esr),
                Capacitor("bulk", "bulk_top", GROUND, c),
            ),
            probes=(
                Probe("v_rail", voltage(rail), "V"),
                Probe("v_bulk_c", voltage("bulk_top"), "V"),
                Probe("v_bulk_port", voltage("bulk_mid"), "V"),
                Probe("i_bulk", through, "A"),
            ),
            ports=(Port("bulk capacitor", (("v_bulk_port", "i_bulk"),), store=("v_bulk_c", c), from_rest=True),),
            rules=(
                PeakRule(
                    "overvoltage",
                    "v_bulk_port",
                    Limit.of(self.rated, "rated voltage", "V", "voltage"),
                    "destroy",
                    "voltage across the bulk capacitor",
                    "choose a higher rated voltage, or let the clamps return less to the rail",
                ),
            ),
            assumptions=listed(
                "bulk capacitor", series_inductance=self.esl, loss_across_series_inductance=self.esl_loss
            ),
        )
