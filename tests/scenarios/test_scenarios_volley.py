"""How many channels at once: what counts as passing, for any choice of channels, and what the command says of it."""

from __future__ import annotations

import itertools
import json
import math
import os
import subprocess
import sys
from collections.abc import Iterable
from dataclasses import dataclass, field, replace
from pathlib import Path
from types import SimpleNamespace
from typing import NoReturn

import numpy as np
import pytest
from test_scenarios_fire import SMALL, SORTER, UNRATED

from boardsim.board.reader import Board, read_board
from boardsim.engine.run import Engine
from boardsim.errors import EngineTimeout, InputError
from boardsim.firing.pattern import Pattern, Pulse
from boardsim.scenarios import volley as question
from boardsim.scenarios import volley_closeups, volley_runs
from boardsim.scenarios.crew import Crew
from boardsim.scenarios.fire import fire_pattern
from boardsim.scenarios.volley import check_wanted, settled_width, volley
from boardsim.scenarios.volley_choices import alike, worst_choices
from boardsim.verdict.findings import Finding, Result
from boardsim.verdict.studies import Volley

# Four gates of 24 ohm on 24 V; the supply gives 2.5 A, and three gates want 2.9 A.
FOUR = SMALL.replace('"0-1"', '"0-3"').replace("two gates", "four gates").replace('"5 A"', '"2.5 A"')
WIDTH = 0.015


def board_of(folder: Path, text: str) -> Board:
    (folder / "board.toml").write_text(text, encoding="utf-8")
    return read_board(folder / "board.toml")


def asked(folder: Path, text: str, **how: object) -> tuple[Result, Volley]:
    result = volley(board_of(folder, text), folder / "kept", width=WIDTH, **how)  # type: ignore[arg-type]
    assert isinstance(result.study, Volley)
    return result, result.study


def answer(result: Result) -> Finding:
    return next(f for f in result.findings if f.check == "volley")


def command(folder: Path, *options: str, **environment: str) -> subprocess.CompletedProcess[str]:
    return subprocess.run(
        [sys.executable, "-m", "boardsim.cli", "volley", "board.toml", "--out", "out", *options],
        cwd=folder, capture_output=True, text=True, check=False, env={**os.environ, **environment},
    )  # fmt: skip


# ---------------------------------------------------------------------------------------------------- what passes


@pytest.mark.engine
def test_the_answer_is_the_largest_number_that_passes_held_against_the_firmwares(tmp_path: Path) -> None:
    result, study = asked(tmp_path, FOUR)
    assert [s.on for s in study.steps] == [1, 2, 3, 4]
    assert [s.verdict for s in study.steps[2:]] == ["fail", "fail"]
    assert (study.most, study.wanted, result.verdict) == (2, 2, "pass")
    found = answer(result)
    assert (found.value, found.limit, found.margin, found.verdict) == (2.0, 2.0, 0.0, "pass")
    assert "any 2 of the 4 channels at once pass" in found.sentence
    assert "with 3: the supply came within 1 % of its ceiling of 2.50 A" in found.sentence
    assert found.sentence.endswith(". The firmware may fire 2 at once")
    assert result.proven


@pytest.mark.engine
def test_what_the_firmware_may_do_does_not_decide_what_passes(tmp_path: Path) -> None:
    groups = '[[limits.exclusive]]\nchannels = "0-3"\nmost = 1\n'
    result, study = asked(tmp_path, FOUR.replace("most_on = 2", "most_on = 1") + groups)
    assert (study.most, study.wanted, result.verdict) == (2, 1, "pass")
    assert not [f for f in result.findings if "on at once" in f.quantity]
    assert "did not decide which number passes" in " ".join(result.notes)


@pytest.mark.engine
def test_fewer_than_are_asked_for_fails_and_more_than_that_passes(tmp_path: Path) -> None:
    result, study = asked(tmp_path, FOUR, at_least=3)
    assert (study.wanted, result.verdict) == (3, "fail")
    assert answer(result).margin == pytest.approx(-1 / 3)
    assert answer(result).sentence.endswith(". 3 at once are asked for")
    assert {"supply current"} <= {f.quantity for f in result.findings if f.verdict == "fail"}
    assert asked(tmp_path, FOUR, at_least=1)[0].verdict == "pass"


