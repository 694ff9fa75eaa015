"""What is read of a motion and how it is judged, on made-up courses whose every number follows from the laws of motion."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np
import pytest

from boardsim.board.reader import read_board
from boardsim.circuit.deck import PlacedRule
from boardsim.firing.pattern import Pattern, Pulse
from boardsim.firing.registers import frame_time
from boardsim.firing.schedule import fire
from boardsim.parts.rules import Limit, MotionRule
from boardsim.verdict.bench import Bench
from boardsim.verdict.findings import Finding, Floats
from boardsim.verdict.motion import judge_motion
from boardsim.verdict.strokes import Strokes, Travelled, arrival, commands

BOARD = Path(__file__).parents[2] / "netlists" / "bean-planter" / "board.toml"
TRAVEL, MASS = 3e-3, 2e-3
HIT = 0.5  # [m/s]: 0.25 mJ with 2 g
GOOD: dict[str, Any] = {  # a pulse from 10 to 20 ms that does all that it should; the next one begins at 50 ms
    "on": 10e-3,
    "off": 20e-3,
    "until": 50e-3,
    "last": False,
    "hits": ((16e-3, HIT),),
    "farthest": 3.01e-3,
    "began": 0.0,
    "ended": 3e-3,
    "left": 0.0,
    "back": 32e-3,
}
MILLIJOULE = Limit(0.4e-3, "J", None, "given", "energy of the blow")


def pulse(**other: Any) -> Travelled:
    return Travelled(**{**GOOD, **other})


def judged(check: Any, *pulses: Travelled, limit: Limit | None = None, least: float | None = None) -> list[Finding]:
    limit = limit or Limit(None, "s" if check == "stroke" else "m", None, "", "of this check")
    rule = MotionRule(check, "position", "speed", TRAVEL, MASS, limit, least)
    bench = Bench(read_board(BOARD), "supply low, coils hot", ())
    return list(judge_motion(rule, PlacedRule(rule, 3, "rod", "row 3"), pulses, bench))


def thrown(t: Floats, a: float, on: float, stop_after: float = np.inf) -> tuple[Floats, Floats]:
    """Position and speed of what a constant acceleration moves from rest, until a time after which it stands in the stop."""
    since = np.maximum(t - on, 0.0)
    x, v = a / 2 * since**2, a * since
    beyond = since > stop_after
    return np.where(beyond, TRAVEL * 1.003, x), np.where(beyond, 0.0, v)


@pytest.mark.parametrize("step", [20e-6, 100e-6, 170e-6])
@pytest.mark.parametrize("size", [2, 3, 7, 1000])
def test_a_blow_is_read_from_the_approach_whatever_the_steps_and_wherever_blocks_are_cut(
    step: float, size: int
) -> None:
    """v^2 = 2 a s and t = sqrt(2 s / a): Galilei's laws of falling bodies; the stop has taken all speed at the next point."""
    a, on = 100.0, 1e-3
    fall = np.sqrt(2 * TRAVEL / a)
    t = np.arange(0.0, 15e-3, step)
    x, v = thrown(t, a, on, fall)
    strokes = Strokes(TRAVEL, np.array([[on, 12e-3]]), 0.0, float(t[-1]))
    for k in range(0, len(t) - 1, size):
        strokes.feed(t[k : k + size + 1], x[k : k + size + 1], v[k : k + size + 1])
    (pulse,) = strokes.all()
    ((at, speed),) = pulse.hits
    # Exact but for rounding: the acceleration does not change before the stop.
    assert at - on == pytest.approx(fall, rel=1e-9)
    assert speed == pytest.approx(np.sqrt(2 * a * TRAVEL), rel=1e-9)


def test_a_mass_that_is_not_under_way_yet_is_read_from_the_line_between_two_points() -> None:
    at, speed = arrival(np.array([[0.0, 1.0], [0.0, 2.0], [0.0, 4.0]]), 1.0)
    assert (at, speed) == (0.5, 2.0)


CHECKS = ("stroke", "held-in", "impact", "second-impact", "return")


@pytest.mark.parametrize("check", CHECKS)
def test_a_channel_that_is_never_fired_is_asked_nothing(check: str) -> None:
    assert judged(check) == []


