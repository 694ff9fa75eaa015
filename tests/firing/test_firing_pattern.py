"""Pattern files: how trains expand, and what is refused where."""

from pathlib import Path

import pytest
from firing_boards import board
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from boardsim.errors import InputError
from boardsim.firing.pattern import Pattern, read_pattern


def read(folder: Path, text: str, name: str = "pattern.toml") -> Pattern:
    path = folder / name
    path.write_text(text, encoding="utf-8")
    return read_pattern(path, board(folder))


def said(folder: Path, text: str) -> list[str]:
    with pytest.raises(InputError) as caught:
        read(folder, text)
    assert caught.value.problems
    return [f"{p.line or '-'}: {p.text}" for p in caught.value.problems]


def test_one_entry_is_one_pulse_per_channel(tmp_path: Path) -> None:
    found = read(tmp_path, '[[pulses]]\nchannels = "3,1"\nstart = "5 ms"\nwidth = "2 ms"\n')
    assert [(p.channel, p.start, p.width) for p in found.pulses] == [(1, 0.005, 0.002), (3, 0.005, 0.002)]
    assert found.pulses[0].stop == pytest.approx(0.007)
    assert (found.name, found.duration) == ("pattern", None)


def test_repeat_starts_again_every_so_often_and_stagger_delays_in_the_order_written(tmp_path: Path) -> None:
    found = read(
        tmp_path,
        'name = "two rows"\nduration = "1 s"\n[[pulses]]\nchannels = "2-0"\nstart = "10 ms"\nwidth = "4 ms"\n'
        'repeat = 3\nevery = "100 ms"\nstagger = "5 ms"\n',
    )
    assert (found.name, found.duration) == ("two rows", 1.0)
    assert [(p.channel, pytest.approx(p.start)) for p in found.pulses] == [
        (channel, 0.010 + k * 0.1 + i * 0.005) for k in range(3) for i, channel in enumerate((2, 1, 0))
    ]


def test_pulses_of_several_entries_come_in_the_order_of_time(tmp_path: Path) -> None:
    entry = '[[pulses]]\nchannels = "{}"\nstart = "{} ms"\nwidth = "1 ms"\n'
    found = read(tmp_path, entry.format("0", 30) + entry.format("1", 10) + entry.format("2", 20))
    assert [p.channel for p in found.pulses] == [1, 2, 0]


GOOD = '[[pulses]]\nchannels = "0"\nstart = "1 ms"\nwidth = "1 ms"\n'


