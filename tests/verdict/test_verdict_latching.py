"""Whether pulses flip a latching coil: made-up currents whose times and states follow from closed forms; no waveforms of ngspice."""

from __future__ import annotations

import functools
import itertools
import math
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from boardsim.board.corners import not_varied
from boardsim.board.reader import Board, read_board
from boardsim.circuit.assemble import assemble, windows
from boardsim.circuit.deck import PlacedRule
from boardsim.firing.pattern import Pattern, Pulse
from boardsim.firing.schedule import fire
from boardsim.parts.base import NOMINAL
from boardsim.parts.rules import IdleRule, LatchRule, Limit, PullInRule, ReleaseRule
from boardsim.verdict.bench import Bench
from boardsim.verdict.findings import Finding, Floats
from boardsim.verdict.latching import judge_latch
from boardsim.verdict.power_up import harmless, settled
from boardsim.verdict.throws import Throws, lasting_current

BOARD = Path(__file__).parents[1] / "boards" / "f16_under_pulsed" / "repaired.toml"
TAU = 1e-3  # [s], of the made-up coil
T = np.linspace(0.0, 40e-3, 40_001)
FORTH, BACK = (1e-3, 5e-3), (21e-3, 25e-3)
NEVER: Floats = np.empty((0, 2))


def rule(
    check: str = "flip", at: float | None = 0.6, after: float | None = 2e-3, holds: float | None = 0.1, starts: int = 0
) -> LatchRule:
    return LatchRule(
        check,  # type: ignore[arg-type]  # one of two words
        "i_coil",
        Limit(at, "A", None, "", "current that flips it"),
        Limit(after, "s", None, "", "time to flip"),
        Limit(holds, "A", None, "", "current that never flips it"),
        starts,
    )


def rise(settled: float, span: tuple[float, float]) -> Floats:
    """A pulse that goes to `settled` and back to nothing, both with TAU. [A]"""
    on, off = span
    top = settled * (1 - math.exp(-(off - on) / TAU))
    up = settled * (1 - np.exp(-np.maximum(T - on, 0) / TAU))
    return np.where(on > T, 0.0, np.where(off > T, up, top * np.exp(-np.maximum(T - off, 0) / TAU)))


def spans(*rows: tuple[float, float]) -> Floats:
    return np.array(rows).reshape(-1, 2)


def follow(
    of: LatchRule, i: Floats, own: Floats, other: Floats = NEVER, blocks: int = 1, rail: Floats | None = None
) -> Throws:
    found = Throws.of(of, own, [other], float(T[-1]))
    edges = np.linspace(0, len(T) - 1, blocks + 1).astype(int)
    for a, b in itertools.pairwise(edges):
        part = slice(a, b + 1)
        found.feed(T[part], i[part], (np.full(len(T), 24.0) if rail is None else rail)[part])
    return found


@functools.cache
def board() -> Board:
    return read_board(BOARD)


def judged(of: LatchRule, throws: Throws) -> dict[str, Finding]:
    bench = Bench(board(), "nominal", ())
    return {f.quantity: f for f in judge_latch(of, PlacedRule(of, 0, "gate", "gate 0"), throws, bench)}


LASTS, HIGHEST, SHORTEST, KEPT = (
    "current that lasts for as long as a flip takes",
    "highest current of a pulse that has to flip",
    "shortest pulse that has to flip",
    "pulses that leave it as commanded",
)


def lasting(settled: float, span: tuple[float, float], after: float = 2e-3) -> float:
    """Closed form: I (1 - exp(-s/tau)) at a time s after the start is as high as top exp(-r/tau) at r after the end, width + r - s = after."""
    width = span[1] - span[0]
    top = settled * (1 - math.exp(-width / TAU))
    # With e = exp(-s/tau): settled (1 - e) = top exp((width - after) / tau) e.
    e = settled / (settled + top * math.exp((width - after) / TAU))
    return settled * (1 - e)


