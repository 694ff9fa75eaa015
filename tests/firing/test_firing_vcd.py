"""Value change dumps: what the standard allows is read, what is damaged is refused at its line."""

from pathlib import Path

import numpy as np
import pytest
from bus_writer import BusWriter
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st
from second_reader import levels_in

from boardsim.errors import InputError, Problem
from boardsim.firing.vcd import Dump, read_dump

HEAD = """\
$date today, $var wire 1 x never $end
$version hand-made $end
$timescale 10 ns $end
$scope module top $end
$var wire 1 ! sck $end
$scope module spi $end
$var reg 1 " mosi [3] $end
$var wire 8 # bus [7:0] $end
$var real 64 r volts $end
$upscope $end
$scope module other $end
$var wire 1 $ mosi $end
$upscope $end
$upscope $end
$enddefinitions $end
"""
BODY = '#5\n$dumpvars\n0!\n1"\nb101 #\nx$\nr1.5 r\n$end\n#7\n1!\n#9\n0!\n0"\n#20\n'
WANTED = {"clock": "sck", "data": "spi.mosi[3]"}


def blame(word: str, text: str) -> Problem:
    return Problem("names", None, f"{word}: {text}")


def read(folder: Path, text: str, wanted: dict[str, str] = WANTED) -> Dump:
    path = folder / "bus.vcd"
    path.write_bytes(text.encode("utf-8", "surrogatepass"))
    return read_dump(path, wanted, blame)


def said(folder: Path, text: str, wanted: dict[str, str] = WANTED) -> str:
    with pytest.raises(InputError) as caught:
        read(folder, text, wanted)
    assert all(p.file.endswith("bus.vcd") or p.file == "names" for p in caught.value.problems)
    return "\n".join(f"{p.line or '-'}: {p.text}" for p in caught.value.problems)


def changes(dump: Dump, name: str) -> list[tuple[int, int]]:
    signal = dump.signals[name]
    return list(zip(signal.times.tolist(), signal.levels.tolist(), strict=True))


@pytest.mark.parametrize(
    "body",
    [
        BODY,
        # IEEE 1364-2005, 18.2.1: words are parted by white space, and lines mean nothing.
        " ".join(BODY.split()) + "\n",
        BODY.replace("\n", "\n\t  "),
        BODY.replace("\n", "\r\n"),
        BODY.replace("#7\n", "$comment trigger here $end\n#7\n"),
        # The same levels again, vectors of one bit, and times at which nothing changes.
        BODY.replace("#7\n", '#6\n0!\nb1 "\n#7\n').replace("#9\n", "#8\n1!\n#9\n"),
    ],
)  # fmt: skip
def test_levels_are_read_however_the_words_are_laid_out(tmp_path: Path, body: str) -> None:
    found = read(tmp_path, HEAD + body + "\n")
    assert changes(found, "clock") == [(5, 0), (7, 1), (9, 0)]
    assert changes(found, "data") == [(5, 1), (9, 0)]
    assert (found.unit, found.first, found.last) == (1e-8, 5, 20)


@pytest.mark.parametrize("name", ["top.spi.mosi[3]", "spi.mosi[3]", "mosi[3]"])
def test_a_signal_is_found_by_any_end_of_its_name_that_only_it_has(tmp_path: Path, name: str) -> None:
    assert changes(read(tmp_path, HEAD + BODY, {"data": name}), "data") == [(5, 1), (9, 0)]


def test_a_full_name_is_the_signal_even_where_it_ends_another(tmp_path: Path) -> None:
    text = "$timescale 1 us $end $var wire 1 a clk $end $scope module top $end $var wire 1 b clk $end $upscope $end $enddefinitions $end\n#0 0a 1b\n#3 1a\n"
    assert changes(read(tmp_path, text, {"clock": "clk"}), "clock") == [(0, 0), (3, 1)]


def test_a_level_told_twice_at_the_first_time_counts_as_told_last(tmp_path: Path) -> None:
    text = HEAD + '$dumpvars\nx!\n0"\n$end\n#5\n1"\n0!\n#7\n1!\n'
    found = read(tmp_path, text)
    assert changes(found, "data") == [(5, 1)]
    assert changes(found, "clock") == [(5, 0), (7, 1)]


