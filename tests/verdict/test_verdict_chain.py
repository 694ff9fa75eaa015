"""Levels, set-up and hold at every link, highest clock, edges and floating lines: the worst is found, and nothing passes unknown."""

from __future__ import annotations

import math
from dataclasses import replace
from pathlib import Path

import pytest

from boardsim.board.reader import Board, library_part, read_board
from boardsim.firing.pattern import Pattern, Pulse
from boardsim.firing.schedule import fire
from boardsim.parts.switches.darlington import DarlingtonArray, DarlingtonStage
from boardsim.quantities import FREQUENCY, parse
from boardsim.scenarios.chain import check_chain
from boardsim.verdict.chain import all_times, highest_clock, judge_chain
from boardsim.verdict.chain_levels import judge_floating
from boardsim.verdict.chain_loads import judge_loads
from boardsim.verdict.chain_study import chain_study, judge_lateness, worst_lateness
from boardsim.verdict.chain_times import Driven
from boardsim.verdict.findings import Finding
from boardsim.verdict.switching import judge_switching

TEXT = """\
name = "tray gates"
supply = {{ voltage = "12 V" }}
cable = {{ area = "1 mm2", length = "1 m" }}
bulk = {{ capacitance = "1000 uF", esr = "50 mohm" }}
logic = {{ voltage = "{logic}" }}

[chain]
register = {register}
count = {count}
clock = "{clock}"
{lines}

{controller}

[coils.gate]
resistance = "30 ohm"
inductance = "9 mH"

[channels."0-2"]
label = "gate {{n}}"
coil = "gate"
switch = {{ part = "n-logic-60v", gate = "100 ohm", pulldown = "10 kohm" }}
clamp = {{ kind = "diode", diode = "fast-2a" }}

[limits]
{limits}
"""
OWN = '[controller]\nhigh_drop = "0.8 V"\nlow_output = "0.6 V"\nspi_mode = {mode}\ndata_valid = "10 ns"\n{more}'
THREE = '[controller]\nvoltage = "{volts}"\nhigh_drop = "0.4 V"\nlow_output = "0.4 V"\nspi_mode = 0\n'


def board(
    folder: Path,
    register: str = '"74HC595"',
    logic: str = "5 V +/- 5 %",
    count: int = 3,
    clock: str = "4 MHz",
    controller: str | None = None,
    mode: int = 0,
    more: str = "",
    lines: str = "",
    limits: str = "",
) -> Board:
    path = folder / "board.toml"
    controller = OWN.format(mode=mode, more=more) if controller is None else controller
    path.write_text(
        TEXT.format(
            register=register, logic=logic, count=count, clock=clock, controller=controller, lines=lines, limits=limits
        ),
        encoding="utf-8",
    )
    return read_board(path)


def findings(the_board: Board) -> dict[str, Finding]:
    return {f.quantity: f for f in judge_chain(the_board)}


# ------------------------------------------------------------------------------------------------ levels


@pytest.mark.parametrize(
    ("register", "volts", "verdict"),
    [
        ("74HC595", "3.3 V +/- 3 %", "fail"),  # 2.80 V against 0.7 x 5.25 V
        ("74HCT595", "3.3 V +/- 3 %", "pass"),  # against 2.0 V
        ("74AHC595", "3.3 V", "fail"),
        ("74AHCT595", "3.3 V", "pass"),
        ("74LV595", "3.3 V", "fail"),
        ("74HC595", "5 V +/- 5 %", "pass"),
    ],
)
def test_a_3_v_controller_reaches_ttl_levels_and_not_those_of_cmos_at_5_v(
    tmp_path: Path, register: str, volts: str, verdict: str
) -> None:
    """Failure F12. V_IH of HC, AHC and LV is 0.7 of the supply, of HCT and AHCT 2.0 V (NXP 74HC595; 74HCT595, table 6)."""
    f = findings(board(tmp_path, f'"{register}"', controller=THREE.format(volts=volts)))[
        "high level from the controller"
    ]
    assert f.verdict == verdict
    assert f.consequence == "misbehave"
    if (register, verdict) == ("74HC595", "fail"):
        assert f.corner == "logic rail at 5.25 V"
        assert f.limit == pytest.approx(0.7 * 5.25)