def test_without_a_latest_arrival_it_has_to_come_before_the_end_of_its_pulse() -> None:
    (found,) = judged("stroke", pulse(commanded=9e-3))
    assert (found.verdict, found.value, found.limit) == ("pass", pytest.approx(6e-3), pytest.approx(10e-3))
    (found,) = judged("stroke", pulse(), pulse(on=60e-3, off=65e-3, hits=((66e-3, 0.3),)))
    assert (found.verdict, found.value, found.limit) == ("fail", pytest.approx(6e-3), pytest.approx(5e-3))
    assert "the end of its pulse is at 5.00 ms; try: a longer pulse" in found.sentence


def test_with_a_latest_arrival_it_may_fly_on_after_its_pulse_and_chain_and_jitter_count() -> None:
    due = Limit(8e-3, "s", None, "given", "latest arrival")
    late = pulse(off=14e-3, commanded=9e-3, jitter=0.5e-3)
    (found,) = judged("stroke", late, limit=due)
    assert (found.verdict, found.value) == ("tight", pytest.approx(16e-3 - 9e-3 + 0.5e-3))
    assert "commanded at 9.000 ms" in found.sentence
    assert "of which up to 1.50 ms pass until its output is on" in found.sentence
    # 6 ms after its output it would be in time: what the chain takes is too much.
    (found,) = judged("stroke", pulse(commanded=7e-3), limit=due)
    assert (found.verdict, found.value) == ("fail", pytest.approx(9e-3))
    assert "try: a faster clock or fewer registers in the chain" in found.sentence
    (found,) = judged("stroke", pulse(commanded=9.9e-3), limit=Limit(5e-3, "s", None, "given", "latest arrival"))
    assert "try: an earlier command, a higher voltage" in found.sentence


def test_of_a_capture_nobody_knows_the_command_and_the_output_counts() -> None:
    (found,) = judged("stroke", pulse(), limit=Limit(8e-3, "s", None, "given", "latest arrival"))
    assert (found.verdict, found.value) == ("pass", pytest.approx(6e-3))
    assert "fired at 10.00 ms" in found.sentence


def test_a_pulse_that_moves_it_part_of_the_way_fails_whatever_else_arrives_and_says_how_far() -> None:
    (found,) = judged("stroke", pulse(), pulse(on=60e-3, off=63e-3, hits=(), farthest=1.5e-3))
    assert (found.verdict, found.quantity, found.value) == ("fail", "way that a pulse moves it", 1.5e-3)
    assert "gets 1.50 mm far, of 3.00 mm; try: a longer pulse" in found.sentence


def test_one_that_does_not_move_at_all_is_told_what_holds_it() -> None:
    (found,) = judged("stroke", pulse(hits=(), farthest=0.0))
    assert "gets 0 m far" in found.sentence
    assert "try: a higher voltage, a weaker spring, or a smaller gap at rest" in found.sentence


def test_a_pulse_that_finds_it_still_in_is_asked_to_hold_it_and_not_to_move_it() -> None:
    again = pulse(on=21e-3, off=30e-3, began=3e-3, hits=())
    assert judged("stroke", again) == []
    (found,) = judged("held-in", again)
    assert found.verdict == "pass"
    (found,) = judged("held-in", pulse(on=21e-3, off=30e-3, began=3e-3, hits=(), ended=1e-3))
    assert found.verdict == "fail"
    assert "was in when it began; try: more current to hold it" in found.sentence


def test_one_that_arrives_after_its_pulse_is_not_asked_to_be_held_in() -> None:
    assert judged("held-in", pulse(off=14e-3, ended=1.5e-3)) == []


def test_one_that_arrived_and_dropped_out_fails_and_nine_tenths_of_the_way_is_in_without_a_guard_band() -> None:
    assert judged("held-in", pulse(ended=0.901 * TRAVEL))[0].verdict == "pass"
    (found,) = judged("held-in", pulse(), pulse(ended=0.89 * TRAVEL))
    assert (found.verdict, found.value) == ("fail", pytest.approx(2.67e-3))