@pytest.mark.parametrize(
    ("text", "expected"),
    [
        ("", "-: is empty; a value change dump is expected"),
        ("\n", "1: is cut off, or no value change dump: $enddefinitions never comes"),
        ('[chain]\nregister = "74HC595"\n', "1: is no value change dump here, or is damaged"),
        (HEAD[:60], "2: is cut off: the last line has no end"),
        (HEAD[:150], "6: is cut off: the last line has no end"),
        (HEAD[:HEAD.index("$scope module spi")], "5: is cut off, or no value change dump: $enddefinitions never comes"),
        (HEAD[: HEAD.index("mosi [3]") + 6], "7: is cut off: the last line has no end"),
        (HEAD, "15: is cut off: it holds no time at all"),
        (HEAD + "#5\n$dumpvars\n0!\n", "18: is cut off: the section of line 17 never ends"),
        (HEAD + BODY[:-2], "29: is cut off: the last line has no end"),
        (HEAD + BODY + "#1", "30: is cut off: the last line has no end"),
        (HEAD + BODY + "#30\n1", "is cut off: the last line has no end"),
        (HEAD + BODY + "#19\n", "30: time goes back from #20 to #19; the dump is damaged"),
        (HEAD.replace("$timescale 10 ns $end", ""), "15: the dump has no $timescale, so that its times mean nothing"),
        (HEAD.replace("10 ns", "3 ns"), "3: a timescale is 1, 10 or 100 of a unit; found 3"),
        (HEAD.replace("10 ns", "10 fortnights"), "3: is no value change dump here, or is damaged: Invalid $timescale unit"),
        (HEAD + BODY + "#30\n1%\n", '31: "%" is no signal that the dump declares; this line is damaged'),
        (HEAD + BODY + "#30\nhello\n", '31: "ello" is no signal that the dump declares; this line is damaged'),
        (HEAD + BODY + "#30\nx!\n", "31: clock is 'x' here; a line of the bus is 0 or 1 from its first level on"),
        (HEAD + BODY + "#30\nr1.5 !\n", "31: clock is 1.5 here; a line of the bus is 0 or 1"),
        (HEAD + BODY + '#30\nsHIGH "\n', "31: data is HIGH here; a line of the bus is 0 or 1"),
        (HEAD + BODY + "$dumpoff\nx!\n$end\n", "31: clock is 'x' here"),
        (HEAD + BODY + "#30\n1!\n0!\n", "32: clock changes twice at #30; the dump's timescale is too coarse for this signal"),
        (HEAD + BODY + "$end\n", "30: $end closes nothing here"),
        (HEAD + BODY + "$dumpall\n$dumpall\n", "31: begins a section within the one of line 30"),
        (HEAD + BODY + "$var wire 1 q late $end\n", "30: declares something after $enddefinitions"),
        (HEAD + BODY + f"#{'9' * 30}\n", "30: #9"),
        (HEAD + BODY + f"#{'9' * 5000}\n", "is no value change dump after this line"),
        ("#5\n" + HEAD, "1: a time stands before $enddefinitions"),
        ("1!\n" + HEAD, "1: a value stands before $enddefinitions"),
        ("$upscope $end\n" + HEAD, "1: $upscope leaves a scope that was never entered"),
        (HEAD.replace("today", "heute, M\xe4rz") + BODY, "1: is no value change dump"),
    ],
)  # fmt: skip
def test_a_broken_dump_is_refused_with_its_line(tmp_path: Path, text: str, expected: str) -> None:
    assert expected in said(tmp_path, text), said(tmp_path, text)


@pytest.mark.parametrize(
    ("wanted", "expected"),
    [
        ({"latch": "rclk"}, '-: latch: "rclk" is not in bus.vcd; it has top.other.mosi, top.sck, top.spi.bus[7:0], top.spi.mosi[3], top.spi.volts'),
        ({"clock": "sckl"}, '-: clock: "sckl" is not in bus.vcd (did you mean "sck"?)'),
        ({"data": "i.mosi[3]"}, '-: data: "i.mosi[3]" is not in bus.vcd'),
        ({"data": "bus[7:0]"}, '-: data: "top.spi.bus[7:0]" is 8 bits wide; one line of the bus is needed'),
        ({"data": "volts"}, '-: data: "top.spi.volts" is 64 bits wide'),
        ({"data": "sck", "latch": "top.sck"}, '-: latch: "top.sck" is the data too; they are different pins'),
    ],
)  # fmt: skip
def test_a_signal_that_is_not_one_line_of_the_dump_is_refused(
    tmp_path: Path, wanted: dict[str, str], expected: str
) -> None:
    assert said(tmp_path, HEAD + BODY, wanted).startswith(expected)


def test_a_name_that_two_signals_end_with_is_refused_with_both(tmp_path: Path) -> None:
    text = HEAD.replace("mosi [3]", "mosi") + BODY
    assert (
        said(tmp_path, text, {"data": "mosi"})
        == '-: data: "mosi" could be any of top.other.mosi, top.spi.mosi in bus.vcd; write more of the name'
    )


def test_a_file_that_is_not_there_is_refused(tmp_path: Path) -> None:
    with pytest.raises(InputError, match="cannot be read: No such file"):
        read_dump(tmp_path / "none.vcd", WANTED, blame)
    with pytest.raises(InputError, match="cannot be read: Is a directory"):
        read_dump(tmp_path, WANTED, blame)


@settings(max_examples=40, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(
    frames=st.lists(st.tuples(st.integers(1, 400), st.sets(st.integers(0, 7))), min_size=1, max_size=6),
    timescale=st.sampled_from(["1 ns", "10 ps", "1 us"]),
)
def test_a_second_library_reads_the_same_levels(
    tmp_path: Path, frames: list[tuple[int, set[int]]], timescale: str
) -> None:
    writer, at = BusWriter(8, 3, 5), 10
    for pause, on in frames:
        at = writer.frame(at + pause, on) + 10
    text = writer.text(at + 100, timescale=timescale)
    found = read(tmp_path, text, {"data": "data", "clock": "clock", "latch": "latch"})
    step, theirs = levels_in(text)
    assert found.unit == pytest.approx(step, rel=1e-12)
    for line in ("data", "clock", "latch"):
        assert changes(found, line) == [(t, int(value)) for t, value in theirs[f"probe.{line}"]]


@settings(max_examples=300, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(start=st.integers(0, len(HEAD + BODY)), length=st.integers(0, 30), put=st.text(max_size=5))
def test_arbitrary_damage_ends_in_located_problems_or_in_rising_times(
    tmp_path: Path, start: int, length: int, put: str
) -> None:
    text = HEAD + BODY
    try:
        found = read(tmp_path, text[:start] + put + text[start + length :])
    except InputError as err:
        caught = err
    else:
        for signal in found.signals.values():
            assert (np.diff(signal.times) > 0).all()
            assert (np.diff(signal.levels) != 0).all()
        return
    assert caught.problems


@pytest.mark.parametrize("cut", range(1, len(HEAD + BODY), 3))
def test_a_file_cut_off_within_a_line_is_refused_wherever_that_is(tmp_path: Path, cut: int) -> None:
    text = (HEAD + BODY)[:cut].rstrip("\n")
    assert ": is cut off: the last line has no end" in said(tmp_path, text)
