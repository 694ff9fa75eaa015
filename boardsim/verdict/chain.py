"""Can the chain work at all? Highest clock, set-up and hold at every link, pulse widths, levels, edges, the logic rail."""

from __future__ import annotations

import math
from collections.abc import Iterator, Sequence

from boardsim.board.reader import Board
from boardsim.parts.register import Register
from boardsim.parts.rules import Consequence
from boardsim.quantities import Quantity, apart, in_units
from boardsim.verdict.chain_findings import (
    assumed_among,
    chain_finding,
    register_name,
    share_left,
    where_limits_hold,
)
from boardsim.verdict.chain_levels import judge_edges, judge_levels
from boardsim.verdict.chain_times import ChainTimes, Window, controller_of, supplies_to_judge, times_at
from boardsim.verdict.findings import Finding

_TRY = {
    "set-up": "a slower clock, or a faster family",
    "hold": "SPI mode 0 or 3, or more delay in the data line",
    "high clock pulse": "a slower clock, or less on the clock line",
    "low clock pulse": "a slower clock, or less on the clock line",
    "latch pulse": "a longer latch pulse",
    "latch after clock": "a later latch edge",
}


def judge_chain(board: Board) -> list[Finding]:
    """What holds of the chain whatever is fired: clock, timing, levels, edges, logic rail; each where it is worst."""
    known = all_times(board)
    found = [
        _clock(board, known),
        *_windows(board, known),
        *judge_levels(board),
        *judge_edges(board),
        *_rail(board),
    ]
    return where_limits_hold(board, found)


def all_times(board: Board) -> list[ChainTimes] | None:
    """The chain at every voltage of the logic rail that can be the worst; None where it is not known at one of them."""
    found = [times_at(board, volts) for volts in supplies_to_judge(board)]
    known = [t for t in found if t is not None]
    return known if len(known) == len(found) else None


def worst_windows(known: Sequence[ChainTimes]) -> list[tuple[ChainTimes, Window]]:
    """Of every window the one with the least room, over the voltages of the logic rail."""
    by: dict[tuple[str, str], list[tuple[ChainTimes, Window]]] = {}
    for times in known:
        for window in times.windows:
            by.setdefault((window.what, window.where), []).append((times, window))
    return [min(found, key=lambda one: _room(one[1])) for found in by.values()]


def _room(window: Window) -> float:
    return share_left(window.needed, window.available) if math.isfinite(window.needed) else -math.inf


def _not_known(board: Board) -> str:
    """Why the times of the chain are not known at every voltage of its logic rail."""
    register: Register = board.chain.register_
    name, rail = register_name(board), board.logic.voltage
    if not register.times:
        return f"no table of times of {name} was given"
    if register.family is None:
        return f"no logic family of {name} was given"
    printed = (
        max(register.printed[0], register.family.printed[0]),
        min(register.printed[-1], register.family.printed[-1]),
    )
    lowest, highest = (in_units(volts, "V") for volts in printed)
    reaches = f"from {in_units(rail.min, 'V')} to {in_units(rail.max, 'V')}" if rail.toleranced else f"at {rail}"
    return f"times and levels of {name} are given for {lowest} to {highest}; the logic rail is {reaches}"


def _not_sure(known: Sequence[ChainTimes]) -> str:
    """Which level of the controller the registers do not surely take for what it is."""
    high = any(not math.isfinite(line.rise.late) for times in known for line in (times.clock, times.latch, times.data))
    return f"the controller's {'high level is not surely high' if high else 'low level is not surely low'} for the registers"


def _windows(board: Board, known: Sequence[ChainTimes] | None) -> Iterator[Finding]:
    if known is None:
        said = f"set-up, hold and pulse widths cannot be judged: {_not_known(board)}"
        yield chain_finding(board, "chain-timing", "set-up and hold", 1 / board.chain.clock.max, None, "s", said)
        return
    found = worst_windows(known)
    if any(not math.isfinite(window.needed) for _, window in found):
        said = f"set-up, hold and pulse widths cannot be judged: {_not_sure(known)}"
        period = 1 / board.chain.clock.max
        yield chain_finding(board, "chain-timing", "set-up and hold", period, None, "s", said, margin=math.nan)
        return
    for times, window in found:
        yield _window(board, times, window)
    if controller_of(board).spi_mode == 1:
        said = (
            "in SPI mode 1 the controller changes data at the clock's rising edge, at which the registers take them: every bit "
            "comes one place late"
        )
        yield chain_finding(
            board, "chain-timing", "SPI mode", 1.0, 0.0, "1", said, margin=-1.0, advice="SPI mode 0 or 3"
        )


def _window(board: Board, times: ChainTimes, window: Window) -> Finding:
    chain, register = board.chain, board.chain.register_
    between = window.where == "register to register"
    where = f"{window.where} ({chain.count - 1} links)" if between and chain.count > 2 else window.where
    needed, there = apart(window.needed, window.available, "s")
    said = f"{where}: {window.what} needs {needed} at {in_units(times.volts, 'V')}, and there are {there}"
    hangs = _assumed_in(board, window)
    margin: float | None = _room(window)
    if margin is not None and margin < 0 and window.what == "hold" and _least_is_assumed(board, window):
        # Nobody printed how long data stay at least: that they do not stay long enough is no fact.
        margin = None
        said = (
            f"{where}: hold needs {needed} at {in_units(times.volts, 'V')}; how long data stay at least was not given"
        )
        said += " (shift_delay_least in the register's times)" if between else " ([controller] data_hold)"
    advice = (
        "less on the clock line, or a delay in the data line"
        if between and window.what == "hold"
        else _TRY[window.what]
    )
    return chain_finding(
        board,
        "chain-timing",
        f"{window.what}, {window.where}",
        window.needed,
        None if margin is None else window.available,
        "s",
        said if margin is not None else f"{said}; try: {advice}",
        margin=margin,
        volts=times.volts,
        source=str(register.times[0].setup.origin),
        assumed=hangs,
        advice=advice,
    )


