"""Both directions of a coil at once, and when a coil between two legs counts as fired again; no waveforms needed."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from boardsim.board.reader import Board, read_board
from boardsim.circuit.assemble import assemble, windows
from boardsim.circuit.deck import Deck, PlacedRule
from boardsim.errors import InputError
from boardsim.firing.pattern import Pattern, Pulse
from boardsim.firing.schedule import Firing, fire
from boardsim.parts.base import NOMINAL
from boardsim.parts.rules import IdleRule, ReleaseRule, ShootThroughRule
from boardsim.verdict.audit import refinement
from boardsim.verdict.bench import Bench
from boardsim.verdict.bridges import Leg, both_at_once, fired_again, judge_directions, judge_leg
from boardsim.verdict.findings import Finding
from boardsim.verdict.judge import scale_of
from boardsim.verdict.switching import judge_switching

FOLDER = Path(__file__).parents[1] / "boards" / "f15_both_directions"


def fired(*pulses: tuple[int, float, float]) -> tuple[Board, Firing]:
    board = read_board(FOLDER / "board.toml")
    return board, fire(board, Pattern(board.path, "p", None, tuple(Pulse(*p) for p in pulses)))


def made(*pulses: tuple[int, float, float]) -> Deck:
    board, firing = fired(*pulses)
    return assemble(board, firing, NOMINAL, windows(board, firing)[0])


def test_stretches_of_both_are_those_of_a_comparison_of_every_pair() -> None:
    dice = np.random.default_rng(5)
    one, other = (np.sort(dice.uniform(0, 1, 60)).reshape(-1, 2) for _ in range(2))
    pairs = [(max(a, c), min(b, d)) for a, b in one for c, d in other if max(a, c) < min(b, d)]
    assert len(pairs) > 10
    np.testing.assert_allclose(both_at_once(one, other), sorted(pairs))
    assert both_at_once(one, np.zeros((0, 2))).shape == (0, 2)


def test_directions_on_together_fail_and_say_for_how_long() -> None:
    """Commanded 1 to 5 ms and 4 to 8 ms: both from 4 to 5 ms, and a register frame of 2.5 us later."""
    (f,) = judge_directions(*fired((0, 1e-3, 4e-3), (4, 4e-3, 4e-3)))
    assert (f.check, f.verdict, f.value, f.limit, f.consequence) == ("overlap", "fail", 2.0, 1.0, "misbehave")
    assert f.sentence.startswith(
        "gate 0 and gate 0 back: both directions of one coil are on at once for 1.00 ms from 4.003 ms on"
    )


def test_one_after_the_other_passes_also_on_one_latch() -> None:
    (f,) = judge_directions(*fired((0, 1e-3, 4e-3), (4, 5e-3, 4e-3)))
    assert (f.verdict, f.margin) == ("pass", 0.0)


def test_nothing_is_said_where_one_direction_is_never_fired() -> None:
    assert not [*judge_directions(*fired((4, 1e-3, 4e-3)))]


def test_the_first_pulse_back_is_a_repeat_of_the_pulse_forwards() -> None:
    _, firing = fired((0, 1e-3, 2e-3), (4, 9e-3, 2e-3), (0, 20e-3, 2e-3))
    alone, back, forth = fired_again(firing, 0), fired_again(firing, 4, (0,)), fired_again(firing, 0, (4,))
    np.testing.assert_allclose(alone, [20e-3], atol=10e-6)
    np.testing.assert_allclose(back, [9e-3], atol=10e-6)
    np.testing.assert_allclose(forth, [20e-3], atol=10e-6)
    assert not len(fired_again(firing, 4))


def test_a_bridge_has_one_coil_whose_current_changes_sign_with_the_channel_and_counts_once_by_magnitude() -> None:
    deck = made((0, 1e-3, 1e-3))
    ours, theirs = (
        {n: k for k, n in deck.signals[0, "i_coil"]},
        {n: k for k, n in deck.signals[4, "i_coil"]},
    )
    assert theirs == {name: -share for name, share in ours.items()}
    assert deck.signals[None, "i_total"] == ((1.0, "v(c0_size)"),)
    coils = [line for line in deck.netlist.splitlines() if line.startswith("L") and "c0_l" in line]
    assert len(coils) == 1
    idle = [p.rule for p in deck.rules if isinstance(p.rule, IdleRule)]
    assert [r.besides for r in idle] == [(4,)]
    assert {p.channel: p.rule.besides for p in deck.rules if isinstance(p.rule, ReleaseRule)} == {0: (4,), 4: (0,)}


def hint(*moments: tuple[float, float, float]) -> str:
    """What is tried where the high and the low gate of a leg go through these times [us] and voltages, at thresholds of 2 V."""
    rule = ShootThroughRule("shoot-through", ("v_gs", "v_gs_low"), ("i_d", "i_d_low"), (2.0, 2.0), 1e-6, "given")
    leg = Leg(rule.turn_on)
    t, high, low = np.array(moments).T
    leg.feed(t * 1e-6, np.stack([high, low]), np.ones((2, len(t))))
    board = read_board(FOLDER / "board.toml")
    found = judge_leg(rule, PlacedRule(rule, 0, "part", "gate 0"), leg, Bench(board, "nominal", ()))
    assert found is not None
    assert found.verdict == "fail"
    return found.sentence.partition("; try: ")[2]


def test_a_gate_that_turns_off_too_late_needs_dead_time_and_one_that_is_lifted_again_does_not() -> None:
    late = hint((0, 0, 10), (1, 0, 10), (1.1, 10, 9), (1.4, 10, 0), (5, 10, 0))
    lifted = hint((0, 0, 10), (1, 0, 10), (1.1, 0, 0), (2, 0, 0), (2.1, 4, 0), (2.2, 10, 4), (2.3, 10, 0), (5, 10, 0))
    assert late.startswith("a dead time of at least")
    assert lifted.startswith("a lower resistance that holds the gate which is off")


def of_half_bridge(folder: Path, width: float, **more: str) -> tuple[Board, Firing]:
    text = (FOLDER.parent / "f15_shoot_through" / "repaired.toml").read_text(encoding="utf-8")
    driver = ", ".join(f'{key} = "{value}"' for key, value in more.items())
    text = text.replace('dead_time = "1 us", pulldown', f"{driver}, pulldown")
    (folder / "board.toml").write_text(text, encoding="utf-8")
    board = read_board(folder / "board.toml")
    return board, fire(board, Pattern(board.path, "p", None, (Pulse(0, 1e-3, width),)))


def test_a_drivers_delay_makes_pulses_late_and_its_dead_time_makes_them_narrower(tmp_path: Path) -> None:
    """Both readings are shares of 100 us: 20 us of delay and 30 us of dead time, at their longest, and a register frame."""
    found = {}
    for delay, dead in (("1 ns", "0 s"), ("15 us +/- 5 us", "10 to 30 us")):
        board, firing = of_half_bridge(tmp_path, 100e-6, delay=delay, dead_time=dead, edge="0.1 ns")
        timing = [f for f in judge_switching(board, firing) if f.check == "pulse-timing"]
        found[delay] = {f.quantity: f.value for f in timing}
    plain, slow = found.values()
    assert slow["lateness of a pulse"] - plain["lateness of a pulse"] == pytest.approx(0.5, abs=1e-3)
    assert slow["change of a pulse's width"] == pytest.approx(0.3, abs=1e-3)


def test_pulses_that_are_short_against_a_drivers_lags_are_refused(tmp_path: Path) -> None:
    """Seven times 1 us of dead time and 0.5 us of delay: 10.5 us, which the first misses."""
    for width in (9e-6, 12e-6):
        board, firing = of_half_bridge(tmp_path, width, delay="0.5 us", dead_time="1 us")
        if width < 10.5e-6:
            with pytest.raises(InputError, match=r"gate 0: .* changes back 9.00 us later; .* 10.5 us or more"):
                assemble(board, firing, NOMINAL, windows(board, firing)[0])
        else:
            assert assemble(board, firing, NOMINAL, windows(board, firing)[0]).rules


def flat(fired_at_all: bool) -> Finding | None:
    """A leg whose high gate stays at 1 V, below its 2 V, while the low one goes off and on."""
    rule = ShootThroughRule("shoot-through", ("v_gs", "v_gs_low"), ("i_d", "i_d_low"), (2.0, 2.0), 1e-6, "given")
    leg = Leg(rule.turn_on)
    low = np.array([10.0, 10.0, 0.0, 0.0, 10.0])
    leg.feed(np.arange(5) * 1e-6, np.stack([np.ones(5), low]), np.zeros((2, 5)))
    bench = Bench(read_board(FOLDER / "board.toml"), "nominal", ())
    return judge_leg(rule, PlacedRule(rule, 0, "part", "gate 0"), leg, bench, fired=fired_at_all)


def test_a_leg_that_is_fired_and_never_turns_on_is_not_judged_and_says_so() -> None:
    found = flat(True)
    assert found is not None
    assert (found.verdict, found.limit) == ("limit-missing", None)
    assert "was not judged: the gate of its high transistor never turned that on" in found.sentence
    assert flat(False) is None


@pytest.mark.parametrize(
    ("threshold", "high", "low"),
    [
        ("1.5 V", "pass", "pass"),
        ("0.8 to 5.2 V", "fail", "pass"),
        ("0.05 to 2 V", "pass", "fail"),
        ("1 to 4.9 V", "tight", "pass"),
    ],
)
def test_a_drivers_threshold_lies_between_the_levels_of_the_output_that_drives_it(
    tmp_path: Path, threshold: str, high: str, low: str
) -> None:
    """74HC595: at least 4.9 V of 5 V, at most 0.1 V, at 20 uA (its family's datasheet, in the library)."""
    board, firing = of_half_bridge(tmp_path, 1e-3, dead_time="1 us", threshold=threshold)
    found = {f.quantity: f for f in judge_switching(board, firing) if f.quantity.endswith("at the gate driver")}
    assert found["high level at the gate driver"].verdict == high
    assert found["low level at the gate driver"].verdict == low
    assert (found["high level at the gate driver"].value, found["low level at the gate driver"].value) == pytest.approx(
        (4.9, 0.1)
    )


@pytest.mark.parametrize(("dead", "share"), [(310e-9, 1.3 / 310), (0.0, 1.3 / 5)])
def test_a_change_of_the_time_left_is_a_share_of_the_dead_time(dead: float, share: float) -> None:
    """5 ns of overlap that moved by 1.3 ns."""
    rule = ShootThroughRule("shoot-through", ("v_gs", "v_gs_low"), ("i_d", "i_d_low"), (2.0, 2.0), dead, "given")
    found = flat(True)
    assert found is not None
    new = replace(found, value=-5e-9, limit=0.0, margin=-0.1, verdict="fail", scale=scale_of(rule))
    entry = refinement([replace(new, value=-6.3e-9)], [new], (100, 200), "nominal", "run")
    assert entry.measured == pytest.approx(100 * share)
    assert entry.passed == (share < 0.01)