def test_levels_are_those_of_the_lowest_controller_supply_against_the_highest_logic_rail(tmp_path: Path) -> None:
    found = findings(board(tmp_path, controller=THREE.format(volts="3.3 V +/- 3 %")))
    assert found["high level from the controller"].value == pytest.approx(3.3 * 0.97 - 0.4)
    assert found["low level from the controller"].value == pytest.approx(0.4)
    assert found["low level from the controller"].limit == pytest.approx(0.3 * 4.75)  # the lowest rail is worst for low
    assert "try: a family with TTL levels" in found["high level from the controller"].sentence


def test_a_controller_on_the_logic_rail_moves_with_it(tmp_path: Path) -> None:
    """Both ends of the rail: 4.75 V - 0.8 V against 0.7 x 4.75 V leaves less, as a share, than 5.25 V does."""
    f = findings(board(tmp_path))["high level from the controller"]
    assert (f.value, f.limit) == pytest.approx((4.75 - 0.8, 0.7 * 4.75))


def test_between_registers_levels_are_those_of_lightly_loaded_outputs(tmp_path: Path) -> None:
    """NXP table 6: 4.4 V at 4.5 V and 20 uA, that is 0.1 V below the supply."""
    f = findings(board(tmp_path, logic="4.5 V"))["high level from register to register"]
    assert (f.value, f.limit) == pytest.approx((4.4, 3.15))
    assert "high level from register to register" not in findings(board(tmp_path, count=1))


def test_without_a_controller_levels_are_missing_and_say_what_is_needed(tmp_path: Path) -> None:
    the_board = board(tmp_path, controller="")
    found = findings(the_board)
    high, low = found["high level that the inputs need"], found["low level that the inputs need"]
    assert high.verdict == low.verdict == "limit-missing"
    assert (high.value, low.value) == pytest.approx((0.7 * 5.25, 0.3 * 4.75))
    assert "[controller] high_drop" in high.sentence
    assert ("controller", "controller", "not given") in [(a.part, a.quantity, a.value) for a in the_board.assumptions]


@pytest.mark.parametrize(
    ("register", "logic", "verdict"), [("74HC595", "3.3 V", "fail"), ("74LV595", "3.3 V", "pass"), ("74HC595", "5 V", "pass")]
)  # fmt: skip
def test_a_controller_above_the_registers_supply_is_judged_by_what_their_inputs_bear(
    tmp_path: Path, register: str, logic: str, verdict: str
) -> None:
    """HC inputs have diodes to their supply and bear half a volt more; those of LV bear 5.5 V whatever their supply."""
    found = judge_chain(board(tmp_path, f'"{register}"', logic=logic, controller=THREE.format(volts="4.9 V")))
    (f,) = (f for f in found if f.check == "overvoltage")
    assert f.verdict == verdict
    assert f.consequence == "destroy"


# ------------------------------------------------------------------------------------------------ times


def test_the_cascade_follows_up_to_the_delay_of_one_register_and_the_set_up_of_the_next(tmp_path: Path) -> None:
    """At 4.5 V, NXP table 7: 40 ns + 13 ns; what the clock line adds is R C ln((V - V_IL) / (V - V_IH)), by hand."""
    the_board = board(
        tmp_path, logic="4.5 V", more='resistance = "100 ohm"', lines='clock_line = { capacitance = "10 pF" }'
    )
    (times,) = all_times(the_board) or ()
    spread = 100.0 * 3 * 20e-12 * math.log((4.5 - 1.35) / (4.5 - 3.15))
    assert highest_clock(times) == (pytest.approx(1 / (53e-9 + spread)), "set-up, register to register")
    f = findings(the_board)["clock"]
    assert f.limit == pytest.approx(1 / (53e-9 + spread))
    assert f.limit < 24e6  # of one register alone