def _least_is_assumed(board: Board, window: Window) -> bool:
    """Whether how long data stay is a number that the tool had to supply."""
    register: Register = board.chain.register_
    if window.where == "register to register":
        return any(row.shift_delay_least is None for row in register.times)
    return controller_of(board).data_hold.assumed()


def _assumed_in(board: Board, window: Window) -> tuple[str, ...]:
    """The assumed numbers that a window hangs on."""
    controller, chain = controller_of(board), board.chain
    named: dict[tuple[str, str], dict[str, Quantity]] = {
        ("set-up", "controller to register 1"): {"data_valid": controller.data_valid},
        ("hold", "controller to register 1"): {"data_hold": controller.data_hold},
        ("latch after clock", "controller to every register"): {"latch_time": chain.latch_time},
        ("latch pulse", "controller to every register"): {"latch_width": controller.latch_width},
    }
    mine = named.get((window.what, window.where), {})
    if window.per_period not in (0.0, 1.0):
        mine = {**mine, "clock_duty": controller.clock_duty}
    found = assumed_among(**mine)
    if (window.what, window.where) == ("hold", "register to register") and _least_is_assumed(board, window):
        found += ("shortest delay from clock to serial output",)
    return found


def highest_clock(times: ChainTimes) -> tuple[float, str]:
    """The highest clock at which everything just fits, and what decides it. [Hz]

    Notes
    -----
    A cascade follows more slowly than one register alone: the serial output of one has to be at the input of the next before
    the next edge, T >= t_pd + t_su, with what the lines add.
    """
    alone = 1 / times.register.alone_up_to
    longest = max(times.windows, key=lambda w: w.shortest_period)
    if longest.shortest_period > alone:
        return 1 / longest.shortest_period, f"{longest.what}, {longest.where}"
    return times.register.alone_up_to, "one register alone"


def _clock(board: Board, known: Sequence[ChainTimes] | None) -> Finding:
    """The set clock against the highest of the cascade; without a table of times against that of one register alone."""
    chain, register = board.chain, board.chain.register_
    clock = chain.clock.max
    said = f"the chain is clocked at {in_units(clock, 'Hz')}; "
    if known is not None:
        slowest = min(known, key=lambda times: highest_clock(times)[0])
        limit, decides = highest_clock(slowest)
        if limit <= 0:
            said += f"how fast it follows cannot be judged: {_not_sure(known)}"
        else:
            said += f"{chain.count} {register_name(board)} follow up to {in_units(limit, 'Hz')} at {in_units(slowest.volts, 'V')} ({decides})"
        return chain_finding(
            board,
            "chain",
            "clock",
            clock,
            limit if limit > 0 else None,
            "Hz",
            said,
            margin=(limit - clock) / limit if limit > 0 else math.nan,
            volts=slowest.volts,
            source=str(register.times[0].setup.origin),
            advice="a slower clock, or a faster family",
        )
    given: Quantity | None = register.highest_clock
    at, rail = register.timing_supply, board.logic.voltage
    slower = given is not None and at is not None and rail.min < at.typ * (1 - 1e-9)
    if given is None or slower:
        return chain_finding(board, "chain", "clock", clock, None, "Hz", said + _how_fast(board))
    margin = (given.typ - clock) / given.typ
    return chain_finding(
        board,
        "chain",
        "clock",
        clock,
        given.typ,
        "Hz",
        said + _how_fast(board),
        margin=margin,
        source=str(given.origin),
    )


def _how_fast(board: Board) -> str:
    """How far a register without a table of times follows its clock."""
    register, name, rail = board.chain.register_, register_name(board), board.logic.voltage
    clock, at = register.highest_clock, register.timing_supply
    if clock is None:
        return _not_known(board) if register.times else f"no highest clock of {name} was given"
    if at is not None and rail.min < at.typ * (1 - 1e-9):
        return (
            f"{name} follows up to {in_units(clock.typ, 'Hz')} from a logic rail of {in_units(at.typ, 'V')} on; down to "
            f"{in_units(rail.min, 'V')}, where it is slower, no highest clock was given"
        )
    return f"one {name} alone follows up to {in_units(clock.typ, 'Hz')}"


def _rail(board: Board) -> Iterator[Finding]:
    """The logic rail against what the register works at and stands."""
    register, name, rail = board.chain.register_, register_name(board), board.logic.voltage
    high, low = register.supply_high, register.supply_low
    ends: tuple[tuple[float, Quantity, str, Consequence], ...] = (
        (rail.max, high, "highest logic rail", "destroy"),
        (rail.min, low, "lowest logic rail", "misbehave"),
    )
    for value, limit, quantity, consequence in ends:
        upper = limit is high
        yield chain_finding(
            board,
            "logic-rail",
            quantity,
            value,
            limit.typ,
            "V",
            f"the logic rail is {'up to' if upper else 'down to'} {in_units(value, 'V')}; {name} works "
            f"{'up to' if upper else 'from'} {in_units(limit.typ, 'V')}",
            margin=(limit.typ - value) / limit.typ if upper else (value - limit.typ) / limit.typ,
            source=str(limit.origin),
            consequence=consequence,
            worse="high" if upper else "low",
        )
