"""Every mistake in a board file: its line, what was found, what is allowed, and the nearest known word."""

from pathlib import Path

import pytest
from board_files import (
    CLAMP,
    FRUIT_SORTER,
    MORE_CHANNELS,
    MOSFET,
    TEXT,
    ZENER,
    changed,
    problems,
    said,
    with_part,
    with_table,
)

from boardsim.board.reader import read_board
from boardsim.errors import InputError

NAME_RULE = (
    "cannot be a name: use up to 60 letters, digits, blanks and _ + - ( ) # / , . { }, starting with a letter or digit"
)


@pytest.mark.parametrize(
    ("content", "line", "text"),
    [
        # keys
        (changed("esr =", "ers ="), 7, 'bulk.ers: "ers" is not known here (did you mean "esr"?); known: kind, title, capacitance, esr, '),
        (changed("esr =", "ers ="), 7, 'bulk: "esr" is missing'),
        (changed("[coils.ejector]", "[coil.ejector]"), 15, 'coil: "coil" is not known here (did you mean "coils"?); known: name, ambient, junction_rise, supply,'),
        (changed("[limits]", "[limit]"), 29, 'limit: "limit" is not known here (did you mean "limits"?); known: name, ambient, junction_rise, supply,'),
        (changed("count = 3", 'count = 3\nregster = "x"'), 13, 'chain.regster: "regster" is not known here (did you mean "register"?); known: register, count,'),
        (changed("pull_in", "pullin"), 19, 'coils.ejector.pullin: "pullin" is not known here (did you mean "pull_in"?)'),
        (changed("label", "lable"), 24, 'channels."0-23".lable: "lable" is not known here (did you mean "label"?)'),
        (changed("gate =", "gat ="), 26, 'channels."0-23".switch.gat: "gat" is not known here (did you mean "gate"?)'),
        (changed("to =", "too ="), 27, 'channels."0-23".clamp.too: "too" is not known here (did you mean "to"?)'),
        (changed("lasting", "lastin"), 31, 'limits.brown_out.lastin: "lastin" is not known here (did you mean "lasting"?); known: voltage, lasting'),
        (with_part(ZENER + 'colour = "red"'), 34, 'parts.mine.colour: "colour" is not known here'),
        (changed("most_on", '[[limits.exclusive]]\nchannels = "0"\nmst = 1\n[limits.x]\nmost_on'), 32, 'limits.exclusive.0.mst: "mst" is not known here (did you mean "most"?); known: channels, most, reason'),
        # missing
        (changed('register = "74HC595"', ""), 10, 'chain: "register" is missing'),
        (changed('part = "n-logic-60v", ', ""), 26, 'channels."0-23".switch: "part" is missing'),
        (changed('kind = "diode-zener", ', ""), 27, 'channels."0-23".clamp: "clamp" needs a "kind"'),
        (with_part('voltage = "3 V"'), 29, 'parts.mine: "mine" needs a "kind"'),
        # words
        (changed('"diode-zener"', '"diod-zener"'), 27, 'channels."0-23".clamp: kind "diod-zener" is not known for "clamp" (did you mean "diode-zener"?); known: "active", "array", "array-zener", "avalanche", "built-in", "diode", "diode-zener"'),
        (changed('"rail"', '"ground"'), 27, "channels.\"0-23\".clamp.to: 'ground' is not allowed for \"to\"; allowed: \"rail\""),
        (changed(CLAMP, '[channels."0-23".clamp]\nkind = "diode"\ndiode = "fast-2a"\nto = "ground"'), 30, "channels.\"0-23\".clamp.to: 'ground' is not allowed for \"to\""),
        (changed(CLAMP, '[channels."0-23".clamp]\nkind = "diode"\ndiode = "fast-2a"\nzener = "20v-5w"'), 30, 'channels."0-23".clamp.zener: "zener" is not known here; known: kind, title, to, at, diode'),
        (changed("count = 3", 'count = 3\nactive = "hi"'), 13, "chain.active: 'hi' is not allowed for \"active\" (did you mean \"high\"?); allowed: \"high\", \"low\""),
        (changed("count = 3", "count = 3\nbit_order = 4"), 13, 'chain.bit_order: 4 is not allowed for "bit_order"; allowed: "msb", "lsb"'),
        (with_part('kind = "zenner"'), 29, 'parts.mine: kind "zenner" is not known for "mine" (did you mean "zener"?); known: "darlington-array", "diode",'),
        # parts by name
        (changed('"74HC595"', '"74HC596"'), 11, 'chain.register: shift-register or power-shift-register "74HC596" is neither in this file nor in the library (did you mean "74HC595"?); known: 74AHC595, 74AHCT595, 74HC595, 74HCT595, 74LV595, SN74HC595'),
        (changed('"20v-5w"', '"20v5w"'), 27, 'channels."0-23".clamp.zener: zener or tvs "20v5w" is neither in this file nor in the library (did you mean "20v-5w"?); known: 12v-5w, 20v-5w'),
        (changed('"20v-5w"', '"fast-2a"'), 27, 'channels."0-23".clamp.zener: "fast-2a" is a diode; a zener or tvs is needed here'),
        (changed('"n-logic-60v"', '"fast-2a"'), 26, 'channels."0-23".switch.part: "fast-2a" is a diode; an n-mosfet is needed here'),
        (changed('"n-logic-60v"', '"n-logic60v"'), 26, 'channels."0-23".switch.part: n-mosfet "n-logic60v" is neither in this file nor in the library (did you mean "n-logic-60v"?)'),
        (changed('"n-logic-60v"', '{ kind = "zener", voltage = "3 V" }'), 26, 'channels."0-23".switch.part: this is a zener; an n-mosfet is needed here'),
        (changed('coil = "ejector"', 'coil = "ejektor"'), 25, 'channels."0-23".coil: coil "ejektor" is neither in this file nor in the library (did you mean "ejector"?); known: ejector'),
        # kinds of value
        (changed('coil = "ejector"', "coil = 4"), 25, 'channels."0-23".coil: must be the name of a coil in quotes, or a table { ... }; found 4'),
        (changed('"74HC595"', "[595]"), 11, "chain.register: must be the name of a shift-register or power-shift-register in quotes, or a table { ... }; found a list"),
        (changed(CLAMP, 'clamp = "diode"'), 27, "channels.\"0-23\".clamp: \"clamp\" must be a table, such as { ... }; found 'diode'"),
        (changed('logic = { voltage = "5 V +/- 5 %" }', 'logic = "5 V"'), 8, "logic: \"logic\" must be a table, such as { ... }; found '5 V'"),
        (with_table('[parts]\nmine = "12 V"'), 30, "parts.mine: \"mine\" must be a table, such as { ... }; found '12 V'"),
        (changed("count = 3", "count = 0"), 12, 'chain.count: "count" must be 1 or more; found 0'),
        (changed("count = 3", "count = 65"), 12, 'chain.count: "count" must be 64 or less; found 65'),
        (changed("count = 3", "count = 2.5"), 12, 'chain.count: "count" must be a whole number without unit or quotes; found 2.5'),
        (changed("count = 3", 'count = "3"'), 12, "chain.count: \"count\" must be a whole number without unit or quotes; found '3'"),
        (changed("count = 3", "count = true"), 12, 'chain.count: "count" must be a whole number without unit or quotes; found true'),
        (changed("count = 3", "count = 0x" + "f" * 5000), 12, "chain.count: the number is larger than TOML allows"),
        (changed("most_on = 5", "most_on = 0"), 30, 'limits.most_on: "most_on" must be 1 or more; found 0'),
        (changed('"lane {n}"', "7"), 24, 'channels."0-23".label: "label" must be text in quotes; found 7'),
        (changed('"lane {n}"', "1999-01-02"), 24, 'channels."0-23".label: "label" must be text in quotes; found 1999-01-02'),
        (with_part('kind = "diode"\nforward = []'), 31, 'parts.mine.forward: "forward" is empty; it needs at least 1 entry'),
        (with_part('kind = "diode"\nforward = { voltage = "1 V", current = "1 A" }'), 31, 'parts.mine.forward: "forward" must be a list in [ ]; found a table'),
        (with_part('kind = "diode"\nforward = [\n{ voltage = "1 V", current = "1 A" },\n{ voltage = "1.2", current = "3 A" },\n]'), 33, "parts.mine.forward.1.voltage: '1.2' has no unit; write a voltage such as '24 V +/- 5 %'"),
        # quantities
        (changed('"12 mH +/- 20 %"', '"12 mF"'), 18, "coils.ejector.inductance: '12 mF' is in 'mF', which does not measure an inductance; write it such as '12 mH +/- 20 %'"),
        (changed('"12 mH +/- 20 %"', "12"), 18, "coils.ejector.inductance: 12 has no unit; write an inductance in quotes, such as '12 mH +/- 20 %'"),
        (changed('"12 mH +/- 20 %"', '"12"'), 18, "coils.ejector.inductance: '12' has no unit; write an inductance such as"),
        (changed('"12 mH +/- 20 %"', '"12 MH"'), 18, "coils.ejector.inductance: '12 MH' is out of range, 12.0 MH; an inductance is expected between 100 pH and 1.00 kH"),
        (changed('"16 ohm +/- 10 %"', '"-16 ohm"'), 16, "coils.ejector.resistance: '-16 ohm' is negative; a resistance must be positive"),
        (changed('"16 ohm +/- 10 %"', '"0 ohm"'), 16, "coils.ejector.resistance: '0 ohm' is zero; a resistance must be positive here"),
        (changed('"10 kohm"', '"0 ohm"'), 26, "channels.\"0-23\".switch.pulldown: '0 ohm' is zero; a resistance must be positive here"),
        (changed('"1.8 m"', "true"), 6, "cable.length: expected a length in quotes, such as '1.8 m'"),
        (with_table('[derating]\nvoltage = "80 %"\ncurrent = 0.8'), 31, "derating.current: 0.8 has no unit; write a share in quotes, such as '80 %'"),
        (with_table('[derating]\nvoltage = "120 %"'), 30, "derating.voltage: '120 %' is out of range, 120 %; a share is expected between 0.0001 % and 100 %"),
        # wire
        (changed('"16 AWG"', '"AWG 16"'), 6, "cable.gauge: 'AWG 16' is not a wire gauge; write it such as '16 AWG' or '2/0 AWG'"),
        (changed('"16 AWG"', "16"), 6, "cable.gauge: 16 is not a wire gauge; write it such as '16 AWG'"),
        (changed('"16 AWG"', '"99 AWG"'), 6, "cable.gauge: gauge 99 AWG is outside 4/0 to 50 AWG"),
        (changed('gauge = "16 AWG", ', ""), 6, "cable: give either gauge (such as '16 AWG') or area (such as '1.5 mm2'); neither is given"),
        (changed('gauge = "16 AWG"', 'gauge = "16 AWG", area = "1 mm2"'), 6, "cable: give either gauge (such as '16 AWG') or area (such as '1.5 mm2'); both are given"),
        (changed('gauge = "16 AWG"', 'gauge = "16 AWG", spacing = "1 mm"'), 6, "cable: spacing is smaller than the bare conductor, 1.29 mm"),
        # figures that contradict each other
        (with_part(MOSFET.format('{ value = "40 mohm", gate = "1 V" }')), 29, "parts.mine: on_resistance at a gate voltage of 1 V, below the threshold of 1.7 V"),
        (with_part(MOSFET.format('{ value = "40 mohm", gate = "4.5 V" }, { value = "50 mohm", gate = "10 V" }')), 29, "parts.mine: on_resistance at the gate voltages given and threshold contradict each other: the resistance must fall"),
        (with_part(MOSFET.format('{ value = "40 mohm", gate = "4.5 V" }, { value = "30 mohm", gate = "4.5 V" }')), 29, "parts.mine: on_resistance at the gate voltages given and threshold contradict each other"),
        (with_part(MOSFET.format('{ value = "0 ohm", gate = "4.5 V" }')), 33, "parts.mine.on_resistance.0.value: '0 ohm' is zero; a resistance must be positive here"),
        (with_part(MOSFET.format('{ value = "40 mohm", gate = "4.5 V" }').replace('"35 pF"', '"350 pF"')), 29, "parts.mine: reverse_capacitance must be smaller than input_capacitance and output_capacitance"),
        (with_part(MOSFET.format('{ value = "40 mohm", gate = "4.5 V" }').replace('"3 nC"', '"0.1 nC"')), 29, "parts.mine: gate_drain_charge is smaller than reverse_capacitance times charge_voltage"),
        (with_part(ZENER.replace('"3 ohm"', '"3 kohm"')), 29, "parts.mine: impedance times test_current is 150 V, which leaves nothing of the voltage of 12.0 V"),
        (with_part('kind = "diode"\nforward = [{ voltage = "1 V", current = "1 A" }, { voltage = "0.7 V", current = "2 A" }]'), 29, "parts.mine: forward points must rise in voltage and current"),
        (with_part('kind = "diode"\nforward = [{ voltage = "100 V", current = "1 A" }]'), 29, "parts.mine: forward voltage 100 V at 1 A is more than that of one junction"),
        # channels
        (changed('"0-23"', '"0-24"'), 23, 'channels."0-24": output 24 is outside the chain: 3 registers have outputs 0-23'),
        (changed("count = 3", "count = 1"), 23, 'channels."0-23": outputs 8-23 are outside the chain: 1 register has outputs 0-7'),
        (changed("label", 'bits = "1-24"\nlabel'), 24, 'channels."0-23".bits: bit 24 is outside the chain: 3 registers have outputs 0-23'),
        (changed('"0-23"', '"all"'), 23, "channels.all: 'all' is not a range of numbers; write it such as '0-23' or '0,2,8-15'"),
        (changed('"0-23"', '"0-23,7"'), 23, "channels.\"0-23,7\": '0-23,7' names 7 twice"),
        (changed('"0-23"', '"0-9999"'), 23, "channels.\"0-9999\": '0-9999' reaches beyond 4095, more than any chain has"),
        (changed("label", 'outputs = "0-22"\nlabel'), 24, 'channels."0-23".outputs: names 23 where the range has 24 channels'),
        (changed("label", 'bits = "0-30"\nlabel'), 24, 'channels."0-23".bits: names 31 where the range has 24 channels'),
        (changed("label", 'numbers = "1"\nlabel'), 24, 'channels."0-23".numbers: names 1 where the range has 24 channels'),
        (changed("label", 'outputs = "a-b"\nlabel'), 24, "channels.\"0-23\".outputs: 'a-b' is not a range of numbers"),
        (with_table(MORE_CHANNELS.format("20-25", "")), 29, 'channels."20-25": channels 20-23 are already taken by channels."0-23"'),
        (with_table(MORE_CHANNELS.format("30-31", 'outputs = "3,4"')), 30, 'channels."30-31".outputs: outputs 3, 4 are already taken by channels."0-23"'),
        (changed("most_on = 5", 'most_on = 5\nexclusive = [{ channels = "0-40" }]'), 31, "limits.exclusive.0.channels: channels 24-40 are not on this board"),
        (changed("most_on = 5", 'most_on = 5\nexclusive = [\n{ channels = "0-1" },\n{ channels = "x" },\n]'), 33, "limits.exclusive.1.channels: 'x' is not a range of numbers"),
    ],
)  # fmt: skip
def test_says_where_what_was_found_and_what_is_allowed(tmp_path: Path, content: str, line: int, text: str) -> None:
    found = [p for p in problems(tmp_path, content) if p.text.startswith(text)]
    assert [p.line for p in found] == [line], said(tmp_path, content)
    assert str(found[0]).startswith(f"{tmp_path / 'board.toml'}:{line}: ")


