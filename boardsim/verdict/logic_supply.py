"""What the registers take from the logic rail: a regulator's current, and the charge of a frame's edges from each one's capacitor."""

from __future__ import annotations

import itertools
import math
from collections.abc import Iterator, Mapping, Sequence

import numpy as np

from boardsim.board.held_lines import held_lines
from boardsim.board.matrix import Line
from boardsim.board.reader import Board, Channel
from boardsim.firing.schedule import Firing
from boardsim.parts.register import Register
from boardsim.parts.regulator import Regulator
from boardsim.quantities import in_units
from boardsim.verdict.chain_findings import assumed_among, chain_finding, register_name
from boardsim.verdict.chain_loads import steady_currents, together_at_most
from boardsim.verdict.findings import Finding


def judge_supply(board: Board, firing: Firing) -> Iterator[Finding]:
    """A stiff rail's brown-out level, where one was given; a regulator's current; the charge of edges."""
    if isinstance(board.logic, Regulator):
        yield _regulator(board, board.logic, firing)
    elif board.limits.logic_brown_out is not None:
        yield _stiff(board)
    yield from judge_decoupling(board, firing)


def _stiff(board: Board) -> Finding:
    level, rail = board.limits.logic_brown_out, board.logic.voltage
    assert level is not None  # who asks has looked
    limit = level.voltage.max
    return chain_finding(
        board,
        "logic-sag",
        "logic rail voltage",
        rail.min,
        limit,
        "V",
        f"the logic rail is a supply of its own, down to {in_units(rail.min, 'V')}; its brown-out level is {in_units(limit, 'V')}",
        margin=(rail.min - limit) / limit,
        volts=rail.min,
        source=str(level.voltage.origin),
        worse="low",
    )


def _regulator(board: Board, part: Regulator, firing: Firing) -> Finding:
    """The load and what outputs give to the switches that are on together, against what the regulator delivers.

    Notes
    -----
    Ohm's law, steady currents at the highest rail; what charges gates comes from the capacitors. The refill of the output
    capacitor after a dip is no load: there a regulator at its ceiling does what it is there for.
    """
    volts = part.voltage.max
    outputs = together_at_most(board, firing, steady_currents(board, volts))
    total, ceiling = part.load.max + outputs, part.current_ceiling
    said = f"the logic rail feeds {in_units(part.load.max, 'A')} of load and up to {in_units(outputs, 'A')} of outputs, {in_units(total, 'A')} in all; "
    limit = None if ceiling is None else ceiling.min
    said += (
        "the regulator's current ceiling was not given"
        if limit is None
        else f"the regulator gives {in_units(limit, 'A')}"
    )
    return chain_finding(
        board,
        "regulator",
        "current of the logic rail",
        total,
        limit,
        "A",
        said,
        margin=None if limit is None else (limit - total) / limit,
        volts=volts,
        source="" if ceiling is None else str(ceiling.origin),
        advice="a larger regulator, or larger resistors at the switches' inputs",
    )


def clock_charge(register: Register, volts: float) -> float:
    """What a register takes from its supply for one period of its clock, C_PD V. [V] -> [C]

    Notes
    -----
    P_D = C_PD V^2 f_i (NXP 74HC595 rev. 6, table 7, note 6) is that charge, f_i times a second, at V.
    """
    return float(register.power_capacitance.max * volts)


def edge_dip(charge: float, current: float, farads: float, henries: float) -> float:
    """The most that the edges of one frame pull down a capacitor that is fed through an inductance: its first dip. [V]

    Parameters
    ----------
    charge : float
        That they take in all; infinite where they go on taking. [C]
    current : float
        With which they begin, and which does not grow. [A]
    farads, henries : float
        Of the capacitor, and of its way to a rail that is stiff for so short a time. [F], [H]

    Notes
    -----
    min(Q / C, I_0 sqrt(L / C)). Without the way to the rail nothing more than the charge can be taken. With it the voltage is the
    integral of i(s) cos(w (t - s)) / C; while w t < pi a current that never grows makes at most what a lasting one of I_0 does,
    I_0 sin(w t) / (w C) (second mean value theorem), with w = 1 / sqrt(L C). Without losses.

    Examples
    --------
    >>> round(edge_dip(80e-9, 0.3, 100e-9, 20e-9), 4)
    0.1342
    """
    return min(charge / farads, current * math.sqrt(henries / farads))