@pytest.mark.parametrize("clock", [f"{mhz} MHz" for mhz in (1, 5, 10, 15, 18, 19, 20, 22, 30)])
def test_the_highest_clock_is_where_the_first_window_closes(tmp_path: Path, clock: str) -> None:
    the_board = board(tmp_path, clock=clock)
    found = findings(the_board)
    timing = [f for f in found.values() if f.check == "chain-timing"]
    broken = [f for f in timing if f.verdict == "fail"]
    f = found["clock"]
    assert f.limit is not None
    assert (f.verdict == "fail") == bool(broken)
    assert (f.value > f.limit) == bool(broken)


def test_one_register_alone_is_bound_by_the_controllers_link_and_its_own_clock(tmp_path: Path) -> None:
    found = findings(board(tmp_path, count=1))
    assert not [q for q in found if "register to register" in q]
    assert "register to register" not in found["clock"].sentence


def test_hold_between_registers_with_an_assumed_shortest_delay_is_never_a_fact(tmp_path: Path) -> None:
    slow = 'clock_line = { capacitance = "100 pF" }'
    f = findings(board(tmp_path, count=8, lines=slow))["hold, register to register"]
    assert f.verdict == "limit-missing"
    assert "how long data stay at least was not given" in f.sentence
    printed = findings(board(tmp_path, '"74AHC595"', count=8, lines=slow))["hold, register to register"]
    assert printed.verdict == "fail"  # 1 ns is printed


@pytest.mark.parametrize("mode", [0, 3])
def test_modes_that_change_data_half_a_period_before_have_time_on_both_sides(tmp_path: Path, mode: int) -> None:
    found = findings(board(tmp_path, mode=mode))
    assert (
        found["set-up, controller to register 1"].verdict == found["hold, controller to register 1"].verdict == "pass"
    )
    assert found["set-up, controller to register 1"].limit == pytest.approx(0.45 * 250e-9)


def test_modes_that_change_data_at_the_rising_edge_race_it(tmp_path: Path) -> None:
    unknown = findings(board(tmp_path, mode=2))["hold, controller to register 1"]
    assert unknown.verdict == "limit-missing"
    assert "data_hold" in unknown.sentence
    assert (
        findings(board(tmp_path, mode=2, more='data_hold = "1 ns"'))["hold, controller to register 1"].verdict == "fail"
    )
    assert (
        findings(board(tmp_path, mode=2, more='data_hold = "30 ns"'))["hold, controller to register 1"].verdict
        == "pass"
    )
    assert findings(board(tmp_path, mode=1))["SPI mode"].verdict == "fail"
    assert "SPI mode" not in findings(board(tmp_path, mode=2))


@pytest.mark.parametrize(
    ("logic", "known"), [("5 V", True), ("6.1 V", False), ("1.9 V", False), ("5 V +/- 25 %", False)]
)
def test_times_are_not_taken_beyond_the_printed_supplies(tmp_path: Path, logic: str, known: bool) -> None:
    found = findings(board(tmp_path, logic=logic))
    assert (found["clock"].limit is not None) == known
    if not known:
        assert found["clock"].verdict == found["set-up and hold"].verdict == "limit-missing"
        assert "are given for 2.00 V to 6.00 V" in found["clock"].sentence


def test_a_register_without_a_table_is_judged_by_its_clock_alone_and_the_rest_is_missing(tmp_path: Path) -> None:
    bare = (
        '{ outputs = 8, output_resistance = "30 ohm", propagation = "40 ns", output_edge = "9 ns", supply_low = "2 V", '
        'supply_high = "6 V", highest_clock = "20 MHz", timing_supply = "4.5 V" }'
    )
    found = findings(board(tmp_path, bare))
    assert found["clock"].verdict == "pass"
    assert found["set-up and hold"].verdict == found["logic levels"].verdict == "limit-missing"
    assert findings(board(tmp_path, bare, logic="3.3 V"))["clock"].verdict == "limit-missing"


