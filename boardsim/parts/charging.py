"""The resistor through which a supply charges a reservoir: pulses live on what the reservoir holds."""

from __future__ import annotations

from typing import Annotated, ClassVar, Literal

from boardsim.parts.base import Corner, Part, Stamp
from boardsim.parts.elements import Port, Probe, Resistor, scaled, voltage
from boardsim.parts.rules import Limit, MeanRule
from boardsim.quantities import POSITIVE_RESISTANCE, POWER, Quantity


class ChargingResistor(Part):
    """A resistor between the cable and the bulk capacitor, which is then the reservoir that feeds the coils.

    Notes
    -----
    i = (v_cable - v_reservoir) / R: a reservoir C recharges with the time constant R C, to 63 % of what it lacked after one of them,
    to 95 % after three. It carries both the charge of the pulses and what coils draw while they are on. Its heat is judged as an
    average over the pattern; the surge of the first charge at switch-on, C V^2 / 2, is not.
    """

    role: ClassVar[str] = "charging"
    kind: Literal["charging"] = "charging"
    resistance: Annotated[Quantity, POSITIVE_RESISTANCE]
    power: Annotated[Quantity, POWER] | None = None

    def tolerances(self) -> dict[str, Quantity]:
        """What the corners vary in this part."""
        return {"charging": self.resistance}

    def stamp(self, near: str, far: str, corner: Corner) -> Stamp:
        """The resistor from the cable's node `near` to the reservoir's node `far`."""
        ohms, across = corner.take(self.resistance, "charging"), voltage(near, far)
        return Stamp(
            elements=(Resistor("charging", near, far, ohms),),
            probes=(Probe("v_charging", across, "V"), Probe("i_charging", scaled(1 / ohms, across), "A")),
            ports=(Port("charging resistor", (("v_charging", "i_charging"),)),),
            rules=(
                MeanRule(
                    "overpower",
                    ("v_charging", "i_charging"),
                    Limit.of(self.power, "rated power", "W", "power"),
                    "destroy",
                    "average power of the charging resistor",
                    "a resistor of more power, or fewer pulses",
                ),
            ),
        )