@pytest.mark.parametrize("blocks", [1, 7, 400])
def test_the_current_that_lasts_is_that_of_the_exponentials(blocks: int) -> None:
    throws = follow(rule(), rise(1.0, FORTH), spans(FORTH), blocks=blocks)
    (p,) = throws.all()
    top = 1 - math.exp(-4)
    assert p.peak == pytest.approx(top, rel=1e-6)
    assert p.lasting == pytest.approx(lasting(1.0, FORTH), rel=1e-5)
    assert p.since - p.on == pytest.approx(TAU * math.log(1 / (1 - p.lasting)), rel=1e-3)
    (f,) = judged(rule(), throws).values()
    assert (f.check, f.quantity, f.unit, f.verdict) == ("flip", LASTS, "A", "pass")
    assert f.margin == pytest.approx(lasting(1.0, FORTH) / 0.6 - 1, rel=1e-4)


def test_a_pulse_whose_current_stays_too_low_fails() -> None:
    (f,) = judged(rule(), follow(rule(), rise(0.5, FORTH), spans(FORTH))).values()
    assert (f.check, f.verdict, f.consequence, f.unit) == ("flip", "fail", "misbehave", "A")
    assert f.margin == pytest.approx(lasting(0.5, FORTH) / 0.6 - 1, rel=1e-4)
    assert "flips after 2.00 ms at 600 mA, and may stay where it was; try: a longer pulse" in f.sentence


def test_a_pulse_that_is_too_short_fails_though_its_highest_current_would_do() -> None:
    short = (1e-3, 3e-3)
    (f,) = judged(rule(), follow(rule(), rise(1.0, short), spans(short))).values()
    assert (f.verdict, f.value) == ("fail", pytest.approx(lasting(1.0, short), rel=1e-4))
    assert (
        f"reaches 865 mA, and {lasting(1.0, short) * 1e3:.0f} mA for 2.00 ms; gate flips after 2.00 ms at 600 mA"
        in f.sentence
    )
    assert "a longer pulse" in f.sentence


def test_a_pulse_that_flips_just_in_time_by_the_closed_form_has_no_margin() -> None:
    """From when the current passes the threshold on its way up until it does on its way down is then just as long as the flip takes."""
    of = rule(at=lasting(1.0, FORTH))
    throws = follow(of, rise(1.0, FORTH), spans(FORTH))
    (f,) = judged(of, throws).values()
    assert f.margin == pytest.approx(0.0, abs=1e-5)
    up, down = (at - 2e-3 for at, _ in throws.flips), TAU * math.log((1 - math.exp(-4)) / (of.at.value or 1))
    assert [4e-3 + down - (at - FORTH[0]) for at in up] == pytest.approx([2e-3], rel=1e-3)


def test_a_current_that_never_lasts_that_long_is_none() -> None:
    spike = np.array([0.0, 1.0, 0.0])
    assert lasting_current(np.array([0.0, 1e-3, 2e-3]), spike, 5e-3) == (0.0, 0.0)
    assert lasting_current(np.array([0.0, 1e-3, 2e-3]), -spike, 1e-3) == (0.0, 0.0)
    flat, _ = lasting_current(np.array([0.0, 1e-3, 2e-3]), np.full(3, 0.4), 2e-3)
    assert flat == pytest.approx(0.4)


def test_a_current_that_sags_below_the_threshold_does_not_ask_for_a_longer_pulse() -> None:
    sagging = rise(1.0, FORTH) * np.where(T > 2.5e-3, 0.5, 1.0)
    (f,) = judged(rule(), follow(rule(), sagging, spans(FORTH))).values()
    assert f.verdict == "fail"
    assert "larger reservoir" in f.sentence
    assert "longer pulse" not in f.sentence


def test_two_stretches_that_are_each_too_short_do_not_add_up() -> None:
    broken = rise(1.0, FORTH) * np.where((T > 3.5e-3) & (T < 3.6e-3), 0.1, 1.0)
    (p,) = follow(rule(), broken, spans(FORTH)).all()
    assert p.lasting < 0.6


def test_an_empty_reservoir_is_told_with_the_rail_of_both_moments() -> None:
    twice = spans(FORTH, (11e-3, 15e-3))
    i = rise(1.0, FORTH) + rise(0.5, (11e-3, 15e-3))
    f = judged(rule(), follow(rule(), i, twice, rail=np.where(T < 5e-3, 24.0, 12.5)))[LASTS]
    assert f.verdict == "fail"
    assert 11e-3 < (f.at or 0.0) < 15e-3
    assert "the coil rail stood at 12.5 V when the pulse began, of 24.0 V before the first" in f.sentence
    assert "a longer pause before it" in f.sentence