def test_where_levels_are_not_reached_times_prove_nothing(tmp_path: Path) -> None:
    found = findings(board(tmp_path, controller=THREE.format(volts="3.3 V")))
    assert found["high level from the controller"].verdict == "fail"
    assert found["set-up and hold"].verdict == found["clock"].verdict == "unproven"


# ------------------------------------------------------------------------------------------------ lines


def test_an_edge_is_seen_between_the_two_levels_of_one_pole() -> None:
    """R C ln(V / (V - u)) up and R C ln(V / u) down, by hand for 1 kohm and 100 pF at 5 V with levels of 1.5 V and 3.5 V."""
    line = Driven(1e3, 100e-12, (5.0, 5.0), (1.5, 3.5))
    assert (line.rise.early, line.rise.late) == pytest.approx((35.667e-9, 120.397e-9), rel=1e-4)
    assert (line.fall.early, line.fall.late) == pytest.approx((35.667e-9, 120.397e-9), rel=1e-4)
    assert line.full_edge == pytest.approx(219.7e-9, rel=1e-3)  # the 2.2 R C of textbooks


def test_many_registers_on_a_weak_driver_rise_too_slowly(tmp_path: Path) -> None:
    """TI SCLS041I (from memory): 500 ns at 4.5 V. 2.2 x 2 kohm x 40 x 15 pF = 2.6 us."""
    weak = 'resistance = "2 kohm"'
    f = findings(board(tmp_path, count=40, more=weak, clock="10 kHz"))["rise time of the clock line"]
    assert f.verdict == "fail"
    assert f.value == pytest.approx(2.197 * 2e3 * 40 * 15e-12, rel=1e-3)
    assert findings(board(tmp_path, count=2, clock="10 kHz"))["rise time of the clock line"].verdict == "pass"


def floating(the_board: Board) -> dict[str, Finding]:
    return {f.quantity.split()[0]: f for f in judge_floating(the_board)}


def test_lines_that_float_need_something_that_holds_them(tmp_path: Path) -> None:
    found = floating(
        board(tmp_path, lines='latch_line = { pull_down = "10 kohm" }\nclock_line = { pull_up = "1 Mohm" }')
    )
    assert found["latch"].verdict == "pass"
    assert found["latch"].value == pytest.approx(4e-6 * 10e3)  # three inputs and the pin, 1 uA each
    assert found["clock"].verdict == "fail"  # 4 V away from the rail, 0.3 of it are allowed
    assert {f.verdict for f in floating(board(tmp_path)).values()} == {"limit-missing"}
    assert floating(board(tmp_path, more='at_reset = "low"')) == {}


@pytest.mark.parametrize(
    ("volts", "said"), [("2.5 V", "not at a logic rail of 2.50 V"), ("5 V", "(input_leakage of its logic family)")]
)
def test_what_is_missing_of_a_floating_line_is_said_at_the_rail_at_hand(tmp_path: Path, volts: str, said: str) -> None:
    register = '"74AHC595"' if volts == "2.5 V" else RECORD.format(leakage="", more="", family="")
    f = floating(board(tmp_path, register, logic=volts, lines='latch_line = { pull_down = "10 kohm" }'))["latch"]
    assert f.verdict == "limit-missing"
    assert said in f.sentence
    if volts == "2.5 V":
        assert "input levels of AHC are given for 3.00 V to 5.50 V only" in f.sentence
        assert "leak" not in f.sentence


RECORD = (
    '{{ kind = "shift-register", title = "own", outputs = 8, output_resistance = "30 ohm", propagation = "20 ns", '
    'output_edge = "10 ns", supply_low = "2 V", supply_high = "6 V"{more}, family = {{ kind = "logic-family", '
    'inputs = [{{ supply = "4.5 V", low = "1.35 V", high = "3.15 V" }}, {{ supply = "6 V", low = "1.8 V", high = "4.2 V" }}], '
    'high_drop = "0.1 V", low_output = "0.1 V", input_capacitance = "5 pF", test_load = "50 pF"{leakage}{family} }} }}'
)


# ------------------------------------------------------------------------------------------------ pull resistors


