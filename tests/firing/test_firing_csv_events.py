"""Lists of events: columns, units, labels, and where each mistake is told."""

from pathlib import Path

import pytest
from firing_boards import board
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from boardsim.errors import InputError
from boardsim.firing.pattern import Pattern
from boardsim.firing.schedule import fire
from boardsim.firing.sources import read_source


def read(folder: Path, text: str, columns: str = "") -> Pattern:
    path = folder / "events.csv"
    path.write_text(text, encoding="utf-8")
    return read_source(path, board(folder, columns=columns))


def said(folder: Path, text: str) -> list[str]:
    with pytest.raises(InputError) as caught:
        read(folder, text)
    assert all(p.file.endswith("events.csv") for p in caught.value.problems)
    return [f"{p.line or '-'}: {p.text}" for p in caught.value.problems]


def rows(found: Pattern) -> list[tuple[int, float, float]]:
    return [(p.channel, p.start, p.width) for p in found.pulses]


EXPECTED = [(1, 0.005, 0.002), (3, 0.005, 0.002), (0, 0.0125, 0.0005)]


@pytest.mark.parametrize(
    "text",
    [
        "channel,start,width\n3,5 ms,2 ms\n1,5 ms,2 ms\n0,12.5 ms,500 us\n",
        "channel, start [ms], width [us]\n3, 5, 2000\n1, 5, 2e3\n0, 12.5, 500\n",
        "width (ms);channel;start (s)\n2;3;.005\n2;1;0.005\n0.5;0;0.0125\n",
        "Channel\tStart [ms]\tStop [ms]\n3\t5\t7\n1\t5\t7\n0\t12.5\t13\n",
        "# a table of the firmware's\n\nchannel,start,width\r\n3,5 ms,2 ms\r\n# the second row\r\n1,5 ms,2 ms\r\n\r\n0,12.5 ms,500 us",
        '\ufeffchannel,start,width\n"3","5 ms","2 ms"\nchannel 1,5 ms,2 ms\n0,12.5 ms,500 us\n',
    ],
)
def test_the_same_pulses_come_out_of_every_form_of_the_list(tmp_path: Path, text: str) -> None:
    assert rows(read(tmp_path, text)) == EXPECTED


def test_a_label_stands_for_its_channel_and_a_number_is_always_the_channels_own(tmp_path: Path) -> None:
    columns = 'label = "needle {n}"\nnumbers = "15-0"'
    assert rows(read(tmp_path, "channel,start,width\nneedle 15,0 s,1 ms\n15,0 s,1 ms\n", columns)) == [
        (0, 0.0, 0.001),
        (15, 0.0, 0.001),
    ]


def test_a_list_takes_its_name_from_its_file_and_looks_until_the_coils_are_at_rest(tmp_path: Path) -> None:
    found = read(tmp_path, "channel,start,width\n3,5 ms,2 ms\n")
    assert (found.name, found.duration, found.recorded) == ("events", None, None)


REVERSED, OWN = (f'label = "1{{n}}"\nnumbers = "{n}"' for n in ("5-0", "0-5"))  # channels 10 to 15


def read_ten(folder: Path, text: str, columns: str) -> Pattern:
    (folder / "events.csv").write_text(text, encoding="utf-8")
    return read_source(folder / "events.csv", board(folder, channels="10-15", columns=columns))


def test_a_number_that_is_another_channels_label_is_refused_with_both_meanings(tmp_path: Path) -> None:
    with pytest.raises(InputError) as caught:
        read_ten(tmp_path, "channel,start,width\n13,0 s,1 ms\n", REVERSED)
    meanings = 'channel 13, labelled "12", or channel 12, labelled "13"'
    way_out = 'name the column "number" or "label" in place of "channel"'
    assert f"events.csv:2: channel '13' may be {meanings}; {way_out}" in str(caught.value)


