"""The chain of registers, bit by bit, against the function table of its datasheet and the definition of its time."""

from pathlib import Path

import pytest
from firing_boards import board
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from boardsim.board.schema import Chain
from boardsim.firing.registers import ChainState, bits_on_the_wire, frame_time, shift_in

COUNT = 3
WIDTH = 8 * COUNT


def chain(folder: Path, **settings: str) -> Chain:
    return board(folder, count=COUNT, **settings).chain  # type: ignore[arg-type]


def test_the_first_bit_shifted_in_ends_at_the_last_output() -> None:
    # NXP 74HC595; 74HCT595 rev. 6 (12 Dec 2011), table 3: on SHCP the contents of the shift register stages move on by
    # one, stage 0 takes DS, and what was in stage 6 appears at Q7S; on STCP they move to the outputs Qn.
    state = ChainState(8)
    for bit in (1, 0, 0, 0, 0, 0, 0, 0):
        state = state.clock(bit)
    assert state.latch().storage == 1 << 7


def test_each_clock_moves_every_bit_from_q0_towards_q7_and_on_into_the_next_register() -> None:
    # The same table: Q7S of one register is DS of the next.
    state = ChainState(16).clock(1)
    seen = [state.shift]
    for _ in range(15):
        state = state.clock(0)
        seen.append(state.shift)
    assert seen == [1 << k for k in range(16)]
    assert state.clock(0).shift == 0


def test_outputs_change_on_the_latch_only() -> None:
    # The same table: SHCP without STCP leaves Qn as they were.
    state = ChainState(8, shift=0b1010, storage=0b0101)
    assert state.clock(1).storage == 0b0101
    assert state.latch().storage == 0b1010
    assert state.latch().shift == 0b1010


@pytest.mark.parametrize(
    ("registers", "clock", "microseconds"),
    [(1, "8 MHz", 1.0), (2, "8 MHz", 2.0), (4, "8 MHz", 4.0), (10, "8 MHz", 10.0), (10, "1 MHz", 80.0)],
)
def test_shifting_takes_one_clock_period_per_output(
    tmp_path: Path, registers: int, clock: str, microseconds: float
) -> None:
    # By definition: t = 8 n / f. The latch follows by its own time.
    the_chain = board(tmp_path, count=registers, clock=clock, latch_time="0 s").chain
    assert frame_time(the_chain) == pytest.approx(microseconds * 1e-6, rel=1e-12)
    later = board(tmp_path, count=registers, clock=clock, latch_time="3 us").chain
    assert frame_time(later) == pytest.approx((microseconds + 3) * 1e-6, rel=1e-12)


def documented_output(bit: int, bit_order: str, first_out: str) -> int:
    """Where a bit of the image ends: most significant bit of the farthest register first leaves it in place; the other
    bit order mirrors each byte, the other register order the order of the bytes."""
    register, place = divmod(bit, 8)
    if bit_order == "lsb":
        place = 7 - place
    if first_out == "near":
        register = COUNT - 1 - register
    return 8 * register + place


@settings(deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(
    image=st.integers(0, 2**WIDTH - 1),
    before=st.integers(0, 2**WIDTH - 1),
    bit_order=st.sampled_from(["msb", "lsb"]),
    first_out=st.sampled_from(["far", "near"]),
    active=st.sampled_from(["high", "low"]),
)
def test_every_setting_puts_every_image_where_the_documentation_says(
    tmp_path: Path, image: int, before: int, bit_order: str, first_out: str, active: str
) -> None:
    the_chain = chain(tmp_path, bit_order=bit_order, first_out=first_out, active=active)
    outputs = shift_in(ChainState(WIDTH, before, before), image, the_chain).storage
    for bit in range(WIDTH):
        on = bool(image >> bit & 1)
        level = bool(outputs >> documented_output(bit, bit_order, first_out) & 1)
        assert level == (on if active == "high" else not on)
    assert len(list(bits_on_the_wire(image, the_chain))) == WIDTH


def test_the_settings_that_match_the_hardware_leave_every_image_in_place(tmp_path: Path) -> None:
    the_chain = chain(tmp_path)
    for image in (0, 1, 0xF0F0F0, 2**WIDTH - 1):
        assert shift_in(ChainState(WIDTH), image, the_chain).storage == image