PULLED = 'clock_line = {{ {way} = "{ohms} ohm" }}\nlatch_line = {{ {way} = "10 kohm" }}'


def test_a_heavy_pull_down_takes_the_high_level_away(tmp_path: Path) -> None:
    """Ohm's law by hand: 4.75 V behind 50 ohm into 10 ohm are 4.75 x 10 / 60 = 0.79 V, and V_IH is 0.7 of the rail."""
    found = findings(board(tmp_path, lines=PULLED.format(way="pull_down", ohms=10)))
    high = found["high level from the controller"]
    assert (high.verdict, high.value) == ("fail", pytest.approx(4.75 * 10 / 60))
    assert "on the clock line, which 10.0 ohm pull down" in high.sentence
    assert "try: a larger pull resistor" in high.sentence
    assert high.assumed == ("load of the printed levels", "output resistance of the controller")
    assert found["low level from the controller"].value == pytest.approx(0.6)  # it helps the low level
    assert "set-up, controller to register 1" not in found
    assert "the controller's high level is not surely high" in found["set-up and hold"].sentence


def test_a_heavy_pull_up_takes_the_low_level_away(tmp_path: Path) -> None:
    """5.25 V over 10 ohm and 50 ohm leave 5.25 x 50 / 60 at the pin; at 4.75 V the share of V_IL is the same."""
    found = findings(board(tmp_path, lines=PULLED.format(way="pull_up", ohms=10)))
    low = found["low level from the controller"]
    assert low.verdict == "fail"
    assert low.value == pytest.approx(4.75 * 50 / 60) or low.value == pytest.approx(5.25 * 50 / 60)
    assert "the controller's low level is not surely low" in found["set-up and hold"].sentence


def test_a_light_pull_leaves_the_printed_levels(tmp_path: Path) -> None:
    found = findings(board(tmp_path, lines=PULLED.format(way="pull_down", ohms=10_000)))
    high = found["high level from the controller"]
    assert (high.value, high.assumed) == (pytest.approx(4.75 - 0.8), ())
    assert "pull" not in high.sentence.partition("try")[0]


def test_behind_a_series_resistor_a_pull_within_the_printed_load_divides_the_printed_level(tmp_path: Path) -> None:
    """3.95 V over 470 ohm and 4.7 kohm: 0.76 mA, within 4 mA; 3.95 x 4.7 / 5.17 = 3.591 V are left."""
    lines = 'clock_line = { series = "470 ohm", pull_down = "4.7 kohm" }'
    high = findings(board(tmp_path, lines=lines))["high level from the controller"]
    assert high.value == pytest.approx(3.95 * 4.7 / 5.17)
    assert high.assumed == ("load of the printed levels",)
    given = findings(board(tmp_path, lines=lines, more='level_current = "8 mA"'))["high level from the controller"]
    assert given.assumed == ()


def test_beyond_the_printed_load_the_worse_of_printed_level_and_ohms_law_counts(tmp_path: Path) -> None:
    """1 kohm takes 3.95 mA at the printed level, within 4 mA but not within 1 mA; Ohm's law would give 4.52 V, and 3.95 V are printed."""
    lines = 'clock_line = { pull_down = "1 kohm" }'
    high = findings(board(tmp_path, lines=lines, more='level_current = "1 mA"'))["high level from the controller"]
    assert high.value == pytest.approx(3.95)


def test_a_pulled_line_rises_through_the_parallel_resistance(tmp_path: Path) -> None:
    """Thevenin: 50 ohm and 450 ohm side by side are 45 ohm; 2.197 x 45 ohm x 3 x 15 pF."""
    found = findings(board(tmp_path, lines='clock_line = { pull_down = "450 ohm" }'))
    assert found["rise time of the clock line"].value == pytest.approx(2.197 * 45 * 45e-12, rel=1e-3)
    assert found["rise time of the latch line"].value == pytest.approx(2.197 * 50 * 45e-12, rel=1e-3)