NASTY = [r"a\n.control", r".include x", r"x\r\n.shell ls", r"$(ls)", r"`ls`", r"a;b", r"* comment", r"\u0000", r"a\u2028b", r"", " x", "=", "x" * 61, r"\"", "v(1)'", "ä\\u0301 ok"]  # fmt: skip


@pytest.mark.parametrize("name", NASTY)
@pytest.mark.parametrize(
    ("before", "after", "key"),
    [
        ('name = "fruit sorter"', 'name = "{}"', "name"),
        ('"lane {n}"', '"{}"', "label"),
        ("[coils.ejector]", '[coils."{}"]', "coils"),
        ("[limits]", '[parts."{}"]\n' + ZENER + "[limits]", "parts"),
        ("[limits]", "[parts.mine]\n" + ZENER + 'title = "{}"\n[limits]', "title"),
        ("pull_in", 'title = "{}"\npull_in', "title"),
        ("[limits]", '[derating]\nreason = "{}"\n[limits]', "reason"),
        ("most_on = 5", 'exclusive = [{{ channels = "0-1", reason = "{}" }}]', "reason"),
    ],
)
def test_nothing_that_could_be_a_command_of_the_engine_can_be_a_name(
    tmp_path: Path, name: str, before: str, after: str, key: str
) -> None:
    found = said(tmp_path, changed(before, after.format(name)))
    refused = [text for text in found if NAME_RULE in text]
    assert refused, found
    assert key in refused[0]
    assert all(text.isprintable() for text in found)