def test_the_reverse_channel_reads_the_same_current_with_its_sign_turned() -> None:
    i = rise(1.0, FORTH) - rise(1.0, BACK)
    forth = follow(rule(), i, spans(FORTH), spans(BACK))
    back = follow(rule(), -i, spans(BACK), spans(FORTH))
    assert [p.on for p in forth.all()] == [FORTH[0]]
    assert [p.on for p in back.all()] == [BACK[0]]
    assert forth.all()[0].lasting == pytest.approx(back.all()[0].lasting, rel=1e-6)
    assert [s for _, s in forth.flips] == [1, -1]
    assert [s for _, s in back.flips] == [-1, 1]
    assert forth.strays == back.strays == ()


def test_a_coil_that_is_wired_the_other_way_round_never_flips_as_it_should() -> None:
    of = rule()
    found = judged(of, follow(of, -rise(1.0, FORTH), spans(FORTH)))
    assert found[LASTS].verdict == "fail"
    assert found[LASTS].value == 0.0


def test_a_second_pulse_in_the_same_direction_has_nothing_to_do_if_the_state_is_known() -> None:
    twice, i = spans(FORTH, (11e-3, 12e-3)), rise(1.0, FORTH) + rise(0.3, (11e-3, 12e-3))
    known = rule(starts=-1)
    throws = follow(known, i, twice)
    assert [p.already for p in throws.all()] == [False, True]
    assert {f.verdict for f in judged(known, throws).values()} == {"pass"}
    nobody_knows = judged(rule(), follow(rule(), i, twice))
    assert nobody_knows[LASTS].verdict == "fail"  # the weak one has to flip too


def test_a_pulse_that_finds_its_coil_there_at_the_start_is_told_of_and_passes() -> None:
    of = rule(starts=1)
    found = judged(of, follow(of, rise(0.3, FORTH), spans(FORTH)))
    assert set(found) == {KEPT}
    assert (found[KEPT].verdict, found[KEPT].value) == ("pass", 1.0)


def test_a_known_state_counts_only_as_long_as_every_pulse_before_did_its_work() -> None:
    """Reset too weakly and then set: the coil never left; set after a reset that worked: it has to come back."""
    sets, resets = spans((31e-3, 35e-3)), spans(FORTH)
    of = rule(starts=1)
    weak = follow(of, -rise(0.3, FORTH) + rise(0.3, (31e-3, 35e-3)), sets, resets)
    assert weak.all()[0].already
    worked = follow(of, -rise(1.0, FORTH) + rise(0.3, (31e-3, 35e-3)), sets, resets)
    assert not worked.all()[0].already
    assert judged(of, worked)[LASTS].verdict == "fail"


def test_a_coil_that_is_flipped_back_before_the_next_pulse_fails_though_its_pulse_was_good() -> None:
    i = rise(1.0, FORTH) - rise(1.0, BACK)  # nobody commands the second
    of = rule()
    throws = follow(of, i, spans(FORTH))
    found = judged(of, throws)
    assert found[KEPT].verdict == "fail"
    assert found[LASTS].verdict == "pass"
    stray = rule("stray-flip")
    (f,) = judged(stray, throws).values()
    assert (f.check, f.verdict) == ("stray-flip", "fail")
    assert f.value == pytest.approx(1 - math.exp(-4), rel=1e-6)
    assert len(throws.strays) == 1


@pytest.mark.parametrize(("amperes", "verdict"), [(0.05, "pass"), (0.097, "tight"), (0.3, "fail")])
def test_a_current_between_never_and_surely_counts_as_a_flip_that_nobody_commands(amperes: float, verdict: str) -> None:
    i = rise(1.0, FORTH) - np.where((T > 20e-3) & (T < 20.5e-3), amperes, 0.0)
    (f,) = judged(rule("stray-flip"), follow(rule(), i, spans(FORTH))).values()
    assert f.verdict == verdict
    assert f.value == pytest.approx(amperes, rel=1e-4)  # the pulse has left 1e-7 A


def test_what_decays_in_the_direction_of_its_own_pulse_is_no_disturbance() -> None:
    throws = follow(rule(), rise(1.0, FORTH) - rise(1.0, BACK), spans(FORTH), spans(BACK))
    assert throws.wrong == pytest.approx(0.0, abs=1e-6)


