"""`release` on the real engine and through the command: rows, what is missing, what fails, what is not proven."""

from __future__ import annotations

import itertools
import json
import subprocess
import sys
from dataclasses import replace
from pathlib import Path
from typing import Any

import pytest

from boardsim.board.reader import Board, read_board
from boardsim.errors import InputError
from boardsim.firing.schedule import fire
from boardsim.scenarios import clamps
from boardsim.scenarios.clamps import MOST_OF_A_KIND, clamp_in_words, other_clamps
from boardsim.scenarios.release import chosen_channels, release_channel, release_pattern
from boardsim.verdict.findings import Reading, Result
from boardsim.verdict.release import TurnOff
from boardsim.verdict.studies import Release, ReleaseRow

HERE = Path(__file__).resolve().parents[2]

BOARD = """\
name = "tray gates"
supply = { voltage = "24 V", resistance = "20 mohm", current_ceiling = "5 A" }
cable = { gauge = "18 AWG", length = "1 m", spacing = "2 mm" }
bulk = { capacitance = "2200 uF", esr = "50 mohm", esl = "20 nH", rated = "35 V" }
logic = { voltage = "5 V" }
[controller]
high_drop = "0.8 V"
low_output = "0.6 V"

[chain]
register = "74HC595"
count = 1
clock = "1 MHz"
[coils.gate]
resistance = "24 ohm"
inductance = "30 mH"
core_loss = "4.8 kohm"
pull_in = "0.5 A"
release = "0.1 A"
[channels."0-2"]
label = "gate {n}"
coil = "gate"
switch = { part = "unrated", gate = "100 ohm", pulldown = "100 kohm" }
clamp = { kind = "diode", diode = "fast-2a" }
[channels."5"]
label = "shaker"
coil = "gate"
switch = { part = "unrated", gate = "100 ohm", pulldown = "100 kohm" }
clamp = { kind = "diode-zener", diode = "fast-2a", zener = "12v-5w" }
[limits]
brown_out = { voltage = "18 V", lasting = "1 ms" }
# A switch that must not be driven into breakdown.
[parts.unrated]
kind = "n-mosfet"
breakdown = "60 V"
gate_rating = "16 V"
continuous_current = "5 A"
pulse_current = "20 A"
thermal_resistance = "62 K/W"
junction_rating = "150 degC"
threshold = "1.7 V"
on_resistance = [{ value = "55 mohm", gate = "4.5 V" }, { value = "45 mohm", gate = "10 V" }]
input_capacitance = "560 pF"
output_capacitance = "95 pF"
reverse_capacitance = "35 pF"
gate_drain_charge = "3 nC"
charge_voltage = "30 V"
"""


def board(folder: Path, text: str = BOARD) -> Board:
    (folder / "board.toml").write_text(text, encoding="utf-8")
    return read_board(folder / "board.toml")


def run(folder: Path, text: str = BOARD, **options: object) -> Result:
    return release_channel(board(folder, text), folder / "kept", **options)  # type: ignore[arg-type]


def rows(result: Result) -> tuple[ReleaseRow, ...]:
    assert isinstance(result.study, Release)
    return result.study.rows


def command(folder: Path, *options: str) -> tuple[int, str, str]:
    (folder / "board.toml").write_text(BOARD, encoding="utf-8")
    done = subprocess.run(
        [sys.executable, "-m", "boardsim.cli", "release", "board.toml", *options],
        capture_output=True,
        text=True,
        cwd=folder,
        check=False,
    )
    return done.returncode, done.stdout, done.stderr


def kinds_beside(switch: Any) -> set[str]:
    """Every kind of clamp that a board file may put beside a switch, but those that are the circuit of "none" again."""
    arrays = set() if switch.kind == "darlington-array" else {k for k in clamps.kinds("clamp") if k.startswith("array")}
    return {*clamps.kinds("clamp")} - {"avalanche", "built-in"} - arrays


# ------------------------------------------------------------------------------------------------------ rows


@pytest.mark.engine
def test_every_build_of_channel_has_one_row_with_its_first_channel(tmp_path: Path) -> None:
    result = run(tmp_path)
    assert result.proven
    assert [(r.label, r.clamp, r.own) for r in rows(result)] == [
        ("gate 0", "diode: fast-2a", True),
        ("shaker", "diode-zener: fast-2a, 12v-5w", True),
    ]
    assert {f.label for f in result.findings if f.channel is not None} == {"gate 0", "shaker"}
    keys = [f.key for f in result.findings]
    assert len(keys) == len(set(keys))
    assert {a.corner.rpartition(", ")[2] for a in result.audit} == {"gate 0", "shaker"}
    slow, fast = rows(result)
    assert slow.let_go is not None
    assert fast.let_go is not None
    assert fast.let_go < slow.let_go


