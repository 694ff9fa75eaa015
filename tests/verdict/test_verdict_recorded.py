"""A recorded bus against its registers: glitches, set-up and hold, bits per frame, and what the capture cannot show."""

from __future__ import annotations

import functools
import tempfile
from dataclasses import dataclass
from pathlib import Path

import pytest
from bus_writer import CAPTURE, BusWriter
from firing_boards import board

from boardsim.board.reader import Board
from boardsim.firing.schedule import Firing
from boardsim.firing.sources import read_source
from boardsim.verdict.findings import Finding
from boardsim.verdict.recorded import assumptions_of_capture, judge_recorded, timing_of, told


@dataclass(frozen=True)
class Needed:
    """NXP 74HC595; 74HCT595 rev. 6, table 7, -40 to 85 degC at 4.5 V (LG4 of the reference values): least times. [s]"""

    setup: float | None = 13e-9
    hold: float | None = 3e-9
    latch_setup: float | None = 19e-9
    clock_width: float | None = 19e-9
    latch_width: float | None = 19e-9
    clear_width: float | None = 19e-9
    alone_up_to: float = 24e6


HALF, SETTLE = 500, 1000


@functools.cache
def needles() -> Board:
    with tempfile.TemporaryDirectory() as folder:
        return board(Path(folder))


def bus() -> BusWriter:
    made = BusWriter(16, HALF, SETTLE)
    made.frame(1_000_000, {3})
    made.frame(2_000_000, {3, 8})
    made.frame(3_000_000, ())
    return made


def firing(folder: Path, made: BusWriter, file: str = CAPTURE, **how: object) -> Firing:
    (folder / "bus.vcd").write_text(made.text(5_000_000, **how))  # type: ignore[arg-type]
    (folder / "capture.toml").write_text(file)
    found = read_source(folder / "capture.toml", needles()).recorded
    assert found is not None
    return found


def judged(folder: Path, made: BusWriter, file: str = CAPTURE, needed: object = None, **how: object) -> list[Finding]:
    return judge_recorded(needles(), firing(folder, made, file, **how), needed or Needed())  # type: ignore[arg-type]


def one(found: list[Finding], quantity: str) -> Finding:
    (mine,) = [f for f in found if f.quantity == quantity]
    return mine


def moved(made: BusWriter, line: str, at: int, to: int) -> BusWriter:
    """The same bus with one change of a line at another time."""
    assert sum(c[:2] == (at, line) for c in made.changes) == 1
    made.changes = [(to if c[:2] == (at, line) else c[0], *c[1:]) for c in made.changes]
    return made


def test_a_clean_bus_keeps_every_time_and_says_the_shortest(tmp_path: Path) -> None:
    found = judged(tmp_path, bus())
    assert {f.verdict for f in found} == {"pass"}
    read = {f.quantity: f.value for f in found}
    # As the writer set them: data half a period before the clock rises and after, latch half a period and the settling later.
    assert read["set-up of the data"] == pytest.approx(500e-9)
    assert read["hold of the data"] == pytest.approx(500e-9)
    assert read["set-up of the latch"] == pytest.approx(1500e-9)
    assert read["high clock"] == read["low clock"] == pytest.approx(500e-9)
    assert read["high latch"] == pytest.approx(1000e-9)
    assert read["clock in the capture"] == pytest.approx(1e6)
    assert read["bits of a register frame"] == 16


RISE = 2_000_000 + HALF + 7 * 2 * HALF  # of the clock that shifts output 8's bit in, the eighth of the second frame
SET, FALL = RISE - HALF, RISE + HALF