def test_edges_between_a_floor_and_a_divided_high_level_follow_one_exponential() -> None:
    """t = R C ln((V_end - V_begin) / (V_end - u)), by hand for 45 ohm, 100 pF, from 0.5 V to 4.5 V, 1.5 V and 3.5 V."""
    line = Driven(45.0, 100e-12, (4.5, 4.5), (1.5, 3.5), (0.5, 0.5))
    assert line.rise.early == pytest.approx(4.5e-9 * math.log(4.0 / 3.0))
    assert line.rise.late == pytest.approx(4.5e-9 * math.log(4.0 / 1.0))
    assert line.fall.early == pytest.approx(4.5e-9 * math.log(4.0 / 3.0))
    assert line.fall.late == pytest.approx(4.5e-9 * math.log(4.0 / 1.0))
    assert Driven(45.0, 100e-12, (4.5, 4.5), (1.5, 3.5), (2.0, 2.0)).fall.late == math.inf


# ------------------------------------------------------------------------------------------------ temperature


def hot(folder: Path, ambient: str, register: str = '"74HC595"') -> Board:
    the_board = board(folder, register, more='data_hold = "10 ns"', limits='lateness = "100 us"')
    text = the_board.path.read_text(encoding="utf-8")
    the_board.path.write_text(text.replace("supply =", f'ambient = "{ambient}"\nsupply =', 1), encoding="utf-8")
    return read_board(the_board.path)


@pytest.mark.parametrize(
    ("ambient", "known"), [("-40 to 85 degC", True), ("60 to 110 degC", False), ("-50 to 20 degC", False)]
)
@pytest.mark.parametrize("register", ["74HC595", "74AHC595"])
def test_beyond_the_temperatures_of_the_printed_columns_nothing_of_the_chain_passes(
    tmp_path: Path, ambient: str, known: bool, register: str
) -> None:
    """NXP 74HC595; 74HCT595 rev. 6 (12 Dec 2011), tables 6 and 7, print what the library holds for -40 to 85 degC."""
    the_board = hot(tmp_path, ambient, f'"{register}"')
    found = [*judge_chain(the_board), *check_chain(the_board).findings]
    passed = {f.verdict for f in found} & {"pass", "tight"}
    assert bool(passed) == known
    if not known:
        assert all(
            "hold from -40 degC to 85 degC, the air is" in f.sentence
            for f in judge_chain(the_board)
            if f.verdict != "fail"
        )
    shot = fire(the_board, Pattern(Path("made here"), "one", None, (Pulse(0, 1e-3, 1e-2),)))
    fired = [f for f in judge_switching(the_board, shot) if f.label == "chain"]
    assert ({f.verdict for f in fired} & {"pass", "tight"} != set()) == known


def test_what_breaks_a_limit_stays_broken_in_hotter_air(tmp_path: Path) -> None:
    the_board = hot(tmp_path, "60 to 110 degC")
    slow = replace(the_board, chain=the_board.chain.model_copy(update={"clock": parse("40 MHz", FREQUENCY)}))
    clock = {f.quantity: f for f in judge_chain(slow)}["clock"]
    assert (clock.verdict, "hold from" in clock.sentence) == ("fail", False)


def test_a_register_of_ones_own_holds_where_it_says(tmp_path: Path) -> None:
    wide = RECORD.format(
        leakage=', input_leakage = "1 uA"',
        more=', times_hold_at = "-40 to 125 degC"',
        family=', levels_hold_at = "-40 to 125 degC"',
    )
    bare = RECORD.format(leakage=', input_leakage = "1 uA"', more="", family="")
    rails = {"highest logic rail", "lowest logic rail"}
    assert {f.verdict for f in judge_chain(hot(tmp_path, "60 to 110 degC", wide)) if f.quantity in rails} == {"pass"}
    the_board = hot(tmp_path, "60 to 110 degC", bare)
    assert {f.verdict for f in judge_chain(the_board) if f.quantity in rails} == {"limit-missing"}
    assert [(a.part, a.value) for a in the_board.assumptions if a.quantity.startswith("air in which")] == [
        ("own", "-40 degC to 85 degC"),
        ("logic family", "-40 degC to 85 degC"),
    ]