@pytest.mark.engine
def test_without_a_number_that_is_wanted_the_limit_is_missing_and_strict_breaks_it(tmp_path: Path) -> None:
    text = FOUR.replace("most_on = 2\n", "")
    result, study = asked(tmp_path, text)
    assert (study.wanted, answer(result).verdict, result.verdict) == (None, "limit-missing", "limit-missing")
    assert "was not given (--at-least, or [limits] most_on)" in answer(result).sentence
    assert asked(tmp_path, text, strict=True)[0].verdict == "fail"


@pytest.mark.engine
def test_a_limit_that_is_missing_stays_in_view_and_under_strict_nothing_passes(tmp_path: Path) -> None:
    text = FOUR.replace('pull_in = "0.5 A"\n', "")
    result, study = asked(tmp_path, text)
    assert (study.most, result.verdict) == (2, "limit-missing")
    assert "pull-in" in {f.check for f in result.findings if f.verdict == "limit-missing"}
    assert [s.pull_in for s in study.steps] == [None] * 4
    strict, study = asked(tmp_path, text, strict=True)
    assert (study.most, strict.verdict) == (0, "fail")
    assert "not even one of the 4 channels passes" in answer(strict).sentence
    assert "no pull-in current" in answer(strict).sentence


@pytest.mark.engine
def test_a_board_of_which_not_one_channel_passes_fails_whatever_is_wanted(tmp_path: Path) -> None:
    text = FOUR.replace('pull_in = "0.5 A"', 'pull_in = "2 A"').replace("most_on = 2\n", "")
    result, study = asked(tmp_path, text)
    assert (study.most, result.verdict) == (0, "fail")
    assert "not even one" in answer(result).sentence


@pytest.mark.engine
def test_the_only_channel_of_a_board_is_asked_too(tmp_path: Path) -> None:
    result, study = asked(tmp_path, SMALL.replace('"0-1"', '"0"').replace("most_on = 2", "most_on = 1"))
    assert (len(study.steps), study.most, result.verdict) == (1, 1, "pass")
    assert "the only channel passes" in answer(result).sentence


@pytest.mark.engine
@pytest.mark.parametrize(
    ("rating", "limit", "verdict", "said"),
    [
        ('avalanche_repetitive = "1 mJ"\n', 1e-3, "fail", "repetitive avalanche energy of unrated, 1.00 mJ"),
        ("", None, "limit-missing", "covers one pulse only"),
    ],
)
def test_one_turn_off_of_a_volley_stands_for_many(
    tmp_path: Path, rating: str, limit: float | None, verdict: str, said: str
) -> None:
    """By hand: 30 mH at 1 A hold 15 mJ, and the supply adds to it; a single pulse of 50 mJ is allowed."""
    text = FOUR.replace('{ kind = "diode", diode = "fast-2a" }', '{ kind = "none" }')
    result, _ = asked(tmp_path, text.replace("n-logic-60v", "unrated") + UNRATED + rating, at_least=1)
    energy = [f for f in result.findings if f.quantity == "avalanche energy"]
    assert len(energy) == 1
    assert 0.012 < energy[0].value < 0.05
    assert (energy[0].limit, energy[0].verdict, result.verdict) == (limit, verdict, verdict)
    assert said in energy[0].sentence


# A stiff hold coil draws most; a small valve pulls in only while the rail is high.
MIXED = """\
name = "bean planter"
supply = { voltage = "24 V", resistance = "1 ohm", current_ceiling = "20 A" }
cable = { area = "10 mm2", length = "0.1 m" }
bulk = { capacitance = "100 uF", esr = "50 mohm", esl = "20 nH", rated = "35 V" }
logic = { voltage = "5 V" }
[controller]
high_drop = "0.8 V"
low_output = "0.6 V"

[chain]
register = "74HC595"
count = 1
clock = "1 MHz"
[coils.heavy]
resistance = "12 ohm"
inductance = "12 mH"
pull_in = "0.8 A"
[coils.light]
resistance = "48 ohm"
inductance = "48 mH"
pull_in = "0.465 A"
[channels."0-1"]
label = "valve {n}"
coil = "light"
switch = { part = "n-logic-60v", gate = "100 ohm" }
clamp = { kind = "diode", diode = "fast-2a" }
[channels."2-3"]
label = "drum {n}"
coil = "heavy"
switch = { part = "n-logic-60v", gate = "100 ohm" }
clamp = { kind = "diode", diode = "fast-2a" }
[limits]
most_on = 2
brown_out = { voltage = "15 V", lasting = "1 ms" }
"""