def judge_decoupling(board: Board, firing: Firing) -> Iterator[Finding]:
    """How far the edges of one frame pull down the supply pin of one register, against what its lines bear.

    Notes
    -----
    What an edge takes is charge: C_PD V for the register's own clock period, and for every output that rises the charge of its
    load; per second that is P_D = C_PD V^2 f_i + sum C_L V^2 f_o (NXP 74HC595 rev. 6, table 7, note 6), over V.
    `edge_dip` bounds the dip that this makes. It must leave the rail above where a line at rest is lost (`held_lines`), and above the
    register's lowest supply. The logic rail's own sag is in it where it is judged at that (`judge_sagged_chain`).
    Ignores the capacitor's own inductance, what falling outputs do to the ground pin, and ringing after the first dip.
    """
    farads = board.chain.decoupling
    if farads is None and not board.logic.derived:
        return
    volts, register = board.logic.voltage.min, board.chain.register_
    charge, current, number = _worst_edge(board, firing, board.logic.voltage.max)
    own = clock_charge(register, board.logic.voltage.max)
    quantity = "dip at a register's supply pin"
    taken = f"register {number + 1}: the edges of one frame take {_charge(own + charge, current)} from its supply pin"
    if farads is None:
        said = f"{taken}; what capacitor stands there was not given ([chain] decoupling)"
        yield chain_finding(board, "decoupling", quantity, 0.0, None, "V", said, volts=volts)
        return
    c, inductance = farads.min, board.chain.supply_inductance
    dip = own / c + edge_dip(charge, current, c, inductance.max)
    # A line whose level is not known, or is lost without any dip, has a finding of its own; the lowest supply holds in any case.
    lost = [line.lost_below for line in held_lines(board) if line.lost_below is not None and line.lost_below < volts]
    least = max([register.supply_low.typ, *lost])
    limit = volts - least
    hangs = assumed_among(
        inductance_of_the_logic_supply=inductance, power_dissipation_capacitance=register.power_capacitance
    )
    said = (
        f"{taken}, which pulls {in_units(c, 'F')} down by at most {in_units(dip, 'V')}; from {in_units(volts, 'V')} down to "
        f"{in_units(least, 'V')}, where {register_name(board)} or a line that is held fails, there are {in_units(limit, 'V')}"
    )
    yield chain_finding(
        board,
        "decoupling",
        quantity,
        dip,
        limit,
        "V",
        said,
        margin=(limit - dip) / limit if limit > 0 else -1.0,
        volts=volts,
        source=str(farads.origin),
        assumed=hangs,
        advice="a larger capacitor at each register, larger gate resistors, or fewer outputs at once",
    )


def _charge(coulombs: float, amperes: float) -> str:
    if math.isfinite(coulombs):
        return f"{in_units(coulombs, 'C')}, up to {in_units(amperes, 'A')} at first,"
    return f"up to {in_units(amperes, 'A')}"


def _worst_edge(board: Board, firing: Firing, volts: float) -> tuple[float, float, int]:
    """Of one register and one latch edge the most that rising outputs take: charge, first current, which. [C], [A]"""
    register: Register = board.chain.register_
    by_register: dict[int, list[Channel | Line]] = {}
    for d in board.drivers:
        by_register.setdefault(d.output // int(register.outputs), []).append(d)
    worst = (0.0, 0.0, 0)
    for number, drivers in by_register.items():
        for together in _rising(firing, drivers).values():
            each = [d.switch.edge_input(volts, register.output_resistance.min) for d in together]
            charge, current = (float(np.sum([one[k] for one in each])) for k in (0, 1))
            if current > worst[1]:
                worst = (charge, current, number)
    return worst


def _rising(firing: Firing, drivers: Sequence[Channel | Line]) -> Mapping[float, list[Channel | Line]]:
    """Whose outputs rise on which latch edge. [s]"""
    found: dict[float, list[Channel | Line]] = {}
    for d in drivers:
        levels = firing.levels[d.output]
        for (_, before), (at, level) in itertools.pairwise(levels):
            if level and not before:
                found.setdefault(at, []).append(d)
    return found
