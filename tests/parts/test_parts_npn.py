"""The NPN transistor as a part: what its figures make of the model, what it refuses, and what judges it."""

from __future__ import annotations

import json
import subprocess
import sys
from pathlib import Path
from typing import Any

import pytest
from pydantic import ValidationError

from boardsim.board.reader import library_part
from boardsim.parts.base import NOMINAL
from boardsim.parts.bipolar import saturated
from boardsim.parts.rules import BreakdownRule, DriveRule, HeatRule
from boardsim.parts.switches.npn import Npn, NpnStage

BOARDS = Path(__file__).resolve().parents[1] / "boards"
FIGURES: dict[str, Any] = {
    "breakdown": "40 V",
    "gain": [{"current": "100 mA", "least": 80, "typical": 160}],
    "saturation": [{"voltage": "0.2 V", "current": "100 mA", "base": "10 mA"}],
    "base_emitter": [{"voltage": "0.8 V", "current": "100 mA", "base": "10 mA"}],
}


def npn(**changes: object) -> Npn:
    return Npn.model_validate(FIGURES | changes)


def stage(**changes: object) -> NpnStage:
    return NpnStage.model_validate({"part": npn(**changes), "base": "1 kohm"})


@pytest.mark.parametrize(
    ("changes", "text"),
    [
        ({"gain": []}, '"gain" is empty'),
        ({"gain": [{"current": "100 mA", "least": 80, "typical": 82}]}, "not clearly below the typical gain"),
        ({"gain": [{"current": "100 mA", "least": "80"}]}, "must be a whole number"),
        ({"saturation": [{"voltage": "10 mV", "current": "100 mA", "base": "10 mA"}]}, "less than the junctions alone make"),
        ({"saturation": [{"voltage": "0.2 V", "current": "100 mA", "base": "0.1 mA"}]}, "not in saturation"),
    ],
)  # fmt: skip
def test_figures_that_contradict_each_other_are_refused_by_name(changes: dict[str, Any], text: str) -> None:
    with pytest.raises(ValidationError) as caught:
        npn(**changes)
    assert text in str(caught.value)


def test_currents_in_saturation_obey_both_equations_with_high_level_injection() -> None:
    f, r = saturated(0.5, 0.05, 350.0, 5.0, 0.2)
    q_b = (1 + (1 + 4 * f / 0.2) ** 0.5) / 2
    assert (f - r) / q_b - r / 5.0 == pytest.approx(0.5, rel=1e-9)
    assert f / 350.0 + r / 5.0 == pytest.approx(0.05, rel=1e-9)


def test_the_least_gain_gives_the_base_current_that_is_needed() -> None:
    (rule,) = (r for r in stage().stamp("s", "pin", "drain", NOMINAL).rules if isinstance(r, DriveRule))
    assert rule.needs == ((0.0, 0.0), (0.1, pytest.approx(0.1 / 80)))
    assert rule.consequence == "destroy"


def test_it_has_no_avalanche_rating_so_that_breakdown_destroys_it() -> None:
    (rule,) = (r for r in stage().stamp("s", "pin", "drain", NOMINAL).rules if isinstance(r, BreakdownRule))
    assert rule.breakdown == 40.0
    assert (rule.avalanche_current.value, rule.single.value, rule.repetitive.value) == (None, None, None)


def test_ratings_that_were_not_given_stay_in_view() -> None:
    (rule,) = (r for r in stage().stamp("s", "pin", "drain", NOMINAL).rules if isinstance(r, HeatRule))
    assert rule.resistance.value is None
    assert rule.limit.value is None


def test_a_typical_gain_that_was_not_given_is_an_assumption() -> None:
    part = npn(gain=[{"current": "100 mA", "least": 80}])
    assert part.parameters()["BF"] == pytest.approx(120.0)
    assert any("typical gain" in a.quantity for a in part.assumed())
    assert not any("typical gain" in a.quantity for a in library_part("npn-small").assumed())  # type: ignore[attr-defined]


def fire(folder: Path, board: Path, pattern: Path) -> tuple[int, list[dict[str, Any]]]:
    command = [sys.executable, "-m", "boardsim.cli", "fire", str(board), str(pattern), "--out", str(folder), "--strict"]
    done = subprocess.run(command, capture_output=True, text=True, check=False)
    assert "Traceback" not in done.stderr
    found: list[dict[str, Any]] = json.loads((folder / "findings.json").read_text())["findings"]
    return done.returncode, found


@pytest.mark.engine
def test_a_base_that_is_driven_too_weakly_fails_for_that_alone_and_passes_when_repaired(tmp_path: Path) -> None:
    folder = BOARDS / "f13_under_driven"
    status, found = fire(tmp_path / "bad", folder / "bad.toml", folder / "pattern.toml")
    assert status == 1
    assert [f["check"] for f in found if f["verdict"] != "pass"] == ["under-drive"]
    status, found = fire(tmp_path / "repaired", folder / "repaired.toml", folder / "pattern.toml")
    assert status == 0
    assert {f["verdict"] for f in found} <= {"pass", "tight"}


@pytest.mark.engine
def test_an_unclamped_coil_breaks_the_transistor_down(tmp_path: Path) -> None:
    folder = BOARDS / "f13_under_driven"
    text = (folder / "repaired.toml").read_text()
    board = tmp_path / "board.toml"
    board.write_text(text.replace('{ kind = "diode", to = "rail", diode = "fast-2a" }', '{ kind = "none" }'))
    status, found = fire(tmp_path / "out", board, folder / "pattern.toml")
    assert status == 1
    broken = [f for f in found if f["verdict"] == "fail" and f["check"] == "overvoltage"]
    assert broken
    assert "breakdown destroys it" in broken[0]["sentence"]