@pytest.mark.parametrize("name", ["gate 3", "north side (2)", "lane #7", "Düse 1", "A+B/C", "選別機", "x" * 60])
def test_plain_words_can_be_names(tmp_path: Path, name: str) -> None:
    assert said(tmp_path, changed("fruit sorter", name)) == []


@pytest.mark.parametrize("folder", ["a\n.control", ".include x", "***", "bean planter"])
def test_a_board_without_a_name_takes_a_safe_form_of_its_folders_name(tmp_path: Path, folder: str) -> None:
    place = tmp_path / folder
    place.mkdir()
    (place / "board.toml").write_text(changed('name = "fruit sorter"', ""), encoding="utf-8")
    name = read_board(place / "board.toml").name
    assert name.isprintable()
    assert name[0].isalnum()
    assert name == {"bean planter": "bean planter", "***": "board", ".include x": "include x"}.get(folder, "a-.control")


def test_several_mistakes_come_together_in_the_order_of_the_file(tmp_path: Path) -> None:
    content = (
        TEXT.replace('"1.8 m"', "1.8").replace("esr", "ers").replace('"4 MHz"', '"4 MB"').replace('"ejector"', '"x"')
    )
    assert [p.line for p in problems(tmp_path, content)] == [6, 7, 7, 13, 25]