@pytest.mark.parametrize(
    ("text", "expected"),
    [
        (GOOD.replace('"0"', '"0-15,40"'), "2: pulses.0.channels: channel 40 is not on the board board.toml"),
        (GOOD.replace('"0"', '"14-18"'), "2: pulses.0.channels: channels 16-18 are not on the board board.toml"),
        (GOOD.replace('"0"', '"zero"'), "2: pulses.0.channels: 'zero' is not a range of numbers; write it such as '0-23'"),
        (GOOD.replace('"0"', "0"), '2: pulses.0.channels: "channels" must be text in quotes; found 0'),
        (GOOD + GOOD.replace('width = "1 ms"', 'width = "0 s"'), "8: pulses.1.width: a pulse of 0 s is none; give its on-time"),
        (GOOD.replace('width = "1 ms"', 'width = "1 ms +/- 5 %"'), "4: pulses.0.width: a commanded time has no tolerance; leave it out"),
        (GOOD + "repeat = 2\n", '5: pulses.0.repeat: needs "every", the time from one start to the next'),
        (GOOD + 'repeat = 2\nevery = "0 s"\n', '5: pulses.0.repeat: needs "every", the time from one start to the next'),
        (GOOD + 'every = "1 s"\n', '5: pulses.0.every: has no effect without "repeat"'),
        (GOOD + "repeat = 0\n", '5: pulses.0.repeat: "repeat" must be 1 or more; found 0'),
        (GOOD + 'repeat = "2"\n', "5: pulses.0.repeat: \"repeat\" must be a whole number without unit or quotes; found '2'"),
        (GOOD.replace('"1 ms"', '"1 mV"', 1), "3: pulses.0.start: '1 mV' is in 'mV', which does not measure a time; write it such as '10 ms'"),
        (GOOD.replace('"1 ms"', "1", 1), "3: pulses.0.start: 1 has no unit; write a time in quotes, such as '10 ms'"),
        (GOOD.replace('"1 ms"', '"-1 ms"', 1), "3: pulses.0.start: '-1 ms' is negative; a time must be 0 or more"),
        (GOOD.replace("width", "widht"), '1: pulses.0: "width" is missing'),
        (GOOD.replace("width", "widht"), '4: pulses.0.widht: "widht" is not known here (did you mean "width"?); known: channels, start, width, repeat, every, stagger'),
        ("[pulses]\n", '1: pulses: "pulses" must be a list in [ ]; found a table'),
        ("pulses = []\n", '1: pulses: "pulses" is empty; it needs at least 1 entry'),
        ('pulses = ["0"]\n', "1: pulses.0: \"0\" must be a table, such as { ... }; found '0'"),
        ('name = "rush"\n', '-: "pulses" is missing'),
        ('name = "a\\n.control"\n' + GOOD, "1: name: 'a\\n.control' cannot be a name"),
        ('duration = "1.5 ms"\n' + GOOD, "1: duration: 1.500 ms ends before the last pulse does, at 2.000 ms"),
        (GOOD + "repeat = 1000001\n", '5: pulses.0.repeat: "repeat" must be 1000000 or less; found 1000001'),
        (GOOD.replace('"0"', '"0-1"') + 'repeat = 600000\nevery = "3 ms"\n', "5: pulses.0.repeat: more than 1000000 pulses"),
    ],
)  # fmt: skip
def test_says_on_which_line_what_is_wrong(tmp_path: Path, text: str, expected: str) -> None:
    assert any(found.startswith(expected) for found in said(tmp_path, text)), said(tmp_path, text)


def test_the_mistakes_of_all_entries_come_together(tmp_path: Path) -> None:
    text = GOOD.replace('"0"', '"99"') + GOOD.replace('"0"', '"98"') + GOOD + "repeat = 2\n"
    assert [found.split(":")[0] for found in said(tmp_path, text)] == ["2", "6", "13"]


def test_many_entries_together_cannot_hold_more_pulses_than_one_may(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr("boardsim.firing.pattern.MOST_PULSES", 100)
    entry = GOOD + 'repeat = 25\nevery = "2 ms"\n'
    assert len(read(tmp_path, entry * 4).pulses) == 100
    assert said(tmp_path, entry * 5) == ["25: pulses.4: with this entry the pattern has more than 100 pulses"]


def test_a_pattern_may_end_exactly_with_its_last_pulse(tmp_path: Path) -> None:
    assert read(tmp_path, 'duration = "2 ms"\n' + GOOD).duration == 0.002


@pytest.mark.parametrize("name", ["a\n.control.toml", ".include x.toml", "***.toml"])
def test_a_pattern_without_a_name_takes_a_safe_form_of_its_files_name(tmp_path: Path, name: str) -> None:
    found = read(tmp_path, GOOD, name).name
    assert found.isprintable()
    assert found[0].isalnum()


@settings(max_examples=100, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(start=st.integers(0, len(GOOD)), length=st.integers(0, 12), put=st.text(max_size=5))
def test_arbitrary_damage_ends_in_located_problems_or_a_pattern(
    tmp_path: Path, start: int, length: int, put: str
) -> None:
    path = tmp_path / "pattern.toml"
    path.write_bytes((GOOD[:start] + put + GOOD[start + length :]).encode("utf-8", "surrogatepass"))
    the_board = board(tmp_path)
    try:
        found = read_pattern(path, the_board)
    except InputError as err:
        caught = err
    else:
        assert found.pulses
        return
    assert caught.problems
