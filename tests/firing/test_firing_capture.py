"""Captures of the bus: what was recorded decodes to what the outputs did, and what cannot be decoded is refused in place."""

from __future__ import annotations

import functools
import tempfile
from pathlib import Path

import numpy as np
import pytest
from bus_writer import CAPTURE, IDLE, BusWriter, frames_of
from firing_boards import board, pattern
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st
from second_reader import levels_in

from boardsim.board.reader import Board
from boardsim.errors import InputError
from boardsim.firing.pattern import Pattern
from boardsim.firing.schedule import Firing, fire
from boardsim.firing.sources import read_source

# Two registers at 1 MHz and 1 us of latch time, as the board has them; the dump steps by 1 ns.
HALF, SETTLE = 500, 1000
FRAME = 17_000
PROPAGATION = 44e-9  # of the library's 74HC595


def writer() -> BusWriter:
    return BusWriter(16, HALF, SETTLE)


@functools.cache
def needles() -> Board:
    with tempfile.TemporaryDirectory() as folder:
        return board(Path(folder))


def read(folder: Path, text: str, file: str = CAPTURE) -> Pattern:
    (folder / "bus.vcd").write_text(text, encoding="utf-8")
    (folder / "capture.toml").write_text(file, encoding="utf-8")
    return read_source(folder / "capture.toml", needles())


def firing(folder: Path, text: str, file: str = CAPTURE) -> Firing:
    found = read(folder, text, file).recorded
    assert found is not None
    return found


def said(folder: Path, text: str, file: str = CAPTURE) -> str:
    with pytest.raises(InputError) as caught:
        read(folder, text, file)
    assert caught.value.problems
    return "\n".join(f"{Path(p.file).name}:{p.line or '-'}: {p.text}" for p in caught.value.problems)


def spans(found: Firing, channel: int) -> list[tuple[float, float]]:
    return [(float(a), float(b)) for a, b in found.on[channel]]


_PULSES = st.lists(
    st.tuples(st.integers(0, 15), st.integers(0, 200), st.integers(1, 60)), min_size=1, max_size=12
)  # output, start, width in steps of 25 us: frames take 17 us