def test_both_ends_of_the_band_of_a_blow_are_judged_by_the_hardest_and_the_softest() -> None:
    soft, hard = pulse(hits=((16e-3, 0.3),)), pulse(hits=((16e-3, 0.6), (18e-3, 0.7)))
    upper, lower = judged("impact", soft, pulse(), hard, limit=MILLIJOULE, least=0.2e-3)
    assert (upper.verdict, upper.value, upper.limit) == ("fail", pytest.approx(0.49e-3), 0.4e-3)  # of 2 g at 0.7 m/s
    assert (lower.verdict, lower.value, lower.limit) == ("fail", pytest.approx(0.09e-3), 0.2e-3)  # at 0.3 m/s
    assert (upper.worse, lower.worse) == ("high", "low")
    assert "try: a shorter pulse" in upper.sentence
    assert "try: a longer pulse" in lower.sentence
    upper, lower = judged("impact", pulse(), limit=MILLIJOULE, least=0.2e-3)
    assert (upper.verdict, lower.verdict) == ("pass", "pass")


def test_a_blow_without_a_band_is_in_view_and_never_passes() -> None:
    (found,) = judged("impact", pulse(), limit=Limit(None, "J", None, "", "energy of the blow"))
    assert (found.verdict, found.value) == ("limit-missing", pytest.approx(0.25e-3))


def test_a_rebound_hits_with_its_share_of_the_first_blow() -> None:
    share = Limit(0.2, "1", None, "given", "second blow's share")
    (found,) = judged("second-impact", pulse(hits=((16e-3, 0.5), (18e-3, 0.25))), pulse(), limit=share)
    assert (found.verdict, found.value, found.at) == ("fail", pytest.approx(0.25), 18e-3)
    assert judged("second-impact", pulse(), limit=share) == []
    assert judged("second-impact", pulse(hits=((16e-3, 0.0), (18e-3, 0.25))), limit=share) == []


def test_the_pulse_that_leaves_least_of_its_pause_decides_about_the_return() -> None:
    (found,) = judged("return", pulse(), pulse(back=49e-3))
    assert (found.verdict, found.value, found.limit) == ("tight", pytest.approx(29e-3), pytest.approx(30e-3))


def test_one_that_is_still_out_when_it_is_fired_again_fails() -> None:
    (found,) = judged("return", pulse(), pulse(left=1e-3, back=None))
    assert (found.verdict, found.value) == ("fail", 1e-3)
    assert "still 1.00 mm out when it is fired again at 50.00 ms, 30.0 ms after its pulse" in found.sentence


def test_one_that_is_on_its_way_when_the_run_ends_is_not_known_to_fail_and_one_that_sticks_is() -> None:
    (found,) = judged("return", pulse(), pulse(last=True, left=1e-3, back=None))
    assert found.verdict == "unproven"
    assert "try: a longer duration of the pattern" in found.sentence
    assert judged("return", pulse(last=True, left=TRAVEL, back=None))[0].verdict == "fail"
    # Of two the one that is fired again decides, since nothing about it is open.
    first = judged("return", pulse(left=0.5e-3, back=None), pulse(last=True, left=1e-3, back=None))[0]
    assert (first.verdict, first.value) == ("fail", 0.5e-3)


def test_one_that_never_left_its_rest_is_not_asked_to_return() -> None:
    assert judged("return", pulse(hits=(), farthest=0.01 * TRAVEL)) == []


def test_a_run_that_ends_before_the_arrival_shows_a_pulse_without_one() -> None:
    t = np.arange(0.0, 4e-3, 50e-6)
    x, v = thrown(t, 100.0, 1e-3)
    strokes = Strokes(TRAVEL, np.array([[1e-3, 2e-3]]), 0.0, 5e-3)  # its window is longer than what there is
    strokes.feed(t, x, v)
    (found,) = strokes.all()
    assert found.hits == ()
    assert (found.back, found.left) == (None, pytest.approx(x[-1]))
    assert found.farthest == pytest.approx(x[-1])


def test_a_command_is_as_far_before_its_edge_as_the_chain_takes() -> None:
    board = read_board(BOARD)
    firing = fire(board, Pattern(BOARD, "two", None, (Pulse(2, 5e-3, 8e-3), Pulse(2, 60e-3, 8e-3))))
    found = commands(firing, 2)
    assert [*found] == [float(on) for on in firing.on[2][:, 0]]
    for on, asked in found.items():
        assert frame_time(board.chain) <= on - asked < frame_time(board.chain) + 1e-6  # and the register's own delay