@pytest.mark.parametrize(("title", "channel"), [("number", 13), ("label", 12)])
def test_a_column_of_numbers_or_of_labels_says_which_channel_is_meant(tmp_path: Path, title: str, channel: int) -> None:
    assert rows(read_ten(tmp_path, f"{title},start,width\n13,0 s,1 ms\n", REVERSED)) == [(channel, 0.0, 0.001)]
    assert said(tmp_path, f"{title},start,width\nfour,0 s,1 ms\n") == [
        f"2: {title} 'four' is not on the board board.toml; write its {title}"
    ]
    assert said(tmp_path, f"channel,{title},start,width\n3,3,0 s,1 ms\n") == [
        f'1: columns "channel" and "{title}" both name channels; leave one out'
    ]


def test_labels_that_are_the_channels_own_numbers_leave_nothing_open(tmp_path: Path) -> None:
    assert rows(read_ten(tmp_path, "channel,start,width\n13,0 s,1 ms\n", OWN)) == [(13, 0.0, 0.001)]


def named(folder: Path, file: str, text: str = "channel,start,width\n3,5 ms,2 ms\n") -> Pattern:
    (folder / "events.csv").write_text(text, encoding="utf-8")
    (folder / "shot.toml").write_text(file, encoding="utf-8")
    return read_source(folder / "shot.toml", board(folder))


def test_a_list_that_a_file_names_is_looked_at_as_long_as_it_says(tmp_path: Path) -> None:
    the_board = board(tmp_path)
    single = fire(the_board, named(tmp_path, 'events = "events.csv"\nduration = "10 s"\n'))
    assert single.duration == 10.0
    assert (single.averaged_over, single.goes_on) == ("over the list's 10.0 s", False)
    bare = fire(the_board, named(tmp_path, 'events = "events.csv"\nname = "one shot"\n'))
    # The last turn-off is in: 7 ms, the frame, and five times 9 mH / 30 ohm.
    assert bare.duration == pytest.approx(7e-3 + 17e-6 + 44e-9 + 5 * 9e-3 / 30, abs=2e-6)
    assert (bare.averaged_over, bare.goes_on) == ("over the list's own 8.52 ms", True)
    assert fire(the_board, read(tmp_path, "channel,start,width\n3,5 ms,2 ms\n")).goes_on
    assert named(tmp_path, 'events = "events.csv"\nname = "one shot"\n').name == "one shot"


@pytest.mark.parametrize(
    ("file", "expected"),
    [
        ('events = " "\n', "shot.toml:1: events: names no file"),
        ('events = "none.csv"\n', "none.csv: cannot be read"),
        ('events = "events.csv"\nduration = "6 ms"\n', "shot.toml:2: duration: 6.000 ms ends before the last pulse does, at 7.000 ms"),
        ('events = "events.csv"\nduration = "1 s +/- 5 %"\n', "shot.toml:2: duration: a commanded time has no tolerance"),
        ('events = "events.csv"\nlasting = "1 s"\n', '"lasting" is not known here'),
        ('events = "events.csv"\nduration = 10\n', "10 has no unit"),
    ],
)  # fmt: skip
def test_a_file_that_names_a_list_says_on_which_line_what_is_wrong(tmp_path: Path, file: str, expected: str) -> None:
    with pytest.raises(InputError) as caught:
        named(tmp_path, file)
    assert expected in str(caught.value)


GOOD = "channel,start,width\n0,1 ms,1 ms\n"


