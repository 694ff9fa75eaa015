"""What the registers' outputs give to the switches: current of each output, and of all of one register that are on together."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np

from boardsim.board.reader import Board, Channel
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
    tens of nanoseconds, is not in it: ratings are those of continuous current. Of each register the channels that are ever on
    at one time count together. Open-drain outputs are switches themselves: what they sink is judged there.
    """
    if board.chain.register_.open_drain:
        return
    volts, register = board.logic.voltage.max, board.chain.register_
    family: LogicFamily | None = register.family
    each = {c.number: c.switch.steady_input(volts, register.output_resistance.min) for c in board.channels}
    if not each:
        return
    worst = max(board.channels, key=lambda c: each[c.number])
    said = f"{worst.label}: the output of {register_name(board)} gives up to {in_units(each[worst.number], 'A')} to {worst.switch.kind}"
    pin = None if family is None else family.pin_current
    yield _against(board, "current of an output", each[worst.number], pin, "pin_current", said, volts)
    size = register.outputs
    by_register: dict[int, list[Channel]] = {}
    for c in board.channels:
        by_register.setdefault(c.output // size, []).append(c)
    totals = {k: together_at_most(firing, channels, each) for k, channels in by_register.items()}
    k = max(totals, key=lambda k: totals[k])
    said = f"outputs of register {k + 1} that are on together give up to {in_units(totals[k], 'A')}"
    total = None if family is None else family.total_current
    yield _against(board, "current of all outputs of a register", totals[k], total, "total_current", said, volts)


def together_at_most(firing: Firing, channels: list[Channel], each: dict[int, float]) -> float:
    """The largest sum of the currents of channels that are on at one time. [A]"""
    starts = [(float(t), each[c.number]) for c in channels for t in firing.on[c.number][:, 0]]
    stops = [(float(t), -each[c.number]) for c in channels for t in firing.on[c.number][:, 1]]
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