@pytest.mark.engine
def test_what_passes_passes_for_any_channels_of_that_number(tmp_path: Path) -> None:
    """By hand, behind 1 ohm: two drums have 20.6 V and 1.71 A each, ample for 0.8 A; but one drum (12 ohm) with a valve
    (48 ohm) have 21.7 V, which is 0.453 A in the valve. It needs 0.465 A, and alone has 0.49 A."""
    result, study = asked(tmp_path, MIXED)
    assert (study.most, result.verdict) == (1, "fail")
    second = study.steps[1]
    assert second.channels == (2, 3)
    assert second.lowest_rail == pytest.approx(24 * 6 / 7, rel=0.01)
    assert second.coil_current == pytest.approx(24 * 9.6 / 10.6 / 48, rel=0.01)
    assert second.pull_in == 0.465
    assert "valve 0: at the end of its pulse" in answer(result).sentence


# Cold, a wide winding is the heaviest; hot, where pull-in is decided, a narrow one is.
CROSSING = """\
name = "tray gates"
ambient = "0 to 70 degC"
supply = { voltage = "24 V", resistance = "500 mohm" }
cable = { gauge = "16 AWG", length = "0.2 m" }
bulk = { capacitance = "100 uF", esr = "60 mohm", rated = "50 V" }
logic = { voltage = "5 V" }
[controller]
high_drop = "0.8 V"
low_output = "0.6 V"

[chain]
register = "74HC595"
count = 1
clock = "4 MHz"
[coils.wide]
resistance = "10 ohm +/- 45 %"
at = "20 degC"
inductance = "5 mH"
[coils.narrow]
resistance = "8 ohm"
at = "20 degC"
inductance = "5 mH"
[coils.victim]
resistance = "20 ohm"
at = "20 degC"
inductance = "5 mH"
pull_in = "0.9 A"
""" + "".join(
    f'''[channels."{channels}"]
coil = "{coil}"
switch = {{ part = "n-logic-60v", gate = "100 ohm", pulldown = "10 kohm" }}
clamp = {{ kind = "diode", diode = "fast-2a" }}
'''
    for channels, coil in (("0-1", "wide"), ("2-3", "narrow"), ("4", "victim"))
)


@pytest.mark.engine
def test_each_corner_has_the_choice_that_is_the_worst_in_it(tmp_path: Path) -> None:
    """By hand: at 70 degC copper has 1 + 50 x 0.00393 of its resistance (IEC 60028), so that a narrow coil has 9.57 ohm, a
    wide one 17.3 ohm, the victim 23.9 ohm; 50 mohm of switch each, behind 0.506 ohm. Beside two narrow coils the victim
    gets 21.3 V, 0.889 A; beside two wide ones 22.2 V, 0.927 A. It needs 0.9 A."""
    hot = 1 + 50 * 0.00393
    narrow, victim = 8 * hot + 0.05, 20 * hot + 0.05
    branches = 1 / (2 / narrow + 1 / victim)
    source = 0.5 + 2 * 0.2 * 0.017241 / 1.309 * hot  # 16 AWG has 1.309 mm2
    result, study = asked(tmp_path, CROSSING, at_least=3)
    assert (study.most, result.verdict) == (2, "fail")
    third = study.steps[2]
    # 0.5 %: on-resistance of the switch at its gate voltage, and the rest of a settling.
    assert third.coil_current == pytest.approx(24 * branches / (branches + source) / victim, rel=5e-3)
    assert third.verdict == "fail"
    found = next(f for f in result.findings if f.check == "pull-in" and f.verdict == "fail")
    assert (found.channel, found.corner) == (4, "supply low, coils hot")
    taken = next(c for c in result.closeups if c.finding == found.key)
    assert {*taken.on} == {2, 3, 4}