@pytest.mark.parametrize(
    ("text", "expected"),
    [
        ("", "-: is empty; the first line names the columns: channel, start, width"),
        ("# nothing\n", "-: is empty"),
        ("channel,start,width\n", "1: no pulse follows the line of titles"),
        ("\nchannel,start,widht\n0,1 ms,1 ms\n", '2: column "widht" is not known (did you mean "width"?); known: channel, start, width, stop'),
        ("channel,start\n0,1 ms\n", '1: needs one of the columns "width" and "stop", and not both'),
        ("channel,start,width,stop\n0,1 ms,1 ms,2 ms\n", '1: needs one of the columns "width" and "stop", and not both'),
        ("start,width\n1 ms,1 ms\n", '1: column "channel" is missing'),
        ("channel,start,start,width\n0,1 ms,1 ms,1 ms\n", '1: column "start" stands twice'),
        ("channel,start [mV],width [ms]\n0,1,1\n", "1: column \"start [mV]\": '1 mV' is in 'mV', which does not measure a time"),
        ("channel [1],start,width\n0,1 ms,1 ms\n", '1: column "channel [1]"'),
        ("0,1 ms,1 ms\n", '1: column "0" is not known'),
        (GOOD + "0,1 ms\n", "3: has 2 columns where the titles name 3"),
        (GOOD + "99,1 ms,1 ms\n", "3: channel '99' is not on the board board.toml"),
        (GOOD + "0,1,1 ms\n", "3: '1' has no unit; write a time such as '10 ms'"),
        (GOOD + "0,1 ms,1 mV\n", "3: '1 mV' is in 'mV', which does not measure a time"),
        (GOOD + "0,1 ms,1 ms +/- 5 %\n", "3: width: a commanded time has no tolerance; leave it out"),
        (GOOD + "0,1 ms,0 s\n", "3: a pulse of 0 s is none; give its on-time"),
        (GOOD + "0,-1 ms,1 ms\n", "3: '-1 ms' is negative"),
        ("channel,start,stop\n0,2 ms,1 ms\n", "2: the pulse stops before it starts"),
        ("channel,start [ms],width [ms]\n0,1,nan\n", "2: width: 'nan' is not a plain number"),
        ("channel;start [ms];width [ms]\n0;1,5;1\n", "2: start: '1,5' is not a plain number; its unit stands in the title, the point is decimal"),
        ('channel,start,width\n"0,1 ms,1 ms\n', "2: is not CSV"),
        (GOOD + "0,1 ms,1 ms\n" * 3 + "0,oops,1 ms\n", "6: 'oops' is not a number with a unit"),
    ],
)  # fmt: skip
def test_says_on_which_line_what_is_wrong(tmp_path: Path, text: str, expected: str) -> None:
    assert any(found.startswith(expected) for found in said(tmp_path, text)), said(tmp_path, text)


def test_a_column_in_the_wrong_unit_does_not_fill_the_screen(tmp_path: Path) -> None:
    found = said(tmp_path, "channel,start,width\n" + "0,1,1\n" * 1000)
    assert len(found) == 21
    assert "mend these first" in found[-1]


def test_a_list_that_is_no_text_or_no_file_is_refused(tmp_path: Path) -> None:
    the_board = board(tmp_path)
    path = tmp_path / "events.csv"
    path.write_bytes(b"channel,start,width\n0,1 ms,\xff\n")
    with pytest.raises(InputError, match=r"events.csv:2: is not UTF-8 text"):
        read_source(path, the_board)
    with pytest.raises(InputError, match="cannot be read: No such file"):
        read_source(tmp_path / "none.csv", the_board)
    (tmp_path / "folder.csv").mkdir()
    with pytest.raises(InputError, match="cannot be read: Is a directory"):
        read_source(tmp_path / "folder.csv", the_board)


def test_a_list_cannot_hold_more_pulses_than_a_pattern_may(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("boardsim.firing.csv_events.MOST_PULSES", 3)
    assert len(read(tmp_path, "channel,start,width\n" + "0,1 ms,1 ms\n" * 3).pulses) == 3
    assert said(tmp_path, "channel,start,width\n" + "0,1 ms,1 ms\n" * 5) == [
        "5: with this line the list has more than 3 pulses"
    ]


@settings(max_examples=150, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(start=st.integers(0, 60), length=st.integers(0, 12), put=st.text(max_size=6))
def test_arbitrary_damage_ends_in_located_problems_or_a_pattern(
    tmp_path: Path, start: int, length: int, put: str
) -> None:
    text = "channel,start [ms],width\n0,1,1 ms\nchannel 3,4,2 ms\n"
    path = tmp_path / "events.csv"
    path.write_bytes((text[:start] + put + text[start + length :]).encode("utf-8", "surrogatepass"))
    the_board = board(tmp_path)
    try:
        found = read_source(path, the_board)
    except InputError as err:
        caught = err
    else:
        assert found.pulses
        assert all(p.width > 0 for p in found.pulses)
        return
    assert caught.problems
