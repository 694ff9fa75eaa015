"""Which corners a board is run in."""

from pathlib import Path

import pytest
from board_files import FRUIT_SORTER, TEXT

from boardsim.board.corners import corners, nominal_only, not_varied
from boardsim.board.reader import Board, read_board
from boardsim.errors import InputError

TOLERANCES = (" +/- 5 %", " +/- 10 %", " +/- 20 %")


def board(folder: Path, *, tolerances: bool, ambient: bool) -> Board:
    text = TEXT if ambient else TEXT.replace('ambient = "5 to 45 degC"', "")
    for tolerance in () if tolerances else TOLERANCES:
        text = text.replace(tolerance, "")
    path = folder / "board.toml"
    path.write_text(text.replace('zener = "20v-5w"', 'zener = "flat"') + """
[parts.flat]
kind = "zener"
voltage = "24 V"
test_current = "50 mA"
impedance = "3.5 ohm"
""" if not tolerances else text, encoding="utf-8")  # fmt: skip
    return read_board(path)


def test_a_board_with_tolerances_runs_at_the_ends_that_are_worst_for_something() -> None:
    found = {c.name: c for c in corners(read_board(FRUIT_SORTER))}
    assert [name.split(",")[0] for name in found] == ["supply high", "supply high", "supply low", "supply low"]
    hot = found["supply low, coils hot"]
    assert (hot.winding, hot.ends["supply"], hot.ends["coil_resistance"]) == ("hot", "min", "max")
    strong = found["supply high, coils cold, clamps high and hot"]
    assert (strong.winding, strong.ends["supply"], strong.ends["coil_resistance"]) == ("cold", "max", "min")
    assert strong.ends["clamp_voltage"] == "max"
    assert "breakdown" not in strong.ends  # the library's switch has no tolerance there


def test_without_tolerances_and_ambient_one_nominal_run_is_left(tmp_path: Path) -> None:
    (only,) = corners(board(tmp_path, tolerances=False, ambient=False))
    assert (only.name, dict(only.ends), only.winding) == ("nominal", {}, "reference")


def test_an_ambient_band_alone_gives_a_cold_and_a_hot_run(tmp_path: Path) -> None:
    assert {c.winding for c in corners(board(tmp_path, tolerances=False, ambient=True))} == {"cold", "hot"}


@pytest.mark.parametrize("tolerances", [True, False])
@pytest.mark.parametrize("ambient", [True, False])
def test_no_two_runs_are_alike(tmp_path: Path, tolerances: bool, ambient: bool) -> None:
    found = corners(board(tmp_path, tolerances=tolerances, ambient=ambient))
    assert len({(tuple(sorted(c.ends.items())), c.winding, c.junction) for c in found}) == len(found)


def test_semiconductors_are_cold_in_the_coldest_air_and_warmed_up_in_the_warmest() -> None:
    """Ambient 5 to 45 degC, and 35 K of their own."""
    found = {c.name: c.junction - 273.15 for c in corners(read_board(FRUIT_SORTER))}
    assert found == pytest.approx({
        "supply high, coils cold, clamps high and hot": 80.0,
        "supply high, coils cold, clamps low and cold": 5.0,
        "supply low, coils hot": 80.0,
        "supply low, coils cold": 5.0,
    })  # fmt: skip


def test_a_rise_of_the_boards_own_is_taken(tmp_path: Path) -> None:
    path = tmp_path / "board.toml"
    path.write_text(TEXT.replace('junction_rise = "35 K"', 'junction_rise = "50 K"'), encoding="utf-8")
    found = read_board(path)
    assert max(c.junction for c in corners(found)) == pytest.approx(273.15 + 95)
    assert not [a for a in found.assumptions if a.quantity == "junction rise"]


def test_temperatures_at_which_no_semiconductor_works_are_refused(tmp_path: Path) -> None:
    path = tmp_path / "board.toml"
    path.write_text(TEXT.replace('junction_rise = "35 K"', 'junction_rise = "150 K"'), encoding="utf-8")
    with pytest.raises(
        InputError, match="take semiconductors from 5 degC to 195 degC; their models hold from -55 degC to 175"
    ):
        read_board(path)


def test_a_range_that_ends_where_the_models_end_is_taken(tmp_path: Path) -> None:
    path = tmp_path / "board.toml"
    changed = TEXT.replace('ambient = "5 to 45 degC"', 'ambient = "-55 to 125 degC"').replace('"35 K"', '"50 K"')
    assert "-55" in changed
    path.write_text(changed, encoding="utf-8")
    assert max(c.junction for c in corners(read_board(path))) == pytest.approx(448.15)


def test_without_an_ambient_semiconductors_are_at_25_degc(tmp_path: Path) -> None:
    found = board(tmp_path, tolerances=True, ambient=False)
    assert {c.junction for c in corners(found)} == {298.15}
    (said,) = (a.why for a in found.assumptions if a.quantity == "ambient")
    assert "semiconductors at 25 degC" in said


def test_what_was_given_without_tolerance_is_named(tmp_path: Path) -> None:
    assert nominal_only(read_board(FRUIT_SORTER)) == (
        "bulk series resistance",
        "breakdown voltage",
        "on-resistance",
        "threshold",
    )
    assert set(nominal_only(board(tmp_path, tolerances=False, ambient=False))) == {
        "supply voltage",
        "coil resistance",
        "coil inductance",
        "bulk capacitance",
        "bulk series resistance",
        "clamp voltage",
        "breakdown voltage",
        "on-resistance",
        "threshold",
        "logic rail",
        "winding temperature",
    }


def test_a_tolerance_that_no_corner_varies_is_said(tmp_path: Path) -> None:
    text = TEXT.replace('gate = "100 ohm"', 'gate = "100 ohm +/- 5 %"').replace(
        'esr = "40 mohm"', 'esr = "40 mohm +/- 50 %"'
    )
    path = tmp_path / "board.toml"
    path.write_text(text)
    found = read_board(path)
    said = [(a.part, a.quantity) for a in not_varied(found)]
    assert said == [("switch", "gate")]  # the ESR has a corner of its own, and 24 equal channels say it once
    assert {corner.ends.get("esr") for corner in corners(found)} == {"max"}
