"""The supply's characteristic on ngspice: its resistance, its ceiling, and that it takes nothing back."""

from __future__ import annotations

from pathlib import Path

import pytest

from boardsim.circuit.build import Builder
from boardsim.engine.run import Engine
from boardsim.parts.base import NOMINAL
from boardsim.parts.elements import Drive
from boardsim.parts.proof import AtEnd
from boardsim.parts.supply import Supply
from boardsim.verdict.proving import read_proof

pytestmark = pytest.mark.engine

SUPPLY = Supply.model_validate({"voltage": "24 V", "resistance": "20 mohm", "current_ceiling": "10 A"})


@pytest.mark.parametrize(
    ("held_at", "current"),
    [
        (24.0 - 0.02 * 5.0, 5.0),  # Ohm's law behind 20 mohm
        (24.0 - 0.02 * 9.0, 9.0),
        (20.0, 10.0),  # at its ceiling: constant current
        (0.0, 10.0),  # a short circuit
        (29.0, 0.0),  # its output pulled above its voltage: nothing goes back but what the internal load takes
    ],
)
def test_a_supply_held_at_a_voltage_gives_the_current_of_its_characteristic(
    tmp_path: Path, held_at: float, current: float
) -> None:
    duration = 1e-3
    stamp = SUPPLY.stamp("out", NOMINAL)
    builder = Builder()
    builder.add((*stamp.elements, Drive("hold", "out", "0", ((0.0, 24.0), (duration / 2, held_at), (1.0, held_at)))))
    lines = [builder.netlist().rstrip(), ".options method=gear temp=25 tnom=25", f".tran 1u {duration:g} 0 1u", ".end"]
    (probe,) = (p for p in stamp.probes if p.quantity == "i_supply")
    with (
        Engine(tmp_path, time_limit=60.0) as engine,
        engine.run_text("\n".join(lines) + "\n", duration) as waves,
    ):
        found = read_proof(AtEnd(probe.signal), waves)
    # 0.1 % is what a short circuit may exceed the ceiling by; the internal load of 10 kohm, and 10 kohm against what comes back, take their share.
    assert found == pytest.approx(current, rel=1.1e-3, abs=(29.0 + 5.0) / 10e3)