@pytest.mark.parametrize(
    ("line", "change", "to", "quantity", "value", "verdict"),
    [
        ("data", SET, RISE - 20, "set-up of the data", 20e-9, "pass"),
        ("data", SET, RISE - 14, "set-up of the data", 14e-9, "tight"),
        ("data", SET, RISE - 12, "set-up of the data", 12e-9, "fail"),
        ("data", SET, RISE - 13, "set-up of the data", 13e-9, "unproven"),  # exact to 1 ns: 12 to 14 ns
        ("data", FALL, RISE + 2, "hold of the data", 2e-9, "fail"),
        ("data", FALL, RISE, "hold of the data", 0.0, "fail"),
        ("clock", FALL, RISE + 18, "high clock", 18e-9, "fail"),
        ("clock", FALL, RISE + 2 * HALF - 10, "low clock", 10e-9, "fail"),
        ("latch", 2_000_000 + 17_000, 2_000_000 + 16_000 - HALF + 18, "set-up of the latch", 18e-9, "fail"),
        ("latch", 2_000_000 + 18_000, 2_000_000 + 17_010, "high latch", 10e-9, "fail"),
    ],
)  # fmt: skip
def test_a_time_that_is_too_short_is_found_with_its_moment(
    tmp_path: Path, line: str, change: int, to: int, quantity: str, value: float, verdict: str
) -> None:
    found = one(judged(tmp_path, moved(bus(), line, change, to)), quantity)
    assert found.value == pytest.approx(value, abs=1e-12)
    assert (found.check, found.verdict, found.consequence) == ("bus-timing", verdict, "misbehave")
    assert found.at == pytest.approx(max(change, to, RISE) * 1e-9, abs=2e-6)
    assert (found.margin is not None and found.margin < 0) == (verdict == "fail")
    assert ("too short 1 of" in found.sentence) == (verdict == "fail")


def test_a_glitch_on_the_clock_is_a_narrow_pulse_and_a_bit_too_many(tmp_path: Path) -> None:
    made = bus()
    made.put(2_500_000, "clock", 1)
    made.put(2_500_008, "clock", 0)
    found = judged(tmp_path, made)
    narrow, bits = one(found, "high clock"), one(found, "bits of a register frame")
    assert (narrow.verdict, narrow.value) == ("fail", pytest.approx(8e-9))
    assert narrow.at == pytest.approx(2.500008e-3, abs=1e-9)
    assert (bits.check, bits.verdict, bits.value) == ("frame-bits", "fail", 17.0)
    assert bits.at == pytest.approx(3.017e-3)
    assert "1 of 3 register frames do not bring 16 bits, the first at 3.01700 ms with 17" in bits.sentence


def test_too_few_bits_are_found_unless_the_shift_stages_were_cleared(tmp_path: Path) -> None:
    made = BusWriter(16, HALF, SETTLE)
    made.frame(1_000_000, {3})
    made.frame(2_000_000, {3}, bits=8)
    made.frame(3_000_000, ())
    assert (one(judged(tmp_path, made), "bits of a register frame").value) == 8.0
    made.put(1_990_000, "clear", 0)
    made.put(1_995_000, "clear", 1)
    lines = ("data", "clock", "latch", "clear")
    found = judged(tmp_path, made, CAPTURE + 'clear = "clear"\n', lines=lines)
    assert one(found, "bits of a register frame").verdict == "pass"
    assert one(found, "low clear").value == pytest.approx(5e-6)


def test_latching_again_without_a_clock_is_no_frame_of_the_wrong_length(tmp_path: Path) -> None:
    made = bus()
    made.put(2_500_000, "latch", 1)
    made.put(2_501_000, "latch", 0)
    assert one(judged(tmp_path, made), "bits of a register frame").verdict == "pass"


def test_what_the_grid_of_an_analyser_cannot_show_is_unproven_and_not_passed(tmp_path: Path) -> None:
    made = BusWriter(16, HALF, SETTLE)
    made.frame(1_000_000, {3})
    made.frame(2_000_000, ())
    fine = judged(tmp_path, made, 'sample_period = "100 ns"\n' + CAPTURE, every=100)
    assert one(fine, "set-up of the data").verdict == "pass"
    rise = 1_000_000 + 12 * 2 * HALF + HALF  # of output 3's bit, after which the data goes back
    made = moved(made, "data", rise + HALF, rise + 50)
    # 50 ns of hold time, on a grid of 100 ns: it may be anything up to 200 ns, or nothing.
    found = one(judged(tmp_path, made, 'sample_period = "100 ns"\n' + CAPTURE, every=100), "hold of the data")
    assert found.value == pytest.approx(100e-9)
    assert found.verdict == "unproven"
    assert "is exact to 100 ns only and does not show it; try: a finer capture" in found.sentence