@pytest.mark.engine
def test_a_channel_can_be_chosen_and_is_alone(tmp_path: Path) -> None:
    result = run(tmp_path, channel=5)
    assert [r.label for r in rows(result)] == ["shaker"]
    assert {f.channel for f in result.findings} == {5, None}
    assert result.traces is not None
    assert set(result.traces.on) == {5}


@pytest.mark.engine
def test_what_is_beside_the_board_s_own_clamp_does_not_touch_its_verdict(tmp_path: Path) -> None:
    alone = run(tmp_path, channel=0)
    result = run(tmp_path, channel=0, every_clamp=True)
    own, *others = rows(result)
    assert (own.own, own.clamp, own.channel) == (True, "diode: fast-2a", 0)
    assert not any(r.own for r in others)
    assert {r.clamp.partition(":")[0] for r in others} == kinds_beside(board(tmp_path).channels[0].switch)
    assert own.clamp not in {r.clamp for r in others}
    # A switch without an avalanche rating must not break down; the sentence that says so stands in the row.
    none = next(r for r in others if r.clamp == "none")
    assert none.verdict == "fail"
    assert "has no avalanche rating" in none.why
    assert f"none: fail: {none.why}" in result.notes
    assert result.verdict == alone.verdict
    assert result.verdict in ("pass", "tight")
    assert [f.key for f in result.findings] == [f.key for f in alone.findings]
    assert len(result.audit) == len(alone.audit)


@pytest.mark.engine
def test_the_table_says_which_clamp_is_the_board_s_own_only_where_others_are_beside_it(tmp_path: Path) -> None:
    own = run(tmp_path, channel=0).study
    assert isinstance(own, Release)
    assert own.table.rows[0][0] == "diode: fast-2a"
    beside = Release((*own.rows, replace(own.rows[0], own=False, clamp="none")))
    assert beside.table.rows[0][0] == "diode: fast-2a (the board's)"
    assert all(len(row) == len(own.table.columns) for row in own.table.rows)
    json.dumps(beside.table.rows, allow_nan=False)  # plain numbers only


@pytest.mark.engine
def test_readings_take_their_worst_corner(tmp_path: Path) -> None:
    text = BOARD.replace('"24 V"', '"24 V +/- 10 %"').replace('"30 mH"', '"30 mH +/- 20 %"')
    (row,) = rows(run(tmp_path, text, channel=5))
    (nominal,) = rows(run(tmp_path, channel=5))
    assert row.peak > nominal.peak  # type: ignore[operator]
    assert row.let_go > nominal.let_go  # type: ignore[operator]
    assert row.pulls_in > nominal.pulls_in  # type: ignore[operator]
    assert row.corner.startswith("supply high")
    assert row.refire == pytest.approx((row.pulls_in or 0.0) + (row.let_go or 0.0))


# ------------------------------------------------------------------------------------------------ what is missing


@pytest.mark.engine
def test_without_a_release_current_there_is_no_time_to_let_go_and_the_report_says_why(tmp_path: Path) -> None:
    result = run(tmp_path, BOARD.replace('release = "0.1 A"\n', ""), channel=0)
    (row,) = rows(result)
    assert (row.let_go, row.refire, row.release) == (None, None, None)
    assert row.pulls_in is not None
    assert "no release current of gate was given: no time to let go and no re-fire interval" in result.notes


@pytest.mark.engine
def test_without_a_pull_in_current_there_is_no_re_fire_interval_and_the_limit_is_missing(tmp_path: Path) -> None:
    text = BOARD.replace('pull_in = "0.5 A"\n', "")
    result = run(tmp_path, text, channel=0)
    (row,) = rows(result)
    assert (row.pulls_in, row.refire) == (None, None)
    assert row.let_go is not None
    assert (result.verdict, row.verdict) == ("limit-missing", "limit-missing")
    assert "no pull-in current of gate was given to hold it against" in row.why
    assert "no pull-in current of gate was given: no re-fire interval" in result.notes
    (strict,) = rows(run(tmp_path, text, channel=0, strict=True))
    assert (strict.verdict, strict.why) == ("fail", row.why)


@pytest.mark.engine
def test_a_coil_that_never_pulls_in_has_no_re_fire_interval(tmp_path: Path) -> None:
    result = run(tmp_path, BOARD.replace('"0.5 A"', '"1.2 A"'), channel=0)  # 24 V over 24 ohm: 1 A
    (row,) = rows(result)
    assert (row.verdict, row.pulls_in, row.refire) == ("fail", None, None)
    assert any("stays below the pull-in current, 1.20 A" in note for note in result.notes)


@pytest.mark.engine
def test_how_many_may_be_on_at_once_is_not_asked_of_one_channel(tmp_path: Path) -> None:
    assert "most_on" not in BOARD
    result = run(tmp_path, channel=0)
    assert all(f.quantity != "channels on at once" for f in result.findings)
    assert result.verdict in ("pass", "tight")