@pytest.mark.engine
@pytest.mark.slow
def test_no_choice_of_channels_that_is_fired_is_worse_than_what_was_found_for_any(tmp_path: Path) -> None:
    """Every choice of two and of three channels, fired with the others there but off, against the few that are tried."""
    board = board_of(tmp_path, CROSSING.replace('"5 mH"\npull', '"40 mH"\npull'))
    width = 0.002  # just above one L/R of the victim: its current is still rising
    build = {c.number: c.coil_name for c in board.channels}
    Question = tuple[str, str, str]

    def margins(findings: Iterable[Finding]) -> dict[Question, float]:
        found: dict[Question, float] = {}
        # How warm junctions get at a pattern's average power is asked of patterns only.
        asked = (f for f in findings if f.margin is not None and f.check != "warming")
        for f in (f for f in asked if f.quantity != "channels on at once"):
            key = (f.check, f.quantity, build[f.channel] if f.channel is not None else f.part)
            found[key] = min(found.get(key, math.inf), f.margin)
        return found

    with Crew() as crew:
        runs = volley_runs.Runs(board, width, tmp_path / "kept", False, crew)
        runs.weigh([1, 2, 3])
        runs.run([2, 3])
        for n in (2, 3):
            brute: list[Finding] = []
            for choice in itertools.combinations(range(5), n):
                pulses = tuple(Pulse(c, volley_runs.START, width) for c in choice)
                pattern = Pattern(board.path, "some", None, pulses)
                fired = fire_pattern(board, pattern, tmp_path / "kept", crew=crew, pictured=False)
                assert fired.proven
                brute += [f for f in fired.findings if f.channel is None or f.channel in choice]
            # What is worst on a stiff rail is so alone: a number passes only if all below it do.
            mine = margins(f for k in range(1, n + 1) for f in runs.tried[k].findings)
            theirs = margins(brute)
            assert theirs.keys() == mine.keys()
            for key, margin in theirs.items():
                assert mine[key] < margin + 0.005, (n, key)  # 0.5 % of the limit: steps of their own
            pull_in = next(m for key, m in theirs.items() if key[0] == "pull-in")
            assert pull_in == pytest.approx(
                margins(runs.tried[n].findings)["pull-in", "coil current at the end of a pulse", "victim"], abs=0.002
            )


def test_choices_are_the_heaviest_and_one_of_every_other_build_among_them() -> None:
    builds = ((0, 1, 2), (3, 4), (5,))
    weights = [[1.0], [3.0], [2.0]]
    assert worst_choices(1, builds, weights) == ((3,), (0,), (5,))
    assert worst_choices(2, builds, weights) == ((3, 4), (0, 3), (3, 5))
    assert worst_choices(3, builds, weights) == ((3, 4, 5), (0, 3, 4))
    assert worst_choices(4, builds, weights) == ((0, 3, 4, 5),)
    assert worst_choices(6, builds, weights) == ((0, 1, 2, 3, 4, 5),)


def test_where_current_and_charge_rank_builds_differently_both_rankings_are_tried() -> None:
    assert worst_choices(2, ((0, 1), (2, 3)), [[2.0, 1.0], [1.0, 2.0]]) == ((0, 1), (0, 2), (2, 3))


def test_channels_are_alike_by_their_parts_whatever_their_outputs_and_names(tmp_path: Path) -> None:
    assert alike(board_of(tmp_path, MIXED)) == ((0, 1), (2, 3))
    assert alike(read_board(SORTER / "board.toml")) == (tuple(range(24)),)


# ---------------------------------------------------------------------------------------------------- what is shown


@pytest.mark.engine
def test_channels_that_are_off_do_not_change_what_is_found(tmp_path: Path) -> None:
    """The volley leaves them out of its decks; a fired pattern has them in."""
    result, study = asked(tmp_path, FOUR)
    board = board_of(tmp_path, FOUR)
    pulses = tuple(Pulse(c, volley_runs.START, WIDTH) for c in (0, 1))
    fired = fire_pattern(board, Pattern(board.path, "two", None, pulses), tmp_path / "kept")
    assert fired.duration == result.duration
    mine = {f.key: f for f in result.findings if f.check != "volley"}
    theirs = {f.key: f for f in fired.findings if f.quantity != "channels on at once" and f.channel not in (2, 3)}
    assert mine.keys() == theirs.keys()
    for key, f in theirs.items():
        assert mine[key].verdict == f.verdict
        # 1 %: two audited runs with steps of their own; a current of microamperes on the scale of its limit.
        scale = max(abs(f.value), 0.05 * abs(f.limit or 0.0), 1e-9)
        assert abs(mine[key].value - f.value) < 0.01 * scale, key
    assert study.steps[1].who == "channels 0, 1"


