"""The chain link by link: rows for a table, and what its timing diagram is drawn from."""

from __future__ import annotations

import math
from collections.abc import Iterator, Sequence

from boardsim.board.reader import Board
from boardsim.firing.registers import frame_time
from boardsim.quantities import in_units
from boardsim.verdict.chain import all_times, worst_windows
from boardsim.verdict.chain_findings import chain_finding
from boardsim.verdict.chain_times import ChainTimes, Window, controller_of
from boardsim.verdict.findings import Finding
from boardsim.verdict.studies import ChainRow, ChainStudy, LinkView

_FIRST, _ON = "controller to register 1", "register to register"


def chain_study(board: Board, findings: Sequence[Finding]) -> ChainStudy:
    """The chain link by link, from what was found about it."""
    known = all_times(board)
    windows = {(w.what, w.where): (times, w) for times, w in worst_windows(known or ())}
    links = [(_FIRST, "from the controller")]
    if board.chain.count > 1:
        links.append((_ON, "from register to register"))
    rows = tuple(_row(where, levels, findings, windows) for where, levels in links)
    return ChainStudy(rows, tuple(_views(board, windows)))


def _row(
    where: str, levels: str, findings: Sequence[Finding], windows: dict[tuple[str, str], tuple[ChainTimes, Window]]
) -> ChainRow:
    by = {f.quantity: f for f in findings if f.check == "logic-level"}
    high, low = by.get(f"high level {levels}"), by.get(f"low level {levels}")
    missing = {"from the controller": by}.get(levels, {})
    high_needed, low_needed = (
        missing.get("high level that the inputs need"),
        missing.get("low level that the inputs need"),
    )
    setup, hold = windows.get(("set-up", where)), windows.get(("hold", where))
    return ChainRow(
        where,
        high.value if high else None,
        high.limit if high else high_needed.value if high_needed else None,
        low.value if low else None,
        low.limit if low else low_needed.value if low_needed else None,
        setup[1].needed if setup else None,
        setup[1].available if setup else None,
        hold[1].needed if hold else None,
        hold[1].available if hold else None,
    )


def _views(board: Board, windows: dict[tuple[str, str], tuple[ChainTimes, Window]]) -> Iterator[LinkView]:
    """Each link at the logic rail where its set-up has the least room; its margins are those of the windows."""
    for view in (_first, _on, _latch):
        for found in view(board, windows):
            if all(math.isfinite(t) for t in (*found.seen, found.settled)):
                yield found


def _first(board: Board, windows: dict[tuple[str, str], tuple[ChainTimes, Window]]) -> Iterator[LinkView]:
    if (found := windows.get(("set-up", _FIRST))) is None:
        return
    times, window = found
    controller = controller_of(board)
    kept = controller.data_hold.min + times.data.either.early
    high, low = controller.clock_duty.min * times.period, (1 - controller.clock_duty.max) * times.period
    changes_at_the_edge = controller.spi_mode not in (0, 3)
    yield LinkView(
        "controller to register 1",
        "clock",
        "data",
        (times.clock.rise.early, times.clock.rise.late),
        times.clock.rise.early - times.register.setup - (window.available - window.needed),
        kept if changes_at_the_edge else high + kept,
        times.register.setup,
        times.register.hold,
        ((-times.period, True), (-low, False), (high, False)),
        times.volts,
    )


def _on(board: Board, windows: dict[tuple[str, str], tuple[ChainTimes, Window]]) -> Iterator[LinkView]:
    if (found := windows.get(("set-up", _ON))) is None:
        return
    times, window = found
    controller = controller_of(board)
    high, low = controller.clock_duty.min * times.period, (1 - controller.clock_duty.max) * times.period
    n = board.chain.count - 1
    yield LinkView(
        f"register to register ({n} links)" if n > 1 else "register 1 to register 2",
        "clock",
        "serial out",
        (times.clock.rise.early, times.clock.rise.late),
        times.clock.rise.early - times.register.setup - (window.available - window.needed),
        times.clock.rise.early + times.register.shift_delay_least,
        times.register.setup,
        times.register.hold,
        ((-times.period, True), (-low, False), (high, False)),
        times.volts,
    )


def _latch(board: Board, windows: dict[tuple[str, str], tuple[ChainTimes, Window]]) -> Iterator[LinkView]:
    if (found := windows.get(("latch after clock", "controller to every register"))) is None:
        return
    times, window = found
    yield LinkView(
        "last clock to latch",
        "latch",
        "shift stage",
        (times.latch.rise.early, times.latch.rise.late),
        times.clock.rise.late - window.available,
        None,
        times.register.latch_setup,
        0.0,
        ((-window.available, True),),
        times.volts,
    )


def worst_lateness(board: Board) -> float:
    """How long an output may follow its command at the longest, while changes of one frame at most wait. [s]

    Notes
    -----
    A change that is due just after a frame has started waits for that frame and the pause after it, and then takes a frame of
    its own: 2 t_frame + t_gap. On top come half a timer tick, to which it is rounded, the jitter, and the register's delay.
    """
    controller = controller_of(board)
    waits = controller.frame_gap.max + controller.tick.max / 2 + controller.jitter.max
    return 2 * frame_time(board.chain) + waits + float(board.chain.register_.propagation.max)


def judge_lateness(board: Board) -> Finding:
    """The worst lateness against what the board allows."""
    value, limit = worst_lateness(board), board.limits.lateness
    said = f"an output follows its command within {in_units(value, 's')} at the longest"
    if limit is None:
        said += "; how late it may was not given ([limits] lateness)"
        return chain_finding(board, "pulse-timing", "worst lateness", value, None, "s", said)
    said += f"; {in_units(limit.min, 's')} are allowed"
    margin = (limit.min - value) / limit.min if limit.min else -1.0
    advice = "a faster clock, a shorter pause between frames, or a finer timer tick"
    return chain_finding(
        board,
        "pulse-timing",
        "worst lateness",
        value,
        limit.min,
        "s",
        said,
        margin=margin,
        source=str(limit.origin),
        advice=advice,
    )