def test_before_anything_is_commanded_either_direction_disturbs_a_coil_of_unknown_state() -> None:
    for sign in (1, -1):
        i = np.where((T > 0.2e-3) & (T < 0.4e-3), sign * 0.3, 0.0)
        assert follow(rule(), i, spans(BACK)).wrong == pytest.approx(0.3)
    agrees = np.where((T > 0.2e-3) & (T < 0.4e-3), 0.3, 0.0)
    assert follow(rule(starts=1), agrees, spans(BACK)).wrong == 0.0


@pytest.mark.parametrize(
    ("of", "verdicts"),
    [
        (rule(at=None), {HIGHEST: "limit-missing"}),
        (rule(after=None), {HIGHEST: "pass", SHORTEST: "limit-missing"}),
        (rule(at=None, after=None), {HIGHEST: "limit-missing", SHORTEST: "limit-missing"}),
    ],
)
def test_nothing_passes_for_want_of_a_number(of: LatchRule, verdicts: dict[str, str]) -> None:
    found = judged(of, follow(of, rise(1.0, FORTH), spans(FORTH)))
    assert {q: f.verdict for q, f in found.items()} == verdicts


def test_without_the_current_that_never_flips_a_disturbance_fails_or_is_missing_its_limit() -> None:
    of = rule("stray-flip", holds=None)
    calm = rise(1.0, FORTH)
    (f,) = judged(of, follow(of, calm, spans(FORTH))).values()
    assert f.verdict == "limit-missing"
    (f,) = judged(of, follow(of, calm - rise(1.0, BACK), spans(FORTH))).values()
    assert f.verdict == "fail"


def test_a_channel_that_is_never_fired_is_judged_by_its_disturbances_only() -> None:
    of = rule()
    assert judged(of, follow(of, 0 * T, NEVER)) == {}


def placed(pulses: tuple[Pulse, ...], edit: Callable[[str], str], folder: Path) -> list[PlacedRule]:
    (folder / "board.toml").write_text(edit(BOARD.read_text(encoding="utf-8")), encoding="utf-8")
    edited = read_board(folder / "board.toml")
    firing = fire(edited, Pattern(edited.path, "p", None, pulses))
    return list(assemble(edited, firing, NOMINAL, windows(edited, firing)[0]).rules)


def test_each_direction_of_a_bridge_is_judged_and_disturbances_once(tmp_path: Path) -> None:
    rules = placed(
        (Pulse(0, 1e-3, 4e-3),),
        lambda text: text.replace('holds_below = "0.1 A"', 'holds_below = "0.1 A"\nstarts = "back"'),
        tmp_path,
    )
    latch = [(p.channel, p.rule) for p in rules if isinstance(p.rule, LatchRule)]
    assert [(c, r.check, r.starts, r.besides) for c, r in latch] == [
        (0, "flip", -1, (4,)),
        (0, "stray-flip", -1, (4,)),
        (4, "flip", 1, (0,)),
    ]
    assert not [p for p in rules if isinstance(p.rule, PullInRule | ReleaseRule)]
    (idle,) = (p.rule for p in rules if isinstance(p.rule, IdleRule))
    assert idle.limit.value == 0.1


def test_limits_count_at_the_end_of_their_band_that_is_worse(tmp_path: Path) -> None:
    def wider(text: str) -> str:
        for old, new in (("0.6 A", "0.6 A +/- 10 %"), ("2 ms", "2 ms +/- 25 %"), ("0.1 A", "0.1 A +/- 20 %")):
            text = text.replace(f'"{old}"', f'"{new}"')
        return text

    latch = next(p.rule for p in placed((), wider, tmp_path) if isinstance(p.rule, LatchRule))
    assert not [a for a in not_varied(read_board(tmp_path / "board.toml")) if a.part == "coil gate"]
    assert (latch.at.value, latch.after.value, latch.holds.value) == pytest.approx((0.66, 2.5e-3, 0.08))
    assert replace(latch, check="flip") == latch


def test_before_the_first_frame_a_share_of_what_never_flips_it_counts() -> None:
    """Of holds_below, 0.1 A; the settled current is 24 V over 24 ohm and the charging resistor's 22 ohm (Ohm's law)."""
    channel = board().channel(0)
    assert harmless(board(), channel, NOMINAL) == pytest.approx(board().power_up.harmless.typ * 0.1)
    assert settled(board(), channel, NOMINAL) == pytest.approx(24 / (24 + 22))