@pytest.mark.engine
def test_a_number_that_is_not_proven_does_not_pass(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    run = volley_runs.run_corner

    def doubtful(board: Board, *rest: object, **more: object) -> object:
        found = run(board, *rest, **more)  # type: ignore[arg-type]
        if len(board.channels) != 2:
            return found
        entries = tuple(replace(e, passed=e.criterion != "refinement") for e in found.audit.entries)
        return replace(found, audit=replace(found.audit, entries=entries, proven=False))

    monkeypatch.setattr(volley_runs, "run_corner", doubtful)
    result, study = asked(tmp_path, FOUR)
    assert [s.verdict for s in study.steps[:2]] == [study.steps[0].verdict, "unproven"]
    assert (study.most, answer(result).verdict, result.verdict, result.proven) == (1, "unproven", "unproven", False)
    assert "with 2: nothing is shown, since the audit failed (refinement" in answer(result).sentence
    # 3 break a limit, and that is proven.
    assert asked(tmp_path, FOUR, at_least=3)[0].verdict == "fail"
    # One is all that is wanted, and that is proven.
    result, study = asked(tmp_path, FOUR, at_least=1)
    assert (study.most, result.verdict, result.proven) == (1, "pass", True)
    assert "with 2 at once the audit did not hold" in " ".join(result.notes)


@pytest.mark.engine
def test_every_number_and_corner_is_in_the_audit_and_entries_name_their_number(tmp_path: Path) -> None:
    text = FOUR.replace('"24 V"', '"24 V +/- 2 %"').replace('"2200 uF"', '"2200 uF +/- 20 %"')
    result, study = asked(tmp_path, text)
    names = [a.corner for a in result.audit]
    assert len(names) == 2
    assert all(name.endswith(" (1-4 at once)") for name in names)
    for n in range(1, 5):
        mine = [e for a in result.audit for e in a.entries if e.corner.endswith(f"; {n} at once")]
        assert {e.criterion for e in mine} == {"passivity", "density", "refinement"}
        assert len({e.corner for e in mine}) == 2
    # Supply high draws most, supply low has the lowest rail: each reading is from its own corner.
    assert study.steps[0].supply_peak == pytest.approx(24.48 / 24.1, rel=0.01)
    assert study.steps[0].lowest_rail == pytest.approx(23.52 - 0.98 * 0.06, rel=0.003)


@pytest.mark.engine
def test_a_number_whose_rail_nearly_stays_low_for_too_long_is_run_with_the_largest_bulk_as_well(tmp_path: Path) -> None:
    # Two gates pass but hold the rail within the guard band above brown-out.
    text = FOUR.replace('"2200 uF"', '"2200 uF +/- 50 %"').replace('"18 V"', '"22.5 V"')
    result, study = asked(tmp_path, text)
    assert study.steps[1].verdict == "tight"
    longest = [a.corner for a in result.audit if "bulk high" in a.corner]
    assert longest == ["supply low, coils cold, bulk high (1, 2 at once)"]


@pytest.mark.engine
def test_the_deck_is_that_of_the_first_number_that_does_not_pass(tmp_path: Path) -> None:
    result, _ = asked(tmp_path, FOUR)
    assert sum(line.startswith("Lc") for line in result.deck.splitlines()) == 3 + 1  # three coils, and the cable
    assert "deck of 3 at once" in " ".join(result.notes)


@pytest.mark.engine
def test_every_broken_or_tight_finding_has_a_close_up_of_the_run_it_is_from(tmp_path: Path) -> None:
    result, study = asked(tmp_path, FOUR, at_least=3)
    bad = [f for f in result.findings if f.verdict in ("fail", "tight")]
    assert [c.finding for c in result.closeups] == [f.key for f in bad]
    assert {"volley", "supply-ceiling"} <= {f.check for f in bad}
    for f, c in zip(bad, result.closeups, strict=True):
        if f.check == "volley":
            assert (c.panels, c.corner) == ((), "")  # a count over all runs has no waveform
            continue
        assert c.corner == f.corner
        assert {*c.on} == {*study.steps[2].channels}
        assert c.panels
        wave = c.panels[0].waves[0]
        if f.at is not None and f.shape == "value":
            k = min(int(np.searchsorted(wave.edges, f.at, side="right")) - 1, len(wave.low) - 1)
            # The waveform that is shown goes through the reading; its slices are narrow beside the coil's L/R.
            assert wave.low[k] - 0.01 * abs(f.value) <= f.value <= wave.high[k] + 0.01 * abs(f.value), f.key


@pytest.mark.engine
def test_an_answer_that_passes_has_no_close_up(tmp_path: Path) -> None:
    result, _ = asked(tmp_path, FOUR, at_least=1)
    assert "volley" not in {c.finding[0] for c in result.closeups}


@pytest.mark.engine
def test_a_close_up_whose_run_comes_to_nothing_is_drawn_without_waveforms(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    class Tired(Engine):
        def run(self, *_: object, **__: object) -> NoReturn:
            raise EngineTimeout("did not finish")

    monkeypatch.setattr(volley_closeups, "Engine", Tired)
    result, _ = asked(tmp_path, FOUR, at_least=3)
    bad = [f.key for f in result.findings if f.verdict in ("fail", "tight")]
    assert [c.finding for c in result.closeups] == bad
    assert not any(c.shows_reading for c in result.closeups)
    assert result.verdict == "fail"
    assert result.proven


# ---------------------------------------------------------------------------------------------------- which are run


@dataclass
class MadeUp:
    """Runs of which those up to `most` pass, and those in `odd` do not."""

    most: int
    odd: frozenset[int] = frozenset()
    tried: dict[int, SimpleNamespace] = field(default_factory=dict)

    def weigh(self, counts: Iterable[int]) -> None:
        self.run([1])

    def run(self, counts: Iterable[int]) -> None:
        for n in counts:
            self.tried.setdefault(n, SimpleNamespace(passes=n <= self.most and n not in self.odd))


@pytest.mark.parametrize("count", [1, 5, 24, 32])
def test_up_to_32_channels_every_number_is_run(count: int) -> None:
    runs = MadeUp(count // 2)
    assert question._find_most(runs, count, None) == count // 2  # type: ignore[arg-type]
    assert sorted(runs.tried) == list(range(1, count + 1))


@pytest.mark.parametrize("most", [0, 31, 32, 33, 39, 47, 48, 63, 77, 200, 317, 511, 512])
def test_beyond_32_channels_the_number_is_found_exactly_with_its_neighbours_run(most: int) -> None:
    runs = MadeUp(most)
    assert question._find_most(runs, 512, 100) == most  # type: ignore[arg-type]
    assert {*range(1, 33), 100, 512} <= {*runs.tried}
    assert most == 512 or {n for n in range(most - 1, most + 3) if 1 <= n <= 512} <= {*runs.tried}
    assert len(runs.tried) < 65


def test_a_number_that_fails_below_others_that_pass_ends_what_passes() -> None:
    assert question._find_most(MadeUp(24, frozenset({3})), 24, None) == 2  # type: ignore[arg-type]
    assert question._find_most(MadeUp(60, frozenset({40})), 64, None) == 39  # type: ignore[arg-type]
    # Beyond 32 it is seen where it is run, and the neighbours of the edge are.
    assert question._find_most(MadeUp(60, frozenset({59})), 64, None) == 58  # type: ignore[arg-type]


def test_a_pulse_is_as_long_as_coils_and_rail_take_to_settle(tmp_path: Path) -> None:
    """By hand, from the files' figures; 0.1 us of a time for the cable's 42 mohm of 18 AWG (IEC 60028, AWG table)."""
    cable = 2 * 1.0 * 0.017241 / 0.8231
    free = board_of(tmp_path, SMALL.replace('"5 A"', '"7 A"'))  # 2 x 24 V / 24 ohm is less than a third of 7 A
    exact = 6 * (30e-3 / 24 + 2200e-6 * (0.02 + cable + 0.05))
    assert exact <= settled_width(free) < 1.1 * exact
    limited = board_of(tmp_path, FOUR)  # 4 A asked of 2.5 A
    exact = 6 * (2 * 30e-3 / 24 + 2200e-6 * (0.02 + cable + 0.05 + 24 / 2.5))
    assert exact <= settled_width(limited) < 1.1 * exact
    toleranced = FOUR.replace('"2200 uF"', '"2200 uF +/- 20 %"').replace('"24 ohm"', '"24 ohm +/- 10 %"')
    exact = 6 * (2 * 30e-3 / 21.6 + 2640e-6 * (0.02 + cable + 0.05 + 24 / 2.5))
    assert exact <= settled_width(board_of(tmp_path, toleranced)) < 1.1 * exact
    digits = f"{settled_width(limited):.6e}".partition("e")[0]
    assert math.isclose(float(digits), round(float(digits), 1))


# ---------------------------------------------------------------------------------------------------- the command


@pytest.mark.engine
def test_the_command_answers_with_table_files_and_status(tmp_path: Path) -> None:
    (tmp_path / "board.toml").write_text(FOUR, encoding="utf-8")
    done = command(tmp_path, "--width", "15 ms")
    assert (done.returncode, done.stderr) == (0, "")
    found = json.loads((tmp_path / "out" / "findings.json").read_text(encoding="utf-8"))
    assert (found["pattern"], found["verdict"]) == ("volley", "pass")
    assert [row[0] for row in found["table"]["rows"]] == [1, 2, 3, 4]
    assert {"findings.json", "junit.xml", "board.cir"} <= {p.name for p in (tmp_path / "out").iterdir()}
    assert "any 2 of the 4 channels at once pass" in " ".join(done.stdout.split())
    done = command(tmp_path, "--width", "15 ms", "--at-least", "4")
    assert done.returncode == 1
    assert "any 2 of the 4 channels at once pass" in " ".join(done.stdout.split())


@pytest.mark.parametrize(
    ("options", "said"),
    [
        (("--width", "10"), "--width: '10' has no unit; write a time such as '10 ms'"),
        (("--width", "10 V"), "which does not measure a time"),
        (("--width", "0 s"), "--width: '0 s' is zero"),
        (("--width", "-3 ms"), "--width: '-3 ms' is negative"),
        (("--width", "10 ms +/- 1 ms"), "a commanded time has no tolerance; leave it out"),
        (("--width", ""), "--width: '' is not a number with a unit"),
        (("--width", "900000 s"), "MiB"),
        (("--at-least", "5"), "5 at once are asked for, and four gates has 4 channels; ask for 1 to 4"),
        (("--at-least", "0"), "--at-least"),
        (("--at-least", "many"), "--at-least"),
    ],
)
def test_a_wrong_call_is_refused_with_status_2(tmp_path: Path, options: tuple[str, ...], said: str) -> None:
    (tmp_path / "board.toml").write_text(FOUR, encoding="utf-8")
    done = command(tmp_path, *options)
    assert done.returncode == 2
    assert said in " ".join(done.stderr.replace("│", " ").split())
    assert "Traceback" not in done.stderr
    assert not (tmp_path / "out" / "findings.json").exists()


def test_more_channels_than_there_are_cannot_be_asked_for(tmp_path: Path) -> None:
    board = board_of(tmp_path, FOUR)
    for wanted in (0, 5, -1):
        with pytest.raises(InputError, match="ask for 1 to 4"):
            check_wanted(board, wanted)


def test_without_an_engine_the_status_is_3_and_nothing_is_left(tmp_path: Path) -> None:
    (tmp_path / "board.toml").write_text(FOUR, encoding="utf-8")
    done = command(tmp_path, NGSPICE_LIBRARY_PATH="no-such-library.so")
    assert done.returncode == 3
    assert "apt-get install ngspice libngspice0" in done.stderr
    assert "Traceback" not in done.stderr
    assert not list((tmp_path / "out").iterdir())


@pytest.mark.engine
def test_a_run_that_takes_too_long_is_unproven_not_passed(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    run = volley_runs.run_corner
    monkeypatch.setattr(
        volley_runs,
        "run_corner",
        lambda *a, **k: run(*a, **{**k, "time_limit": 1e-3}),  # type: ignore[arg-type]
    )
    result, study = asked(tmp_path, FOUR)
    assert (study.most, result.verdict, result.deck) == (0, "unproven", "")
    assert {s.lowest_rail for s in study.steps} == {None}
    assert "ngspice did not finish within" in " ".join(result.notes)


@pytest.mark.engine
@pytest.mark.slow
def test_the_fruit_sorter_passes_with_as_many_lanes_as_its_supply_feeds(tmp_path: Path) -> None:
    """By hand: 16 ohm less 10 %, at 5 degC copper has 1 - 15 x 0.00393 of that, 13.6 ohm; 25.2 V behind 0.13 ohm make
    9.1 A in five lanes and 10.8 A in six, and the supply gives 10 A."""
    result = volley(read_board(SORTER / "board.toml"), tmp_path / "kept", at_least=6)
    assert isinstance(result.study, Volley)
    assert (result.study.most, result.study.wanted, result.verdict, result.proven) == (5, 6, "fail", True)
    assert result.study.steps[4].supply_peak == pytest.approx(9.1, rel=0.01)
    assert [s.on for s in result.study.steps] == list(range(1, 25))