def test_mistakes_that_only_the_layout_shows_come_together(tmp_path: Path) -> None:
    content = changed("label", 'outputs = "1-24"\nnumbers = "1"\nlabel').replace(
        "most_on = 5", 'exclusive = [{ channels = "50" }]'
    )
    assert said(tmp_path, content) == [
        '25: channels."0-23".numbers: names 1 where the range has 24 channels',
        "32: limits.exclusive.0.channels: channel 50 is not on this board",
    ]


def test_a_part_with_a_mistake_is_reported_once_at_the_part(tmp_path: Path) -> None:
    content = with_part(ZENER.replace('"12 V"', '"12 X"')).replace('"20v-5w"', '"mine"')
    assert said(tmp_path, content) == [
        "31: parts.mine.voltage: unit 'X' is not known; write a voltage such as '24 V +/- 5 %'"
    ]


def test_an_overlap_of_channels_is_not_reported_again_for_their_outputs_and_bits(tmp_path: Path) -> None:
    assert said(tmp_path, with_table(MORE_CHANNELS.format("0-3", ""))) == [
        '29: channels."0-3": channels 0-3 are already taken by channels."0-23"'
    ]


def test_missing_sections_are_all_named(tmp_path: Path) -> None:
    assert said(tmp_path, 'name = "empty tray"') == [
        f'-: "{section}" is missing' for section in ("supply", "cable", "bulk", "logic", "chain", "channels")
    ]