@pytest.mark.engine
def test_a_channel_that_the_register_never_turns_on_has_no_readings_and_fails(tmp_path: Path) -> None:
    result = run(tmp_path, BOARD.replace('clock = "1 MHz"', 'clock = "1 MHz"\nbit_order = "lsb"'), channel=0)
    (row,) = rows(result)
    assert (row.peak, row.clamp_energy, row.let_go, row.v_switch) == (None, None, None, None)
    assert row.verdict == "unproven"
    assert "stays off although it is commanded on" in row.why
    assert result.verdict == "fail"


# --------------------------------------------------------------------------------------------------- the audit


@pytest.mark.engine
def test_a_row_whose_own_readings_do_not_settle_is_unproven(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """Two runs must agree on what only the table shows, not on findings alone."""
    true_readings, count = TurnOff.readings, itertools.count()

    def restless(self: TurnOff, label: str) -> tuple[Reading, ...]:
        found = true_readings(self, label)
        if self.peak < 30.0:  # the board's own diode, not what stands beside it
            return found
        return tuple(replace(r, value=r.value * (1 + 0.1 * next(count))) for r in found)

    monkeypatch.setattr(TurnOff, "readings", restless)
    result = run(tmp_path, channel=0, every_clamp=True)
    own, *others = rows(result)
    assert own.verdict in ("pass", "tight")
    assert result.verdict == own.verdict
    assert result.proven
    restless_rows = [r for r in others if r.peak is not None and r.peak > 30.0]
    assert len(restless_rows) >= 3
    assert {r.verdict for r in restless_rows} == {"unproven"}
    assert all("refinement" in r.why for r in restless_rows)


@pytest.mark.engine
def test_a_board_s_own_row_whose_readings_do_not_settle_makes_the_run_unproven(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    count = itertools.count()
    monkeypatch.setattr(TurnOff, "readings", lambda self, label: (Reading("any", label, 1.0 + next(count), "V"),))
    result = run(tmp_path, channel=0)
    assert (result.verdict, rows(result)[0].verdict, result.proven) == ("unproven", "unproven", False)


# --------------------------------------------------------------------------------------------------- the pattern


def test_the_pattern_settles_before_the_turn_off_and_after_it(tmp_path: Path) -> None:
    one = board(tmp_path, BOARD.replace('"30 mH"', '"30 mH +/- 20 %"').replace('"24 ohm"', '"24 ohm +/- 10 %"'))
    pattern = release_pattern(replace(one, channels=one.channels[:1]))
    first, second = pattern.pulses
    slowest = 36e-3 / 21.6
    assert min(first.width, second.width) >= 7 * slowest
    assert second.start - first.stop >= 7 * slowest
    assert (pattern.duration or 0.0) - second.stop >= 7 * slowest


def test_a_small_release_current_is_waited_for(tmp_path: Path) -> None:
    one = board(tmp_path, BOARD.replace('"0.1 A"', '"0.1 mA"'))
    pattern = release_pattern(replace(one, channels=one.channels[:1]))
    # From 1 A to 0.1 mA an exponential takes ln(10000) = 9.2 of its L/R.
    assert (pattern.duration or 0.0) - pattern.pulses[-1].stop > 9.2 * 30e-3 / 24


@pytest.mark.parametrize("share", ["10 %", "1 %"])
def test_a_slow_chain_stretches_the_pulse_until_it_may_be_late_by_a_frame(tmp_path: Path, share: str) -> None:
    text = BOARD.replace('"1 MHz"', '"2 kHz"').replace("[limits]", f'[limits]\npulse_error = "{share}"')
    one = board(tmp_path, text)
    one = replace(one, channels=one.channels[:1])
    pattern = release_pattern(one)
    firing = fire(one, pattern)
    for moved in firing.moved:
        assert moved.start - moved.pulse.start < one.limits.pulse_error.typ * moved.pulse.width
    assert len(firing.on[0]) == 2
    assert firing.on[0][-1, 1] < firing.duration


@pytest.mark.engine
def test_an_avalanche_that_is_rated_for_one_pulse_only_does_not_pass(tmp_path: Path) -> None:
    once = BOARD + 'avalanche_energy = "1 J"\navalanche_current = "5 A"\n'
    bare = once.replace('{ kind = "diode", diode = "fast-2a" }', '{ kind = "none" }')
    assert rows(run(tmp_path, bare, channel=0))[0].verdict == "limit-missing"
    assert rows(run(tmp_path, bare + 'avalanche_repetitive = "1 mJ"\n', channel=0))[0].verdict == "fail"


# ------------------------------------------------------------------------------------------------- other clamps


def offered(folder: Path, current: float) -> tuple[list[str], tuple[str, ...]]:
    one = board(folder)
    found, remarks = other_clamps(one, one.channels[0], current)
    return [clamp_in_words(clamp) for clamp in found], remarks


def test_every_kind_is_offered_but_the_clamp_that_is_there(tmp_path: Path) -> None:
    words, remarks = offered(tmp_path, 1.0)
    beside = kinds_beside(board(tmp_path).channels[0].switch)
    assert {w.partition(":")[0] for w in words} == beside
    # What no board file may put beside this switch is not offered, and said.
    refused = {*clamps.kinds("clamp")} - beside - {"avalanche", "built-in"}
    assert refused == {
        r.partition("not tried, ")[2].partition(":")[0] for r in remarks if "the switch is another part" in r
    }
    remarks = tuple(r for r in remarks if "the switch is another part" not in r)
    assert "diode: fast-2a" not in words
    assert "diode: rectifier-1a" in words
    assert {"resistor: 24.0 ohm", "resistor: 48.0 ohm"} <= set(words)
    assert "zener: SMBJ24A" in words
    assert set(remarks) == {
        "not tried, rated for less than the coil's 1.00 A: diode: 1N4148",
        "not tried, conducts at the rail of 24.0 V: active: 24v-5w, 1N4148; active: 20v-5w, 1N4148; active: 12v-5w, 1N4148; "
        "active: SMAJ12A, 1N4148; active: SMAJ15A, 1N4148",
        "not tried, conducts at the rail of 24.0 V: zener: 24v-5w; zener: 20v-5w; zener: 12v-5w; zener: SMAJ12A; zener: SMAJ15A",
    }


def test_parts_that_cannot_carry_the_current_are_left_out_and_named(tmp_path: Path) -> None:
    words, remarks = offered(tmp_path, 5.0)  # 24v-5w stands 4 A, 20v-5w 4.8 A, 12v-5w 8 A
    assert not any("24v-5w" in w for w in words)
    assert any("12v-5w" in w for w in words)
    assert (
        "not tried, rated for less than the coil's 5.00 A: diode-zener: fast-2a, 24v-5w; diode-zener: fast-2a, 20v-5w"
        in remarks
    )


def test_a_derating_counts_when_parts_are_chosen(tmp_path: Path) -> None:
    one = board(tmp_path, BOARD + '[derating]\ncurrent = "50 %"\n')
    found, _ = other_clamps(one, one.channels[0], 3.0)
    assert not any("24v-5w" in clamp_in_words(clamp) for clamp in found)


def test_a_kind_of_which_nothing_carries_the_current_is_still_seen(tmp_path: Path) -> None:
    words, _ = offered(tmp_path, 9.0)
    assert any("24v-5w" in w for w in words)


def test_of_very_many_clamps_of_a_kind_a_few_are_shown_and_the_rest_is_said(tmp_path: Path) -> None:
    """The folder of parts beside the board counts like the built-in library."""
    (tmp_path / "library").mkdir()
    more = "".join(
        f'[zener-{k}]\nkind = "zener"\nvoltage = "{10 + k} V"\ntest_current = "50 mA"\nimpedance = "3.5 ohm"\n'
        for k in range(40)
    )
    (tmp_path / "library" / "more.toml").write_text(more, encoding="utf-8")
    words, remarks = offered(tmp_path, 1.0)
    shown = [w for w in words if w.startswith("diode-zener")]
    assert len(shown) == MOST_OF_A_KIND
    assert shown[0] == "diode-zener: fast-2a, 24v-5w"
    assert shown[-1] == "diode-zener: fast-2a, zener-39"
    assert any(f"{MOST_OF_A_KIND} of 43 clamps of the kind diode-zener are shown" in r for r in remarks)


# ------------------------------------------------------------------------------------------------- the command


def test_an_unknown_channel_is_refused_with_those_that_exist(tmp_path: Path) -> None:
    with pytest.raises(InputError, match=r"channel 3 is not on the board board\.toml; it has 0-2, 5"):
        chosen_channels(board(tmp_path), 3, False)
    status, out, err = command(tmp_path, "--channel", "3", "--out", "results")
    assert (status, out) == (2, "")
    assert "it has 0-2, 5" in err
    assert "Traceback" not in err
    assert not (tmp_path / "results").exists()


@pytest.mark.engine
def test_the_command_writes_a_verdict_and_ends_with_its_status(tmp_path: Path) -> None:
    status, out, err = command(tmp_path, "--channel", "0", "--out", "results")
    assert (status, err) == (0, "")
    found = json.loads((tmp_path / "results" / "findings.json").read_text(encoding="utf-8"))
    assert (found["pattern"], found["verdict"] in ("pass", "tight")) == ("release", True)
    assert "verdict: " in out
    assert command(tmp_path, "--help")[1].count("--every-clamp") >= 2