@settings(max_examples=60, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(pulses=_PULSES)
def test_the_bus_of_a_pattern_decodes_to_what_the_pattern_does(
    tmp_path: Path, pulses: list[tuple[int, int, int]]
) -> None:
    step = 25_000
    apart: dict[int, list[tuple[int, int, int]]] = {}
    for output, start, width in sorted(pulses):  # pulses of one output must not touch: a timer would join them
        if all(start > b or start + width < a for _, a, b in ((o, s, s + w) for o, s, w in apart.get(output, []))):
            apart.setdefault(output, []).append((output, start, width))
    kept = [(o, s * step, w * step) for rows in apart.values() for o, s, w in rows]
    bus = writer()
    for at, on in frames_of(kept):
        bus.frame(at, on)
    end = max(s + w for _, s, w in kept) + FRAME + 5000
    recorded = firing(tmp_path, bus.text(end))
    commanded = fire(needles(), pattern(*((o, round(s * 1e-9, 12), round(w * 1e-9, 12)) for o, s, w in kept)))
    assert recorded.frames == commanded.frames
    for channel in range(16):
        assert recorded.on[channel].shape == commanded.on[channel].shape
        # The writer's edges lie on the dump's steps of 1 ns, and so do the pattern's: nothing is left but binary fractions.
        assert np.abs(recorded.on[channel] - commanded.on[channel]).max(initial=0.0) < 1e-12
    assert recorded.recorded is not None
    assert recorded.recorded.unfinished == ()
    assert set(recorded.recorded.frames.bits.tolist()) == {16}


def independent_outputs(text: str, width: int) -> list[tuple[float, list[int]]]:
    """Outputs from the second library's reading of a dump, and a list of flip-flops: the first holds the newest bit."""
    step, signals = levels_in(text)
    events = sorted(
        (t, rank, line, int(value))
        for rank, line in enumerate(("latch", "clock", "data"))  # at one time an edge sees what was there before it
        for t, value in signals[f"probe.{line}"][1:]
    )
    now = {line: int(signals[f"probe.{line}"][0][1]) for line in ("data", "clock", "latch")}
    flops, outputs, found = [0] * width, [0] * width, []
    for t, _, line, value in events:
        if line == "clock" and value:
            flops = [now["data"], *flops[:-1]]
        if line == "latch" and value and flops != outputs:
            outputs = list(flops)
            found.append((t * step, outputs))
        now[line] = value
    return found


@settings(max_examples=40, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(frames=st.lists(st.tuples(st.integers(100, 90_000), st.lists(st.integers(0, 1), max_size=40)), max_size=8))
def test_any_run_of_bits_decodes_as_a_second_reader_and_a_row_of_flip_flops_have_it(
    tmp_path: Path, frames: list[tuple[int, list[int]]]
) -> None:
    bus, at = writer(), 100
    at = bus.frame(at, {3}) + 2 * HALF
    for pause, bits in frames:
        at = bus.raw(at + pause, bits) + 2 * HALF
    at = bus.frame(at + 100, ()) + 2 * HALF
    text = bus.text(at + 1000)
    found = firing(tmp_path, text)
    theirs = independent_outputs(text, 16)
    for output in range(16):
        levels, wanted = 0, []
        for t, outputs in theirs:
            if outputs[output] != levels:
                levels = outputs[output]
                wanted.append((t + PROPAGATION, bool(levels)))
        ours = found.levels[output]
        assert ours[0] == (0.0, False)
        assert [level for _, level in ours[1:]] == [level for _, level in wanted]
        assert [t for t, _ in ours[1:]] == pytest.approx([t for t, _ in wanted], abs=1e-12)


def test_the_pulses_of_a_capture_are_what_the_outputs_did(tmp_path: Path) -> None:
    bus = writer()
    bus.frame(1_000_000, {3})
    bus.frame(3_000_000, {3, 9})
    bus.frame(4_000_000, ())
    found = read(tmp_path, bus.text(5_000_000), 'name = "two needles"\n' + CAPTURE)
    latched = [(t + FRAME) * 1e-9 + PROPAGATION for t in (1_000_000, 3_000_000, 4_000_000)]
    assert found.name == "two needles"
    assert [(p.channel, p.start, p.width) for p in found.pulses] == [
        (3, pytest.approx(latched[0]), pytest.approx(latched[2] - latched[0])),
        (9, pytest.approx(latched[1]), pytest.approx(latched[2] - latched[1])),
    ]
    assert found.recorded is not None
    assert found.recorded.asked == found.pulses
    assert found.recorded.moved == found.recorded.merged == found.recorded.wrong == ()
    assert fire(needles(), found) is found.recorded


def test_time_begins_with_the_capture_wherever_its_clock_stood(tmp_path: Path) -> None:
    bus = writer()
    bus.frame(7_001_000_000, {3})
    bus.frame(7_003_000_000, ())
    text = bus.text(7_004_000_000).replace("#0\n", "#7000000000\n")
    ((start, stop),) = spans(firing(tmp_path, text), 3)
    assert (start, stop) == pytest.approx((1.017e-3 + PROPAGATION, 3.017e-3 + PROPAGATION))


def test_a_stretch_of_a_capture_begins_at_its_start(tmp_path: Path) -> None:
    bus = writer()
    for k in range(4):
        bus.frame(k * 10_000_000 + 1_000_000, {k})
        bus.frame(k * 10_000_000 + 3_000_000, ())
    file = 'start = "9 ms"\nstop = "0.029 s"\n' + CAPTURE
    found = firing(tmp_path, bus.text(40_000_000), file)
    assert {c for c in range(16) if len(found.on[c])} == {1, 2}
    assert spans(found, 1)[0] == pytest.approx((2.017e-3 + PROPAGATION, 4.017e-3 + PROPAGATION))
    assert found.frames == 4
    assert found.duration == pytest.approx(20e-3)
    assert found.recorded is not None
    assert found.recorded.frames.latched == pytest.approx([2.017e-3, 4.017e-3, 12.017e-3, 14.017e-3])


def test_enable_turns_outputs_off_and_on_again_and_clear_empties_the_shift_stages(tmp_path: Path) -> None:
    # NXP 74HC595; 74HCT595 rev. 6, table 3: OE high makes the outputs high-impedance whatever they hold; MR low empties the
    # shift stages and leaves the outputs alone until the next STCP.
    bus = writer()
    bus.put(500_000, "enable", 1)
    bus.frame(1_000_000, {3})
    bus.put(2_000_000, "enable", 0)
    bus.put(3_000_000, "enable", 1)
    bus.put(3_500_000, "enable", 0)
    bus.put(4_000_000, "clear", 0)
    bus.put(4_001_000, "clear", 1)
    bus.put(5_000_000, "latch", 1)
    bus.put(5_001_000, "latch", 0)
    file = CAPTURE + 'enable = "enable"\nclear = "clear"\n'
    found = firing(tmp_path, bus.text(6_000_000, lines=("data", "clock", "latch", "enable", "clear")), file)
    assert spans(found, 3) == [
        pytest.approx((2e-3 + PROPAGATION, 3e-3 + PROPAGATION)),
        pytest.approx((3.5e-3 + PROPAGATION, 5e-3 + PROPAGATION)),
    ]
    assert found.recorded is not None
    assert found.recorded.disabled.tolist() == [[0.5e-3, 2e-3], [3e-3, 3.5e-3]]
    assert found.recorded.frames.cleared.tolist() == [False, True]


def test_clock_edges_while_clear_is_low_shift_nothing(tmp_path: Path) -> None:
    bus = writer()
    bus.put(900_000, "clear", 0)
    bus.frame(1_000_000, {3})
    bus.put(1_500_000, "clear", 1)
    bus.frame(2_000_000, {5})
    bus.frame(3_000_000, ())
    file = CAPTURE + 'clear = "clear"\n'
    found = firing(tmp_path, bus.text(4_000_000, lines=("data", "clock", "latch", "clear")), file)
    assert {c for c in range(16) if len(found.on[c])} == {5}


def test_inverted_lines_are_turned_round(tmp_path: Path) -> None:
    bus = writer()
    bus.frame(1_000_000, {3})
    bus.frame(2_000_000, ())
    plain = firing(tmp_path, bus.text(4_000_000))
    turned = ("clock", "latch")
    bus.changes = [(t, line, 1 - level if line in turned else level) for t, line, level in bus.changes]
    text = bus.text(4_000_000, idle=IDLE | {"clock": 1, "latch": 1})
    inverted = firing(tmp_path, text, 'inverted = ["clock", "latch"]\n' + CAPTURE)
    assert spans(inverted, 3) == [pytest.approx(span) for span in spans(plain, 3)]


def test_latching_together_with_the_clock_takes_what_was_there_before(tmp_path: Path) -> None:
    # NXP 74HC595 rev. 6, section 6: with both clocks tied together the shift register is one pulse ahead of the storage.
    bus = writer()
    at = bus.raw(1_000_000, [0] * 16, latch=False) + 1000
    bus.put(at, "data", 1)
    for k in range(3):
        t = at + 1000 + 4000 * k
        for line in ("clock", "latch"):
            bus.put(t, line, 1)
            bus.put(t + 2000, line, 0)
        bus.put(t + 2000, "data", 0)
    bus.frame(2_000_000, ())
    first = (at + 1000 + 4000) * 1e-9 + PROPAGATION
    found = firing(tmp_path, bus.text(3_000_000))
    assert spans(found, 0) == [pytest.approx((first, first + 4e-6))]
    assert spans(found, 1)[0][0] == pytest.approx(first + 4e-6)


def test_what_is_on_where_the_capture_ends_stays_on_and_is_named(tmp_path: Path) -> None:
    bus = writer()
    bus.frame(1_000_000, {3, 4})
    found = firing(tmp_path, bus.text(2_000_000))
    assert found.recorded is not None
    assert found.recorded.unfinished == (3, 4)
    assert found.duration == pytest.approx(2e-3 + PROPAGATION)


def test_a_capture_is_looked_at_as_long_as_its_file_says(tmp_path: Path) -> None:
    own = firing(tmp_path, two_pulses().text(5_000_000))
    single = firing(tmp_path, two_pulses().text(5_000_000), 'duration = "2 s"\n' + CAPTURE)
    assert single.duration == 2.0
    assert spans(single, 3) == spans(own, 3)
    assert (own.averaged_over, own.goes_on) == ("over the capture's own 5.00 ms", True)
    assert (single.averaged_over, single.goes_on) == ("over the capture's 2.00 s", False)


def test_what_follows_on_a_capture_that_ends_with_channels_on_is_not_made_up(tmp_path: Path) -> None:
    bus = writer()
    bus.frame(1_000_000, {3, 4})
    assert "channels 3, 4 are on where the capture ends: what follows is not known" in said(
        tmp_path, bus.text(2_000_000), 'duration = "2 s"\n' + CAPTURE
    )


def test_the_last_edge_of_a_capture_counts_though_nothing_follows_it(tmp_path: Path) -> None:
    bus = writer()
    bus.frame(1_000_000, {3})
    done = bus.frame(2_000_000, ())
    bus.changes = [c for c in bus.changes if c[0] <= done]
    found = firing(tmp_path, bus.text(done))
    assert found.recorded is not None
    assert found.recorded.unfinished == ()
    assert spans(found, 3)[0][1] == pytest.approx(done * 1e-9 + PROPAGATION)


def two_pulses() -> BusWriter:
    bus = writer()
    bus.frame(1_000_000, {3})
    bus.frame(2_000_000, {3, 7})
    bus.frame(3_000_000, ())
    return bus


@pytest.mark.parametrize(
    ("file", "expected"),
    [
        (CAPTURE.replace('latch = "latch"\n', ""), 'capture.toml:2: signals: "latch" is missing'),
        (CAPTURE.replace('"latch"', '"rclk"'), 'capture.toml:5: signals.latch: "rclk" is not in bus.vcd (did you mean "clock"?); it has probe.clock, probe.data, probe.latch'),
        (CAPTURE.replace('"bus.vcd"', '"nowhere.vcd"'), "nowhere.vcd:-: cannot be read: No such file or directory"),
        (CAPTURE.replace('"bus.vcd"', '""'), "capture.toml:1: capture: names no file"),
        (CAPTURE.replace('"latch"', '" "'), "capture.toml:5: signals.latch: names no signal"),
        (CAPTURE.replace("[signals]", "[singals]"), '"singals" is not known here (did you mean "signals"?)'),
        (CAPTURE + "strobe = 3\n", 'capture.toml:6: signals.strobe: "strobe" is not known here'),
        ('start = "1.5 ms"\n' + CAPTURE, 'capture.toml:1: start: channel 3 is on then, and what is cut there would not be judged; nearest time with all off: "1017000 ns"'),
        ('stop = "2.5 ms"\n' + CAPTURE, 'capture.toml:1: stop: channels 3, 7 are on then, and what is cut there would not be judged; nearest time with all off: "3017044 ns"'),
        ('stop = "6 ms"\n' + CAPTURE, "capture.toml:1: stop: is outside the capture, which holds 0 s to 5.00000 ms"),
        ('start = "4 ms"\n' + CAPTURE, "capture.toml:2: capture: no channel is turned on in this stretch of the capture"),
        ('start = "4 ms"\nstop = "3 ms"\n' + CAPTURE, "capture.toml:2: stop: is not after the start"),
        ('start = "4 ms +/- 1 ms"\n' + CAPTURE, "capture.toml:1: start: a time of the capture has no tolerance"),
        ('duration = "4 ms"\n' + CAPTURE, "capture.toml:1: duration: 4.000 ms is shorter than the stretch that is looked at, 5.000 ms; set a stop"),
        ('sample_period = "500 ns"\n' + CAPTURE, "capture.toml:1: sample_period: the capture was sampled every 500 ns, but a clock of 1.00 MHz is high and low for 500 ns each, so that edges are missed; capture at least every 250 ns"),
        ('inverted = ["enable"]\n' + CAPTURE, 'capture.toml:1: inverted: "enable" is not among the signals'),
        ('inverted = ["clk"]\n' + CAPTURE, 'capture.toml:1: inverted.0: \'clk\' is not allowed'),
    ],
)  # fmt: skip
def test_a_capture_file_says_on_which_line_what_is_wrong(tmp_path: Path, file: str, expected: str) -> None:
    found = said(tmp_path, two_pulses().text(5_000_000), file)
    assert any(line.startswith(expected) or expected in line for line in found.splitlines()), found


def without(bus: BusWriter, line: str) -> BusWriter:
    bus.changes = [c for c in bus.changes if c[1] != line]
    return bus


def test_a_capture_that_tells_too_little_is_refused(tmp_path: Path) -> None:
    assert said(tmp_path, without(two_pulses(), "latch").text(5_000_000)).startswith(
        'capture.toml:5: signals.latch: "latch" never rises in bus.vcd: no frame reaches the outputs'
    )
    assert said(tmp_path, without(two_pulses(), "clock").text(5_000_000)).startswith(
        'capture.toml:4: signals.clock: "probe.clock" never rises in bus.vcd'
    )
    assert said(tmp_path, without(two_pulses(), "data").text(5_000_000)).startswith(
        "capture.toml:1: capture: no channel is turned on in this stretch of the capture"
    )
    early = two_pulses()
    early.put(500, "clock", 1)
    early.put(1000, "clock", 0)
    assert said(tmp_path, early.text(5_000_000, idle=IDLE | {"data": None})) == (
        'capture.toml:3: signals.data: "data" has no level yet at the clock edge of 500.000 ns; capture it from before the '
        "first clock edge on"
    )


@pytest.mark.parametrize("line", ["clock", "latch"])
def test_a_line_that_is_high_at_its_first_level_is_refused_since_it_may_have_risen_then(
    tmp_path: Path, line: str
) -> None:
    text = two_pulses().text(5_000_000, idle=IDLE | {line: None})
    at = {"clock": "1.00050 ms", "latch": "1.01700 ms"}[line]  # of the first frame: half a period on, and 17 us on
    assert f"has no level before {at}, so that nothing tells whether it rises then" in said(tmp_path, text)


def test_a_line_that_gets_its_level_before_anything_is_sent_is_taken(tmp_path: Path) -> None:
    bus = two_pulses()
    for line in ("data", "clock", "latch"):
        bus.put(200, line, 0)
    text = bus.text(5_000_000, idle={**IDLE, "data": None, "clock": None, "latch": None})
    assert len(firing(tmp_path, text).asked) == 2


def test_clear_without_a_level_at_a_clock_edge_is_refused(tmp_path: Path) -> None:
    bus = two_pulses()
    bus.put(1_005_000, "clear", 1)
    text = bus.text(5_000_000, lines=("data", "clock", "latch", "clear"), idle=IDLE | {"clear": None})
    assert '"clear" has no level yet at the clock edge of 1.00050 ms' in said(
        tmp_path, text, CAPTURE + 'clear = "clear"\n'
    )


def test_outputs_count_as_disabled_until_enable_has_a_level(tmp_path: Path) -> None:
    bus = two_pulses()
    bus.put(500_000, "enable", 0)
    text = bus.text(5_000_000, lines=("data", "clock", "latch", "enable"), idle=IDLE | {"enable": None})
    found = firing(tmp_path, text, CAPTURE + 'enable = "enable"\n').recorded
    assert found is not None
    assert found.disabled.tolist() == [[0.0, 0.5e-3]]


def test_a_dump_too_coarse_for_the_clock_is_refused(tmp_path: Path) -> None:
    bus = BusWriter(16, 1, 2)
    bus.frame(1000, {3})
    bus.frame(2000, ())
    assert said(tmp_path, bus.text(3000, timescale="1 us")).startswith(
        "capture.toml:1: capture: its times step by 1.00 us, but a clock of 1.00 MHz is high and low for 500 ns each"
    )


def test_a_capture_that_ends_within_a_frame_is_refused_unless_told_where_to_stop(tmp_path: Path) -> None:
    bus = two_pulses()
    bus.raw(4_000_000, [0] * 5, latch=False)
    text = bus.text(5_000_000)
    found = said(tmp_path, text)
    assert found.startswith(f"bus.vcd:{text.count(chr(10))}: ends within a register frame: 5 clock edges follow")
    assert 'set a stop in capture.toml, such as "4000500 ns"' in found
    assert len(firing(tmp_path, text, 'stop = "4000500 ns"\n' + CAPTURE).asked) == 2


def test_a_dump_by_itself_is_answered_with_what_to_write(tmp_path: Path) -> None:
    path = tmp_path / "bus.vcd"
    path.write_text(two_pulses().text(5_000_000))
    with pytest.raises(
        InputError, match=r'name a TOML file beside it that says which signal is which: capture = "bus\.vcd"'
    ):
        read_source(path, needles())


@pytest.mark.parametrize("every", [42, 100, 250])
def test_an_analysers_grid_moves_edges_by_less_than_its_period(tmp_path: Path, every: int) -> None:
    exact = firing(tmp_path, two_pulses().text(5_000_000))
    coarse = firing(tmp_path, two_pulses().text(5_000_016, every=every), f'sample_period = "{every} ns"\n' + CAPTURE)
    for channel in range(16):
        assert coarse.on[channel].shape == exact.on[channel].shape
        assert np.abs(coarse.on[channel] - exact.on[channel]).max(initial=0.0) < every * 1e-9
    assert coarse.recorded is not None
    assert coarse.recorded.resolution == pytest.approx(every * 1e-9)


@settings(max_examples=100, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(start=st.integers(0, 3000), length=st.integers(0, 400), put=st.text('01!"# \n$x', max_size=6))
def test_arbitrary_damage_to_a_dump_ends_in_located_problems_or_in_pulses(
    tmp_path: Path, start: int, length: int, put: str
) -> None:
    text = two_pulses().text(5_000_000)
    try:
        found = read(tmp_path, text[:start] + put + text[start + length :])
    except InputError as err:
        caught = err
    else:
        assert found.pulses
        assert all(p.width > 0 for p in found.pulses)
        return
    assert caught.problems