def test_channels_must_not_be_empty(tmp_path: Path) -> None:
    content = TEXT[: TEXT.index("[channels.")] + "[channels]\n"
    assert said(tmp_path, content) == ['23: channels: "channels" is empty; it needs at least 1 entry']


def test_a_long_word_is_cut_in_the_message(tmp_path: Path) -> None:
    for content in (
        changed("esr", '"' + "y" * 100_000 + '"'),
        changed('"74HC595"', '"' + "y" * 100_000 + '"'),
        changed('"fruit sorter"', '"' + "y" * 100_000 + '"'),
        changed('"0-23"', '"' + "0," * 50_000 + '"'),
        changed('"rail"', '"' + "y" * 100_000 + '"'),
    ):
        found = said(tmp_path, content)
        assert found
        assert max(map(len, found)) < 500


def test_thousands_of_mistakes_do_not_take_for_ever(tmp_path: Path) -> None:
    content = TEXT + "".join(f"key{i} = 1\n" for i in range(3000))
    assert len(problems(tmp_path, content)) == 3000


def test_the_fruit_sorter_reads_as_its_file_says() -> None:
    board = read_board(FRUIT_SORTER)
    assert board.name == "fruit sorter"
    assert [c.number for c in board.channels] == list(range(24))
    assert [(c.output, c.bit, c.label) for c in board.channels[:2]] == [(0, 0, "lane 0"), (1, 1, "lane 1")]
    assert board.channel(7).coil_name == "ejector"
    assert board.channel(7).coil.resistance.max == pytest.approx(17.6)
    assert board.channel(7).switch.part.breakdown.origin.kind == "library"
    assert str(board.chain.clock.origin) == "given: board.toml"
    assert board.chain.outputs == 24
    assert board.around is not None
    assert (board.around.ambient_low, board.around.ambient_high) == pytest.approx((278.15, 318.15))
    assert ("chain", "latch time") in [(a.part, a.quantity) for a in board.assumptions]
    with pytest.raises(KeyError):
        board.channel(24)