def test_a_time_that_the_register_does_not_print_is_limit_missing(tmp_path: Path) -> None:
    found = judged(tmp_path, bus(), needed=Needed(hold=None))
    hold = one(found, "hold of the data")
    assert (hold.verdict, hold.limit, hold.margin) == ("limit-missing", None, None)
    assert one(found, "set-up of the data").verdict == "pass"


def test_a_register_that_needs_no_hold_time_is_kept_where_the_capture_shows_one(tmp_path: Path) -> None:
    # TI SCLS041I, 7.6: t_h 0 ns (LG5).
    assert one(judged(tmp_path, bus(), needed=Needed(hold=0.0)), "hold of the data").verdict == "pass"


def test_a_clock_faster_than_the_register_follows_is_found_though_the_board_names_a_slower_one(tmp_path: Path) -> None:
    made = BusWriter(16, 20, SETTLE)
    made.frame(1_000_000, {3})
    made.frame(2_000_000, ())
    found = one(judged(tmp_path, made), "clock in the capture")
    assert (found.check, found.verdict, found.value) == ("chain", "fail", pytest.approx(25e6))


def test_what_is_on_at_the_end_is_unproven_and_named(tmp_path: Path) -> None:
    made = BusWriter(16, HALF, SETTLE)
    made.frame(1_000_000, {3, 4})
    found = one(judged(tmp_path, made), "channels on at its end")
    assert (found.check, found.verdict, found.channels) == ("capture", "unproven", (3, 4))
    assert found.sentence.startswith("channels 3, 4 are on where bus.vcd ends")


@pytest.mark.parametrize("held", [True, False])
def test_outputs_that_are_disabled_prove_nothing_of_channels_that_nothing_holds_off(tmp_path: Path, held: bool) -> None:
    made = bus()
    made.put(2_200_000, "enable", 1)
    made.put(2_700_000, "enable", 0)
    shot = firing(tmp_path, made, CAPTURE + 'enable = "enable"\n', lines=("data", "clock", "latch", "enable"))
    of = board(tmp_path, held=held)
    found = [f for f in judge_recorded(of, shot, Needed()) if f.check == "capture"]
    (why,) = [a.why for a in assumptions_of_capture(of, shot) if "disabled" in a.quantity]
    if held:
        assert found == []
        assert why.startswith("a resistor of its own holds each")
        return
    (one,) = found
    assert (one.verdict, one.consequence, one.channels) == ("unproven", "destroy", tuple(range(16)))
    assert "disabled from 2.20000 ms to 2.70000 ms, and nothing holds channels 0-15 off" in one.sentence
    assert one.lasting == pytest.approx(0.5e-3)
    assert "nothing holds channels 0-15, what they do is not known" in why


def test_without_a_disabled_output_floating_gates_are_no_question_of_a_capture(tmp_path: Path) -> None:
    shot = firing(tmp_path, bus())
    assert [f for f in judge_recorded(board(tmp_path, held=False), shot, Needed()) if f.check == "capture"] == []


def test_nothing_is_said_of_a_bus_that_was_not_recorded(tmp_path: Path) -> None:
    plain = firing(tmp_path, bus())
    commanded = Firing(1.0, {}, {}, (), (), (), (), 0, 0.0)
    assert judge_recorded(needles(), commanded) == []
    assert told(commanded) == assumptions_of_capture(needles(), commanded) == ()
    assert "is not judged (lost-pulse, pulse-timing, wrong-output)" in told(plain)[1]


def test_what_had_to_be_supposed_is_listed(tmp_path: Path) -> None:
    listed = {a.quantity: a.value for a in assumptions_of_capture(needles(), firing(tmp_path, bus()))}
    assert listed == {
        "outputs before the first latch edge": "off",
        "resolution": "1.00 ns",
        "enable": "always enabled",
        "clear": "never cleared",
    }


def test_the_times_of_the_registers_own_record_are_taken_at_the_lowest_logic_rail() -> None:
    class Timed:
        def timing(self, volts: float) -> Needed:
            return Needed(setup=volts)

    assert timing_of(Timed(), 4.75).setup == 4.75  # type: ignore[arg-type, union-attr]
