"""The RC snubber as a part: where it lies, which end of its band counts, the rule for contacts, and what is judged."""

from __future__ import annotations

import itertools
from pathlib import Path

import pytest
from pydantic import ValidationError

from boardsim.board.corners import corners
from boardsim.board.reader import Board, read_board
from boardsim.circuit.assemble import assemble, windows
from boardsim.circuit.deck import Deck
from boardsim.errors import InputError
from boardsim.firing.pattern import read_pattern
from boardsim.firing.schedule import fire
from boardsim.parts.base import NOMINAL, Corner
from boardsim.parts.clamps.snubber import SnubberClamp, contact_rule
from boardsim.parts.elements import Capacitor
from boardsim.parts.rules import PeakRule
from boardsim.scenarios.audited import LADDER, fitted

BOARD = """
supply = {{ voltage = "24 V" }}
cable = {{ gauge = "18 AWG", length = "1 m" }}
bulk = {{ capacitance = "1000 uF", esr = "50 mohm" }}
logic = {{ voltage = "5 V" }}
[chain]
register = "74HC595"
count = 1
clock = "1 MHz"
[coils.gate]
resistance = "120 ohm"
inductance = "30 mH"
[channels."0"]
coil = "gate"
switch = {{ part = "n-logic-60v", gate = "100 ohm" }}
clamp = {{ kind = "snubber", {clamp} }}
{more}
"""
RC = 'capacitance = "100 nF +/- 10 %", resistance = "47 ohm"'
LEADS = 'leads = { gauge = "24 AWG", length = "2 m" }'


def board(folder: Path, clamp: str = RC, more: str = "") -> Board:
    (folder / "board.toml").write_text(BOARD.format(clamp=clamp, more=more), encoding="utf-8")
    return read_board(folder / "board.toml")


def deck(folder: Path, clamp: str, more: str = "") -> Deck:
    read = board(folder, clamp, more)
    (folder / "pattern.toml").write_text(
        '[[pulses]]\nchannels = "0"\nstart = "1 ms"\nwidth = "1 ms"\n', encoding="utf-8"
    )
    firing = fire(read, read_pattern(folder / "pattern.toml", read))
    return assemble(read, firing, NOMINAL, windows(read, firing)[0])


@pytest.mark.parametrize(
    ("clamp", "more", "ends"),
    [
        (RC, "", ("c0_d", "rail")),
        (f'across = "coil", {RC}', "", ("c0_d", "rail")),
        (f'across = "switch", {RC}', "", ("c0_d", "0")),
        (f'at = "coil", {RC}', LEADS, ("c0_k", "rail")),
        (f'across = "switch", {RC}', LEADS, ("c0_d", "0")),
    ],
)
def test_it_lies_where_its_keys_say(tmp_path: Path, clamp: str, more: str, ends: tuple[str, str]) -> None:
    lines = {
        line.split()[0]: line.split()[1:3]
        for line in deck(tmp_path, clamp, more).netlist.splitlines()
        if line[:1] in "VC"
    }
    assert (lines["Vc0_c_a"][0], lines["Cc0_c_c"][1]) == ends


@pytest.mark.parametrize(
    ("clamp", "more", "text"),
    [
        ('capacitance = "100 nF"', "", '"resistance" is missing'),
        ('resistance = "47 ohm"', "", '"capacitance" is missing'),
        ('capacitance = "100 nF", resistance = "0 ohm"', "", "'0 ohm' is zero"),
        (f'across = "gate", {RC}', "", 'allowed: "coil", "switch"'),
        (f'place = "switch", {RC}', "", '"place" is not known here'),
        (f'at = "coil", {RC}', "", "no leads are given"),
        (f'at = "coil", across = "switch", {RC}', LEADS, "sits on the board"),
        (f'rated = "630", {RC}', "", "630"),
        (f'pulse = "9 W", {RC}', "", '"pulse" must be a list in [ ]'),
    ],
)  # fmt: skip
def test_a_mistake_in_it_is_named(tmp_path: Path, clamp: str, more: str, text: str) -> None:
    with pytest.raises(InputError) as caught:
        board(tmp_path, clamp, more)
    assert text in str(caught.value)
    assert "board.toml" in str(caught.value)


def test_the_corner_of_a_high_clamp_voltage_has_the_least_capacitance(tmp_path: Path) -> None:
    read = board(tmp_path)
    assert {c.ends.get("clamp_voltage") for c in corners(read)} >= {"min", "max"}
    for end, farads in (("max", 90e-9), ("min", 110e-9)):
        stamp = read.channels[0].clamp.stamp("c", "drain", "rail", Corner("one", {"clamp_voltage": end}))  # type: ignore[dict-item]
        (found,) = (e for e in stamp.elements if isinstance(e, Capacitor))
        assert found.farads == pytest.approx(farads)
        (port,) = (p for p in stamp.ports if p.store is not None)
        assert port.store == ("v_snubber capacitor", found.farads)


def test_its_capacitor_is_held_against_voltage_and_current_in_either_direction() -> None:
    fields = {"capacitance": "100 nF", "resistance": "47 ohm"}
    for rated, value in (({}, None), ({"rated": "250 V", "pulse_current": "5 A"}, 250.0)):
        rules = SnubberClamp.model_validate({**fields, **rated}).stamp("c", "d", "rail", NOMINAL).rules
        volts, amperes = (r for r in rules if isinstance(r, PeakRule))
        assert (volts.limit.value, volts.magnitude, volts.consequence) == (value, True, "destroy")
        assert (amperes.limit.value, amperes.magnitude) == (None if value is None else 5.0, True)


@pytest.mark.parametrize(("amperes", "volts", "farads", "ohms"), [(1.0, 110.0, 0.1e-6, 7.56), (0.1, 110.0, 1e-9, 75.6)])
def test_the_rule_for_contacts_is_what_is_published(amperes: float, volts: float, farads: float, ohms: float) -> None:
    """Paktron's rule as the Duniway Terranova manuals quote it: 0.1 uF, 7.56 ohm at 1 A; 0.001 uF, 75.6 ohm at 0.1 A."""
    found = contact_rule(amperes, volts)
    assert found[0] == pytest.approx(farads, rel=1e-9)
    assert found[1] == pytest.approx(ohms, rel=1e-3)  # printed to three digits


def test_it_is_followed_with_steps_that_resolve_its_swing(tmp_path: Path) -> None:
    """30 mH and at least 90 nF swing with a period of 2 pi sqrt(L C) = 326 us; L/R alone, 180 us, would allow 30 us."""
    swings = fitted(LADDER, board(tmp_path))
    assert swings[0].max_step <= 326e-6 / 36
    assert all(b.max_step < a.max_step for a, b in itertools.pairwise(swings))


def test_only_a_snubber_across_the_coil_can_sit_at_it() -> None:
    with pytest.raises(ValidationError, match="sits on the board"):
        SnubberClamp.model_validate({"capacitance": "1 uF", "resistance": "1 ohm", "across": "switch", "at": "coil"})
