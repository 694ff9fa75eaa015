"""The chain against the outside: a circuit solver for its lines, a chain played edge by edge for its windows, the shift time."""

from __future__ import annotations

import random
import tomllib
from pathlib import Path

import numpy as np
import pytest
from scipy.integrate import solve_ivp

from boardsim.board.reader import Board, read_board
from boardsim.firing.registers import frame_time
from boardsim.scenarios.chain import check_chain
from boardsim.verdict.chain import all_times
from boardsim.verdict.chain_times import ChainTimes, Driven

BOARDS = Path(__file__).parents[1] / "boards"


@pytest.mark.parametrize(("resistance", "farads"), [(50.0, 15e-12), (130.0, 120e-12), (1e3, 1e-9)])
@pytest.mark.parametrize("levels", [(1.5, 3.5), (0.8, 2.0)])
def test_lines_cross_their_levels_when_an_independent_solver_says_so(
    resistance: float, farads: float, levels: tuple[float, float]
) -> None:
    """SciPy's solve_ivp on C dv/dt = (V - v) / R, 5 V; its events are found to a tolerance of 1e-10."""
    tau = resistance * farads
    line = Driven(resistance, farads, (5.0, 5.0), levels)
    for start, end, span in ((0.0, 5.0, line.rise), (5.0, 0.0, line.fall)):
        events = [lambda t, v, level=level: v[0] - level for level in levels]
        solved = solve_ivp(lambda t, v, end=end: (end - v) / tau, (0, 6 * tau), [start], events=events, rtol=1e-10, atol=1e-12)  # fmt: skip
        crossings = sorted(float(e[0]) for e in solved.t_events)
        assert (span.early, span.late) == pytest.approx(crossings, rel=1e-6)


def played(times: ChainTimes, registers: int, rng: random.Random, extreme: bool) -> list[str]:
    """Shift through a chain edge by edge, each register with a threshold and a delay of its own; what went wrong.

    Written from the definition of set-up and hold alone: the input of a register must not change from `setup` before to
    `hold` after the moment at which that register sees the clock.
    """
    draw = (lambda a, b: rng.choice((a, b))) if extreme else rng.uniform
    seen = [draw(times.clock.rise.early, times.clock.rise.late) for _ in range(registers)]
    r = times.register
    delay = [draw(r.shift_delay_least, r.shift_delay + times.link.either.late) for _ in range(registers)]
    wrong = []
    for k in range(1, registers):
        for edge in range(1, 4):
            at = edge * times.period + seen[k]
            changes = [e * times.period + seen[k - 1] + delay[k - 1] for e in range(5)]
            if any(at - r.setup < change < at + r.hold for change in changes):
                wrong.append(f"register {k} at edge {edge}")
            # The data of the edge before, not of this one and not of an older one, must be there.
            if sum(change <= at - r.setup for change in changes) != edge:
                wrong.append(f"register {k} takes another bit at edge {edge}")
    return wrong


def board_of(name: str) -> Board:
    return read_board(BOARDS / "chain_clock" / f"{name}.toml")


@pytest.mark.parametrize("extreme", [False, True])
def test_a_chain_whose_windows_hold_never_shifts_wrongly_and_one_whose_do_not_can(extreme: bool) -> None:
    rng = random.Random(7)
    good, bad = all_times(board_of("repaired")), all_times(board_of("bad"))
    assert good is not None
    assert bad is not None
    assert not [w for _ in range(400) for times in good for w in played(times, 8, rng, extreme)]
    if extreme:
        assert [w for _ in range(400) for times in bad for w in played(times, 8, rng, extreme)]


@pytest.mark.parametrize(
    ("registers", "mhz", "microseconds"), [(1, 8, 1), (2, 8, 2), (4, 8, 4), (10, 8, 10), (10, 1, 80)]
)
def test_the_shift_time_is_eight_bits_per_register_over_the_clock(
    tmp_path: Path, registers: int, mhz: int, microseconds: float
) -> None:
    """t = 8 n / f, the definition; frame time without the latch."""
    text = (BOARDS / "chain_clock" / "repaired.toml").read_text(encoding="utf-8")
    text = text.replace("count = 8", f'count = {registers}\nlatch_time = "0 s"').replace('"8 MHz"', f'"{mhz} MHz"')
    path = tmp_path / "board.toml"
    path.write_text(text.replace('[channels."0-11"]', '[channels."0-6"]'), encoding="utf-8")
    the_board = read_board(path)
    assert frame_time(the_board.chain) == pytest.approx(microseconds * 1e-6)
    lines = check_chain(the_board).firing
    assert f"{registers} x 74HC595 make {8 * registers} outputs from 3 lines of the controller" in lines


def test_a_printed_hc_cascade_at_20_mhz_is_beyond_what_it_can_do() -> None:
    """reference: at 4.5 V 40 ns from clock to serial output and 13 ns of set-up are more than the 50 ns of 20 MHz."""
    assert (
        tomllib.loads((BOARDS / "chain_clock" / "bad.toml").read_text(encoding="utf-8"))["chain"]["clock"] == "20 MHz"
    )
    found = {f.quantity: f for f in check_chain(board_of("bad")).findings}
    assert found["clock"].verdict == "fail"
    assert np.isfinite(found["clock"].margin or np.nan)
