"""The P-MOSFET stage: which level shifter is meant, and that all it consists of is read and judged under names of its own."""

from __future__ import annotations

from typing import Any

import pytest
from pydantic import ValidationError

from boardsim.board.reader import library_part
from boardsim.parts.base import NOMINAL, Stamp
from boardsim.parts.rules import BreakdownRule, DriveRule, HeatRule, PeakRule
from boardsim.parts.switches.n_mosfet import NMosfetStage
from boardsim.parts.switches.npn import NpnStage
from boardsim.parts.switches.p_mosfet import PMosfetStage

NPN = {"part": library_part("npn-small"), "base": "2.2 kohm", "pulldown": "100 kohm"}
FET = {"part": library_part("n-logic-60v"), "gate": "100 ohm", "pulldown": "100 kohm"}


def stage(**more: Any) -> PMosfetStage:
    fields = {"part": library_part("IRF9540N"), "gate": "10 ohm", "pullup": "10 kohm", "shifter": NPN}
    return PMosfetStage.model_validate(fields | more)


def stamps(found: Stamp) -> list[Stamp]:
    return [found, *(s for _, inner in found.inside for s in stamps(inner))]


def test_a_base_resistor_tells_a_bipolar_level_shifter_from_another() -> None:
    assert isinstance(stage().shifter, NpnStage)
    assert isinstance(stage(shifter=FET).shifter, NMosfetStage)


@pytest.mark.parametrize("more", [{}, {"shifter": FET}, {"zener": library_part("12v-5w"), "series": "1 kohm"}])
def test_every_transistor_and_the_zener_are_read_audited_and_judged_under_names_of_their_own(
    more: dict[str, Any],
) -> None:
    every = stamps(stage(**more).stamp("c0_s", "c0_q", "c0_d", NOMINAL, "rail"))
    names = [p.quantity for s in every for p in s.probes]
    assert len(names) == len(set(names))
    assert {q for s in every for port in s.ports for pair in port.pairs for q in pair} <= set(names)
    elements = [(type(e), e.name) for s in every for e in s.elements]
    assert len(elements) == len(set(elements))
    rules = [r for s in every for r in s.rules]
    assert {r.voltage for r in rules if isinstance(r, BreakdownRule)} == {"v_ds", "v_ds_shifter"}
    assert {r.what for r in rules if isinstance(r, HeatRule)} >= {
        "junction of the switch",
        "junction of the level shifter",
    }
    assert {"switch", "level shifter"} <= {port.part for s in every for port in s.ports}


def test_a_bipolar_level_shifter_is_asked_for_its_base_current() -> None:
    (shifter,) = [s for name, s in stage().stamp("s", "pin", "load", NOMINAL, "rail").inside if name == "npn-small"]
    (drive,) = [r for r in shifter.rules if isinstance(r, DriveRule)]
    assert (drive.quantity, drive.current) == ("i_b_shifter", "i_d_shifter")
    assert "level shifter" in drive.what
    # Through the base resistor into a junction of 0.6 V at least: (5 V - 0.6 V) / 2.25 kohm.
    assert stage().steady_input(5.0, 50.0) == pytest.approx(4.4 / 2250, rel=1e-6)
    assert stage().held_off()
    assert not stage(shifter={k: v for k, v in NPN.items() if k != "pulldown"}).held_off()


def test_a_gate_zener_is_a_part_of_its_own_and_its_current_none_of_the_gates() -> None:
    found = stage(zener=library_part("12v-5w")).stamp("s", "pin", "load", NOMINAL, "rail")
    (zener,) = [s for name, s in found.inside if name == "12v-5w"]
    assert {r.what for r in zener.rules if isinstance(r, PeakRule)} >= {"peak current of the gate Zener"}
    (i_g,) = [p.signal for p in found.probes if p.quantity == "i_g"]
    assert (-1.0, "i(vs_gz)") in i_g


@pytest.mark.parametrize(
    ("more", "text"),
    [
        ({"pullup": "0 ohm"}, "pullup"),
        ({"series": "0 ohm"}, "series"),
        ({"part": library_part("n-logic-60v")}, "p-mosfet"),
        ({"zener": library_part("fast-2a")}, "zener"),
        ({"shifter": {**NPN, "gate": "10 ohm"}}, "gate"),
    ],
)
def test_a_wrong_stage_is_refused_by_name(more: dict[str, Any], text: str) -> None:
    with pytest.raises(ValidationError, match=text):
        stage(**more)
