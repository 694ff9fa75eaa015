"""What board files say of output enable, clear and the rails' start, and the mistakes in it."""

from __future__ import annotations

from pathlib import Path

import pytest

from boardsim.board.reader import read_board
from boardsim.errors import InputError
from boardsim.scenarios.power_up import boots

BAD = Path(__file__).parents[1] / "boards" / "f03_all_fire_at_power_up" / "bad.toml"
ENABLE, CLEAR = 'output_enable = { tied = "low" }', 'clear = { pull_up = "47 kohm", capacitance = "100 nF" }'


def changed(folder: Path, old: str, new: str) -> Path:
    text = BAD.read_text(encoding="utf-8")
    assert old in text
    (folder / "board.toml").write_text(text.replace(old, new), encoding="utf-8")
    return folder / "board.toml"


@pytest.mark.parametrize(
    ("old", "new", "said"),
    [
        (ENABLE, 'output_enable = { tied = "high" }', "no output would ever be enabled; add pin = true"),
        (ENABLE, 'output_enable = { pull_up = "10 kohm" }', "no output would ever be enabled; add pin = true"),
        (ENABLE, 'output_enable = { tied = "low", pin = true }', "neither pull nor capacitor nor controller pin"),
        (ENABLE, "output_enable = {}", 'say what holds the line: tied = "low" or "high"'),
        (ENABLE, 'output_enable = { pull_up = "1 kohm", pull_down = "1 kohm", pin = true }', "not both"),
        (ENABLE, 'output_enable = { pull_up = "10 kohm", pin = "yes" }', "pin"),
        (ENABLE, 'output_enable = { pull_up = "0 ohm", pin = true }', "must be positive here"),
        (CLEAR, 'clear = { tied = "low" }', "nothing could ever be shifted in; add pin = true"),
        (CLEAR, 'clear = { pull_down = "10 kohm" }', "nothing could ever be shifted in; add pin = true"),
        ('first_frame = "30 ms"', 'first_frame = "0 s"', "must be positive here"),
        ('first_frame = "30 ms"', 'first_frame = "1 us"', "1.00 us is not after reset_off = 1.00 ms (assumed)"),
        (
            'first_frame = "30 ms"',
            'first_frame = "30 ms"\nreset_off = "0.1 s"',
            "is not after reset_off = 100 ms: no time is left",
        ),
        ('coils_rise = "5 ms"', 'coils_raise = "5 ms"', "coils_raise"),
    ],
)
def test_a_wiring_that_cannot_work_is_refused_with_its_line(tmp_path: Path, old: str, new: str, said: str) -> None:
    path = changed(tmp_path, old, new)
    with pytest.raises(InputError) as caught:
        read_board(path)
    text = str(caught.value)
    assert said in text
    assert "board.toml:" in text


def test_every_word_is_tried_and_the_random_one_follows_its_number() -> None:
    board = read_board(BAD)
    words = {b.name: b.contents.storage for b in boots(board, 5)}
    assert words["storage all ones"] == 0xFF
    assert words["storage all zeros"] == 0
    assert words["storage with one coil of each build on"] == 0b1111_1101  # the others are off, or have no channel
    random = "storage random (random number 5)"
    assert {b.name: b.contents.storage for b in boots(board, 5)}[random] == words[random]
    assert len({next(b for b in boots(board, n) if "random" in b.name).contents.storage for n in range(8)}) > 4


def test_what_floats_is_run_at_both_ends_where_something_does(tmp_path: Path) -> None:
    def ends(path: Path) -> set[bool]:
        return {b.leans_on for b in boots(read_board(path), 1)}

    assert ends(BAD) == {True}
    assert ends(changed(tmp_path, ENABLE, "output_enable = { pin = true }")) == {True, False}
    assert ends(changed(tmp_path, ', pulldown = "10 kohm"', "")) == {True, False}


def test_the_first_frame_counts_from_the_full_logic_rail_and_outputs_are_enabled_after_it(tmp_path: Path) -> None:
    path = changed(tmp_path, ENABLE, 'output_enable = { pull_up = "10 kohm", pin = true }')
    path.write_text(path.read_text().replace('logic_at = "0 s"', 'logic_at = "3 ms"'))
    boot = next(boots(read_board(path), 1))
    assert boot.frames[0][0] == pytest.approx(3e-3 + 1e-3 + 30e-3)
    # 8 bits at 4 MHz and 500 ns to the latch edge; another 500 ns until the pin enables the outputs.
    assert boot.until == pytest.approx(34e-3 + 2e-6 + 0.5e-6 + 0.5e-6, abs=1e-9)
    assert boot.driven[0][0] == pytest.approx(boot.until, abs=1e-9)
