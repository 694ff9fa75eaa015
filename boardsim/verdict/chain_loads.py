"""What the registers' outputs give to the switches: current of each output, and of all of one register that are on together."""

from __future__ import annotations

from collections.abc import Iterator, Mapping

import numpy as np

from boardsim.board.reader import Board
from boardsim.firing.lines import active_levels, on_times
from boardsim.firing.schedule import Firing
from boardsim.parts.family import LogicFamily
from boardsim.quantities import Quantity, in_units
from boardsim.verdict.chain_findings import chain_finding, register_name
from boardsim.verdict.findings import Finding


def judge_loads(board: Board, firing: Firing) -> Iterator[Finding]:
    """Steady output currents against the ratings of a pin and of the supply pins, at the highest logic rail.

    Notes
    -----
    Ohm's law from the rail through the register's output into the switch's input network. What charges a gate, for some
    tens of nanoseconds, is not in it: ratings are those of continuous current. Of each register the outputs that are ever active
    at one time count together. Open-drain outputs are switches themselves: what they sink is judged there.
    """
    if board.chain.register_.open_drain:
        return
    volts, register = board.logic.voltage.max, board.chain.register_
    family: LogicFamily | None = register.family
    each = steady_currents(board, volts)
    if not each:
        return
    worst = max(board.drivers, key=lambda d: each[d.output])
    said = f"{worst.label}: the output of {register_name(board)} gives up to {in_units(each[worst.output], 'A')} to {worst.switch.kind}"
    pin = None if family is None else family.pin_current
    yield _against(board, "current of an output", each[worst.output], pin, "pin_current", said, volts)
    size = register.outputs
    by_register: dict[int, dict[int, float]] = {}
    for output, current in each.items():
        by_register.setdefault(output // size, {})[output] = current
    totals = {k: together_at_most(board, firing, currents) for k, currents in by_register.items()}
    k = max(totals, key=lambda k: totals[k])
    said = f"outputs of register {k + 1} that are on together give up to {in_units(totals[k], 'A')}"
    total = None if family is None else family.total_current
    yield _against(board, "current of all outputs of a register", totals[k], total, "total_current", said, volts)


def steady_currents(board: Board, volts: float) -> dict[int, float]:
    """The highest steady current that each register output gives to its switch at a logic rail. [V] -> [A]"""
    ohms = board.chain.register_.output_resistance.min
    return {d.output: d.switch.steady_input(volts, ohms) for d in board.drivers}


def together_at_most(board: Board, firing: Firing, each: Mapping[int, float]) -> float:
    """The largest sum of the currents of outputs that are active at one time. [A]"""
    active = active_levels(board)
    spans = {output: on_times(firing.levels[output], active[output], firing.duration) for output in each}
    starts = [(float(t), each[output]) for output, rows in spans.items() for t in rows[:, 0]]
    stops = [(float(t), -each[output]) for output, rows in spans.items() for t in rows[:, 1]]
    steps = sorted([*starts, *stops])  # at one time what goes off comes first
    return float(max(np.cumsum([i for _, i in steps]), default=0.0))


def _against(
    board: Board, quantity: str, value: float, rating: Quantity | None, field: str, said: str, volts: float
) -> Finding:
    if rating is None:
        said += f"; what it may was not given ({field} of its logic family)"
        return chain_finding(board, "overcurrent", quantity, value, None, "A", said, volts=volts, consequence="destroy")
    share = board.derating.current
    limit = rating.min * (share.typ if share is not None else 1.0)
    return chain_finding(
        board,
        "overcurrent",
        quantity,
        value,
        limit,
        "A",
        f"{said}; {in_units(limit, 'A')} are allowed",
        margin=(limit - value) / limit,
        volts=volts,
        source=str(rating.origin),
        consequence="destroy",
        advice="larger resistors at the switches' inputs, or fewer channels of one register at once",
    )