def test_without_ambient_its_absence_is_listed_as_an_assumption(tmp_path: Path) -> None:
    path = tmp_path / "board.toml"
    path.write_text(changed('ambient = "5 to 45 degC"', ""), encoding="utf-8")
    board = read_board(path)
    assert board.around is None
    assert ("board", "ambient", "not given") in [(a.part, a.quantity, a.value) for a in board.assumptions]


def test_wiring_columns_are_taken_in_the_order_written(tmp_path: Path) -> None:
    path = tmp_path / "board.toml"
    path.write_text(
        changed("label", 'outputs = "23-0"\nbits = "12-23,0-11"\nnumbers = "1-24"\nlabel'), encoding="utf-8"
    )
    channels = read_board(path).channels
    assert [(c.number, c.output, c.bit, c.label) for c in (channels[0], channels[12])] == [
        (0, 23, 12, "lane 1"),
        (12, 11, 0, "lane 13"),
    ]


def test_bits_follow_the_outputs_where_they_are_not_given(tmp_path: Path) -> None:
    path = tmp_path / "board.toml"
    path.write_text(changed("label", 'outputs = "23-0"\nlabel'), encoding="utf-8")
    assert [c.bit for c in read_board(path).channels[:2]] == [23, 22]


def test_a_part_of_the_file_stands_before_one_of_the_library(tmp_path: Path) -> None:
    path = tmp_path / "board.toml"
    path.write_text(with_part(ZENER).replace("[parts.mine]", '[parts."20v-5w"]'), encoding="utf-8")
    zener = read_board(path).channels[0].clamp.zener
    assert zener.voltage.typ == 12.0
    assert str(zener.voltage.origin) == "given: board.toml"


def test_a_register_can_be_described_among_the_parts_or_in_place(tmp_path: Path) -> None:
    body = (
        'outputs = 12\noutput_resistance = "30 ohm"\npropagation = "40 ns"\noutput_edge = "10 ns"\n'
        'supply_low = "2 V"\nsupply_high = "6 V"\n'
    )
    named = with_part('kind = "shift-register"\n' + body).replace('"74HC595"', '"mine"')
    inline = changed('"74HC595"', "{" + body.strip().replace("\n", ", ") + "}")
    for content in (named, inline):
        path = tmp_path / "board.toml"
        path.write_text(content, encoding="utf-8")
        assert read_board(path).chain.outputs == 36


def test_a_name_in_the_wrong_place_of_a_valid_board_is_an_input_error_not_a_pydantic_one(tmp_path: Path) -> None:
    path = tmp_path / "board.toml"
    path.write_text(changed("esr", "ers"), encoding="utf-8")
    with pytest.raises(InputError) as caught:
        read_board(path)
    assert caught.value.__cause__ is None
    assert caught.value.exit_status == 2
