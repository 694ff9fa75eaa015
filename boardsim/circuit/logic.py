"""The logic rail in a deck: a node that hangs on the coil rail, outputs that follow it, and what a dip of it is held against."""

from __future__ import annotations

from collections.abc import Iterator

from boardsim.board.held_lines import held_lines, least_pulse
from boardsim.board.reader import Board
from boardsim.circuit.deck import PlacedRule
from boardsim.parts.base import Corner, Stamp, listed
from boardsim.parts.clocked import held, level, output_pin
from boardsim.parts.diode import forward_parameters
from boardsim.parts.elements import (
    GROUND,
    Capacitor,
    Drive,
    Element,
    Junction,
    Model,
    Probe,
    Resistor,
    VoltageLaw,
    voltage,
)
from boardsim.parts.register import Register
from boardsim.parts.regulator import Regulator
from boardsim.parts.rules import FallRule, Limit
from boardsim.parts.temperature import in_celsius

LOGIC = "logic_rail"
_CLEAR, _CLEAR_SHARE = "line_clear_held", "clear_share"
_NO_RAIL = 0.01  # [V], a rail so low that nothing is asked of clear any more
_INPUT_DIODE = ((0.7, 0.01), (1.0, 0.02))  # [V], [A]
_DIODE_WHY = "from memory: data sheets print 20 mA as its rating"


def regulated(board: Board, corner: Corner, rail: str) -> Stamp:
    """The regulator between the coil rail's node and LOGIC.

    Raises
    ------
    TypeError
        If the board's logic rail is a supply of its own.
    """
    part = board.logic
    if not isinstance(part, Regulator):
        raise TypeError("a logic rail of its own has no regulator")
    return part.stamp(rail, LOGIC, corner)


def known_output(register: Register, name: str, output: int, points: tuple[tuple[float, float], ...]) -> Stamp:
    """An output whose bits are known, as shares of a logic rail that is a node: it follows the rail, and loads it."""
    bits = Drive(held(output), held(output), GROUND, points)
    return Stamp(elements=(bits, *output_pin(register, name, name, output, LOGIC, loads_rail=True)))


def clear_line(board: Board, corner: Corner) -> Stamp:
    """Clear where a pull-up alone holds it: its capacitor is emptied by a dip, and lags behind the rail's recovery.

    Notes
    -----
    C dv/dt = (v_CC - v) / R - i_D: through the pull-up, and faster through the diode from every register's input to its supply,
    where its inputs have one. What is read is the line as a share of the lowest voltage that is surely high at the rail of
    that moment: below 1 the shift stages may be cleared.
    """
    line, register = board.chain.clear, board.chain.register_
    if line is None or line.pin or line.pull_up is None or register.family is None:
        return Stamp()
    count = board.chain.count
    own = count * register.input_capacitance.typ
    farads = own + (line.capacitance.max if line.capacitance is not None else 0.0)
    elements: list[Element] = [
        Resistor(_CLEAR, LOGIC, _CLEAR, line.pull_up.max),
        Capacitor(_CLEAR, _CLEAR, GROUND, farads),
        VoltageLaw(
            _CLEAR_SHARE,
            _CLEAR_SHARE,
            GROUND,
            f"V({_CLEAR})/max({level(register, LOGIC, 'high')},{_NO_RAIL!r})",
        ),
    ]
    numbers = listed("register", input_capacitance=register.input_capacitance)
    if register.family.above_supply is not None:
        i_s, n, r_s = forward_parameters(_INPUT_DIODE)
        figures = {"IS": i_s * count, "N": n, "RS": r_s / count, "TNOM": in_celsius(corner.junction)}
        elements.append(Junction(_CLEAR, _CLEAR, LOGIC, Model("clear_diode_m", "D", figures)))
    return Stamp(
        elements=tuple(elements), probes=(Probe("clear_share", voltage(_CLEAR_SHARE), "1"),), assumptions=numbers
    )


def logic_rules(board: Board) -> Iterator[PlacedRule]:
    """What a dip of a logic rail that hangs on the coil rail is held against: the controller's reset, and every line at rest."""
    part = board.logic.title or board.logic.kind
    yield PlacedRule(_reset_rule(board), None, part, "logic rail")
    for rule in _edge_rules(board):
        yield PlacedRule(rule, None, board.chain.register_.title or "register", "chain")


def _reset_rule(board: Board) -> FallRule:
    given = board.limits.logic_brown_out
    limit = Limit.of(
        given.voltage if given else None, "brown-out level", "V", None, given.voltage.max if given else None
    )
    return FallRule(
        "logic-sag",
        "v_logic",
        limit,
        given.lasting.min if given else 0.0,
        "logic rail voltage",
        "the controller resets",
        "fewer channels at once, a larger capacitor behind the regulator, or a lower dropout",
        _guard(board, limit.value),
        unknown="no brown-out level was given to hold it against ([limits] logic_brown_out)",
    )


def _guard(board: Board, level: float | None) -> float:
    """The guard band above a level, at most half of the way to the rail at rest: that is no dip, however near it lies. [V] -> [1]"""
    guard = board.limits.guard_band.typ
    return guard if level is None else min(guard, 0.5 * (board.logic.voltage.min - level) / level)


def _edge_rules(board: Board) -> Iterator[FallRule]:
    """One for each line, at the level that is lost first; none for a line that its own rail ties, or that is lost anyway."""
    advice = "a supply of its own for the registers, a larger capacitor behind the regulator, or fewer channels at once"
    for line in held_lines(board):
        if line.lost_below is not None and line.lost_below >= board.logic.voltage.min:
            continue  # its level is wrong before anything is fired: the chain's levels say so
        limit = Limit(
            line.lost_below, "V", None, str(board.logic.voltage.origin), f"rail at which a {line.rests} level is lost"
        )
        happens = f"the {line.name} line, held {line.rests}, may have an edge that nobody commanded"
        yield FallRule(
            "uncommanded-edge",
            "v_logic",
            limit,
            line.lasting,
            f"logic rail that holds the {line.name} line",
            happens,
            advice,
            _guard(board, limit.value),
            doubtful=True,
            unknown=line.unknown,
            floor=line.floor,
        )
    clear, register = board.chain.clear, board.chain.register_
    if clear is None or clear.pin or clear.pull_up is None:
        return
    known = register.family is not None
    yield FallRule(
        "uncommanded-edge",
        "clear_share" if known else "v_logic",
        Limit(
            1.0 if known else None,
            "1" if known else "V",
            None,
            str(board.logic.voltage.origin),
            "level that is surely high",
        ),
        least_pulse(register, "clear", board.logic.voltage.min),
        "clear line as a share of its high level",
        "the shift stages may be cleared",
        "a smaller capacitor or pull-up at clear, or a controller pin that holds it",
        board.limits.guard_band.typ,
        doubtful=True,
        unknown="no logic family of the registers was given",
    )
