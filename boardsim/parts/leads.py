"""The leads from the board to a coil: copper out and back, with the inductance that a clamp at their far end leaves open."""

from __future__ import annotations

from typing import Annotated, ClassVar, Literal

from boardsim.parts.base import Corner, Stamp, Surroundings, listed
from boardsim.parts.elements import Inductor, Port, Probe, Resistor, current, plus, scaled, voltage
from boardsim.parts.pair import Pair
from boardsim.quantities import POSITIVE_RESISTANCE, Quantity, assume


class Leads(Pair):
    """Two wires side by side from the board to one coil.

    Notes
    -----
    R out and back in series with (L of the pair, parallel to a loss resistance). With the clamp on the board the leads
    only add to the coil. With the clamp at the coil the current of the leads has no path of its own when the switch
    opens: the drain rises by L di/dt above rail and clamp, and takes L I^2/2 from the leads; how high depends on how
    fast the switch lets the current fall (Kirchhoff's voltage law around rail, clamp, leads and switch).

    A lumped pair: holds for edges that last longer than the wave takes along the leads, about 5 ns per metre of
    insulated wire each way. The wires' capacitance is left out, which errs towards higher peaks. A bare inductance would
    ring with the switch's output capacitance for ever; skin effect and insulation end that within some ten periods
    (from memory), which a loss resistance of ten times its wave resistance (about 100 ohm) does as well.
    """

    role: ClassVar[str] = "leads"
    kind: Literal["leads"] = "leads"
    loss: Annotated[Quantity, POSITIVE_RESISTANCE] = assume(
        "1 kohm",
        POSITIVE_RESISTANCE,
        "across the leads' inductance, so that its ringing dies within some ten periods as it does on wires, from memory",
    )

    def stamp(self, name: str, coil: str, board: str, corner: Corner, around: Surroundings | None) -> Stamp:
        """The leads from node `coil` to node `board`; the wire from the rail is folded into it."""
        mid, loss = f"{name}_m", self.loss.typ
        wire = Inductor(f"{name}_l", mid, board, self.inductance)
        through = plus(current(wire), scaled(1 / loss, voltage(mid, board)))
        return Stamp(
            elements=(
                Resistor(f"{name}_r", coil, mid, self.ohms(corner, around)),
                wire,
                Resistor(f"{name}_loss", mid, board, loss),
            ),
            probes=(
                Probe("v_leads", voltage(coil, board), "V"),
                Probe("i_leads", through, "A"),
                Probe("i_leads_l", current(wire), "A"),
            ),
            ports=(Port("leads", (("v_leads", "i_leads"),), store=("i_leads_l", wire.henries)),),
            assumptions=listed("leads", spacing=self.between_axes, loss_resistance=self.loss),
        )