# ------------------------------------------------------------------------------------------------ lateness and study


def test_the_worst_lateness_is_two_frames_and_what_the_controller_adds(tmp_path: Path) -> None:
    """24 bits at 4 MHz and 500 ns, twice; pause 20 us, half a tick of 10 us, jitter 3 us, 44 ns of the register."""
    more = 'tick = "10 us"\njitter = "3 us"\nframe_gap = "20 us"'
    the_board = board(tmp_path, more=more)
    assert worst_lateness(the_board) == pytest.approx(2 * 6.5e-6 + 20e-6 + 5e-6 + 3e-6 + 44e-9)
    assert judge_lateness(the_board).verdict == "limit-missing"
    assert judge_lateness(board(tmp_path, more=more, limits='lateness = "30 us"')).verdict == "fail"
    assert judge_lateness(board(tmp_path, more=more, limits='lateness = "100 us"')).verdict == "pass"


@pytest.mark.parametrize("mode", [0, 2, 3])
@pytest.mark.parametrize("clock", ["4 MHz", "19 MHz", "30 MHz"])
def test_the_picture_shows_the_room_that_the_findings_have(tmp_path: Path, mode: int, clock: str) -> None:
    the_board = board(tmp_path, mode=mode, clock=clock, more='data_hold = "2 ns"')
    found = findings(the_board)
    first, on, latch = chain_study(the_board, list(found.values())).views
    for view, where in ((first, "controller to register 1"), (on, "register to register")):
        for what, spare in (("set-up", view.early), ("hold", view.late)):
            f = found[f"{what}, {where}"]
            if f.limit is not None and f.corner == found[f"set-up, {where}"].corner:
                assert spare == pytest.approx(f.limit - f.value, abs=1e-15), (what, where)
    f = found["latch after clock, controller to every register"]
    assert f.limit is not None
    assert latch.early == pytest.approx(f.limit - f.value, abs=1e-15)


# ------------------------------------------------------------------------------------------------ loads


@pytest.mark.parametrize(
    ("switch", "each"),
    [
        # By hand at 5.25 V: 28 ohm of the register before gate resistor and pull-down, or before base resistor and junction.
        ('{ part = "n-logic-60v", gate = "100 ohm", pulldown = "10 kohm" }', 5.25 / (28 + 100 + 10e3)),
        ('{ part = "n-logic-60v", gate = "100 ohm" }', 0.0),
        ('{ part = "npn-small", base = "68 ohm" }', (5.25 - 0.6) / (28 + 68)),
    ],
)
def test_an_output_gives_what_the_switch_draws(tmp_path: Path, switch: str, each: float) -> None:
    board(tmp_path)
    path = tmp_path / "board.toml"
    old = '{ part = "n-logic-60v", gate = "100 ohm", pulldown = "10 kohm" }'
    path.write_text(path.read_text(encoding="utf-8").replace(old, switch), encoding="utf-8")
    the_board = read_board(path)
    pulses = (Pulse(0, 0.01, 0.01), Pulse(1, 0.015, 0.01), Pulse(2, 0.04, 0.01))  # two of the three at once
    firing = fire(the_board, Pattern(path, "made here", None, pulses))
    pin, total = judge_loads(the_board, firing)
    assert (pin.value, total.value) == pytest.approx((each, 2 * each))
    assert (pin.limit, total.limit) == pytest.approx((35e-3, 70e-3))  # NXP table 4
    assert pin.verdict == total.verdict == ("fail" if each > 35e-3 else "pass")
    assert pin.consequence == "destroy"


def test_a_sink_array_draws_at_most_what_is_printed_of_its_input() -> None:
    array = library_part("sink-array-8")
    assert isinstance(array, DarlingtonArray)
    stage = DarlingtonStage(part=array)
    for point in array.input_current:
        assert stage.steady_input(point.voltage.typ, 0.0) >= (point.highest or point.typical).max * (1 - 1e-9)
