"""Boots held against what matters, from readings that are made up: no engine runs here."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from boardsim.board.reader import Board, read_board
from boardsim.circuit.boot import Boot
from boardsim.parts.base import NOMINAL
from boardsim.scenarios.power_up import boots
from boardsim.verdict.findings import Finding
from boardsim.verdict.power_up import BootReading, Uncommanded
from boardsim.verdict.power_up_findings import judge_boot

F03 = Path(__file__).parents[1] / "boards" / "f03_all_fire_at_power_up"
REPAIRED = read_board(F03 / "repaired.toml")


def judged(of: Board, boot: Boot, one: Uncommanded, cleared: float | None = None) -> list[Finding]:
    reading = BootReading("nominal", {c.number: one for c in of.channels}, cleared, {})
    return judge_boot(of, boot, reading, NOMINAL, ())


def fed(seconds: float) -> Uncommanded:
    return Uncommanded(0.0, 0.0, 1e-3, 0.0, seconds)


def reset_of(of: Board) -> Boot:
    return [*boots(of, 1)][-1]


@pytest.mark.parametrize(
    ("seconds", "verdict", "consequence"),
    [(0.15e-3, "pass", "misbehave"), (0.95e-3, "tight", "misbehave"), (2e-3, "fail", "misbehave"), (np.inf, "fail", "destroy")],
)  # fmt: skip
def test_the_time_that_coils_are_fed_after_a_reset_counts_from_the_reset(
    seconds: float, verdict: str, consequence: str
) -> None:
    boot = reset_of(REPAIRED)
    assert boot.reset is not None
    found = judged(REPAIRED, boot, fed(seconds))[0]
    assert (found.verdict, found.consequence, found.unit, found.limit) == (verdict, consequence, "s", 1e-3)
    assert found.value == pytest.approx(seconds if np.isfinite(seconds) else boot.until - boot.reset)
    assert found.at == pytest.approx(boot.reset + found.value)
    assert "rails' order" not in found.assumed
    assert ("time of the first frame" in found.assumed) is False  # the board gives it
    assert ("coil rail after the logic rail" in found.sentence) is False
    assert ("a smaller pull-down at its gate" in found.sentence) == (verdict == "fail")


def test_what_flows_before_the_first_frame_hangs_on_what_counts() -> None:
    assumed = judged(REPAIRED, next(boots(REPAIRED, 1)), Uncommanded(0.0, 0.0, 0.0, 0.0))[0].assumed
    assert assumed == ("current that does not matter",)


def test_a_clear_that_does_not_end_within_the_run_is_one_finding_and_no_moment() -> None:
    found = []
    for boot in boots(REPAIRED, 1):
        found += [f for f in judged(REPAIRED, boot, fed(0.0), np.inf) if f.check == "clear"]
    assert len(found) > 2
    assert {f.key for f in found} == {("clear", "clear, low at least until", "chain", "chain")}
    assert {f.at for f in found} == {None}
    assert {f.verdict for f in found} == {"fail"}
    assert "not surely high within the run, which ends at" in found[0].sentence


def test_a_clear_that_ends_is_one_finding_with_its_moment() -> None:
    (found,) = [f for f in judged(REPAIRED, next(boots(REPAIRED, 1)), fed(0.0), 6e-3) if f.check == "clear"]
    assert (found.quantity, found.at, found.verdict) == ("end of clear before the first frame", 6e-3, "pass")


def test_without_a_pull_up_at_output_enable_a_reset_is_told_to_hold_it() -> None:
    of = replace(REPAIRED, chain=REPAIRED.chain.model_copy(update={"output_enable": None}))
    found = judged(of, reset_of(of), fed(np.inf))[0]
    assert "output enable tied low" in found.assumed
    assert "hold output enable high with a pull_up" in found.sentence
