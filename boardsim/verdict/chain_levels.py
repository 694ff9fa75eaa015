"""Logic levels at every link, what the inputs bear, how fast clock and latch rise, and what holds lines that float."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

from boardsim.board.reader import Board
from boardsim.parts.family import LogicFamily
from boardsim.quantities import apart, in_units
from boardsim.verdict.chain_findings import assumed_among, chain_finding, register_name
from boardsim.verdict.chain_times import controller_of, controller_supply, lines_at, loaded, supplies_to_judge
from boardsim.verdict.findings import Finding, severity

_FIRST, _ON = "from the controller", "from register to register"


def judge_levels(board: Board) -> list[Finding]:
    """High and low level at every link, and the highest voltage at an input, each at its worst logic rail.

    Notes
    -----
    A high output gives its supply less the drop of its data sheet, a low one what that prints. A link works where the
    high level is at least V_IH and the low one at most V_IL of the register's family, at every voltage of both supplies;
    the noise margin that is left (JEDEC JESD7A) is the margin as a share of V_IH or V_IL.
    """
    family: LogicFamily | None = board.chain.register_.family
    if family is None:
        said = (
            f"no logic family of {register_name(board)} was given: whether it understands the controller is not known"
        )
        return [chain_finding(board, "logic-level", "logic levels", board.logic.voltage.typ, None, "V", said)]
    found: dict[tuple[str, str], Finding] = {}
    for volts in supplies_to_judge(board):
        for f in _levels(board, family, volts):
            key = (f.check, f.quantity)
            if key not in found or severity(f) < severity(found[key]):
                found[key] = f
    return list(found.values())


def _levels(board: Board, family: LogicFamily, volts: float) -> Iterator[Finding]:
    levels = family.input_levels(volts)
    if levels is None:
        said = f"{register_name(board)}: {_levels_elsewhere(board, family, volts)}"
        yield chain_finding(board, "logic-level", "logic levels", volts, None, "V", said, volts=volts)
        return
    yield from _from_controller(board, family, volts, levels)
    if board.chain.count > 1:
        sources = (str(family.inputs[0].low.origin),) * 2
        yield _high(board, volts, levels[1], _Given(volts - family.high_drop.max), _ON, "a register", sources[0])
        yield _low(board, volts, levels[0], _Given(family.low_output.max), _ON, "a register", sources[1])


@dataclass(frozen=True)
class _Given:
    """A level that the controller gives at the inputs: how high [V], on which line, and what it hangs on."""

    volts: float
    where: str = ""
    assumed: tuple[str, ...] = ()


def _given(board: Board, volts: float, high: bool) -> _Given | None:
    """The controller's lowest high level, or its highest low one, of all lines; None where it was not given.

    Parameters
    ----------
    volts : float
        The logic rail. [V]
    high : bool
        Which of the two.

    Notes
    -----
    Levels are printed for a load. A pull resistor R_p that loads the pin no more leaves the printed level behind the resistor R_s
    in series: the current (V - V_pull) / (R_s + R_p) drops across R_s only. Under a heavier load the pin is its output
    resistance, and the level what Ohm's law leaves; where the printed one is worse still that counts.
    """
    controller, chain = controller_of(board), board.chain
    printed = controller.high_drop if high else controller.low_output
    if printed is None:
        return None
    lowest, _ = controller_supply(board, volts)
    level = lowest - printed.max if high else printed.max
    found = []
    for name, line in (("data", chain.data_line), ("clock", chain.clock_line), ("latch", chain.latch_line)):
        pull = line.pull_down if high else line.pull_up
        if pull is None:  # a pull towards the level only helps
            found.append(_Given(level))
            continue
        end = 0.0 if high else volts
        load = abs(level - end) / (line.series.max + pull.min)
        behind = level + (end - level) * line.series.max / (line.series.max + pull.min)
        where = f" on the {name} line, which {in_units(pull.typ, 'ohm')} pull {'down' if high else 'up'}"
        hangs = {"load_of_the_printed_levels": controller.level_current}
        if load > controller.level_current.min:
            supply, floor, _ = loaded(board, line, volts)
            behind = min(behind, supply[0]) if high else max(behind, floor[1])
            hangs["output_resistance_of_the_controller"] = controller.resistance
        found.append(_Given(behind, where, assumed_among(**hangs)))
    return (min if high else max)(found, key=lambda g: g.volts)


def _from_controller(board: Board, family: LogicFamily, volts: float, levels: tuple[float, float]) -> Iterator[Finding]:
    controller, name = controller_of(board), register_name(board)
    _, highest = controller_supply(board, volts)
    low, high = levels
    source = str(family.inputs[0].low.origin)
    given = _given(board, volts, high=True)
    if given is None:
        said = (
            f"{name} takes {in_units(high, 'V')} and more for high at a logic rail of {in_units(volts, 'V')}; how far the "
            "controller's high level stays below its supply was not given ([controller] high_drop)"
        )
        yield chain_finding(board, "logic-level", "high level that the inputs need", high, None, "V", said, volts=volts)
    else:
        yield _high(board, volts, high, given, _FIRST, "the controller", source)
    given = _given(board, volts, high=False)
    if given is None:
        said = (
            f"{name} takes {in_units(low, 'V')} and less for low at a logic rail of {in_units(volts, 'V')}; the controller's "
            "low level was not given ([controller] low_output)"
        )
        yield chain_finding(
            board, "logic-level", "low level that the inputs need", low, None, "V", said, volts=volts, worse="low"
        )
    else:
        yield _low(board, volts, low, given, _FIRST, "the controller", source)
    if controller.voltage is not None:  # on the registers' own supply it cannot be above it
        yield _too_high(board, family, volts, highest)


def _high(board: Board, volts: float, needed: float, level: _Given, where: str, who: str, source: str) -> Finding:
    given = level.volts
    reading, limit = apart(given, needed, "V")
    said = (
        f"{who} gives a high level of {reading} at least{level.where}; at a logic rail of {in_units(volts, 'V')} {register_name(board)} "
        f"takes {limit} and more for high"
    )
    advice = "a family with TTL levels (HCT, AHCT), a level shifter, or registers on the controller's supply"
    advice = f"a larger pull resistor; {advice}" if level.where else advice
    margin = (given - needed) / needed
    return chain_finding(
        board,
        "logic-level",
        f"high level {where}",
        given,
        needed,
        "V",
        said,
        margin=margin,
        volts=volts,
        source=source,
        worse="low",
        assumed=level.assumed,
        advice=advice,
    )


def _low(board: Board, volts: float, needed: float, level: _Given, where: str, who: str, source: str) -> Finding:
    given = level.volts
    reading, limit = apart(given, needed, "V")
    said = (
        f"{who} gives a low level of {reading} at most{level.where}; at a logic rail of {in_units(volts, 'V')} {register_name(board)} takes "
        f"{limit} and less for low"
    )
    return chain_finding(
        board,
        "logic-level",
        f"low level {where}",
        given,
        needed,
        "V",
        said,
        margin=(needed - given) / needed,
        volts=volts,
        source=source,
        assumed=level.assumed,
        advice="less load on the line, such as a larger pull resistor, or a stronger driver",
    )


def _too_high(board: Board, family: LogicFamily, volts: float, highest: float) -> Finding:
    """Whether the controller's unloaded high level is more than an input bears.

    An input with a diode to the supply is judged by how far it is above that, one without by the voltage itself.
    """
    name = register_name(board)
    said = f"the controller's pins are at up to {in_units(highest, 'V')}; "
    rating, above = family.input_rating, family.above_supply
    limit = rating.min if rating is not None else above.min if above is not None else None
    value = highest if above is None else max(highest - volts, 0.0)
    if limit is None:
        said += f"what an input of {name} bears was not given (above_supply or input_rating of its logic family)"
    elif above is not None:
        said += f"an input of {name} bears {in_units(limit, 'V')} above its logic rail of {in_units(volts, 'V')}"
    else:
        said += f"an input of {name} bears {in_units(limit, 'V')}"
    source = rating if rating is not None else above
    return chain_finding(
        board,
        "overvoltage",
        "input voltage from the controller" if above is None else "input voltage above the logic rail",
        value,
        limit,
        "V",
        said,
        margin=None if limit is None else (limit - value) / limit,
        volts=volts,
        source=str(source.origin) if source is not None else "",
        consequence="destroy",
        advice="a family whose inputs bear more (AHC, LV), or a level shifter",
    )


def judge_edges(board: Board) -> Iterator[Finding]:
    """Rise time of clock and latch, which every register loads: the controller's fan-out.

    Notes
    -----
    2.2 R C from 10 % to 90 %. A clock input that passes its threshold too slowly may count one edge as several.
    """
    family: LogicFamily | None = board.chain.register_.family
    rail = board.logic.voltage
    limits = [] if family is None else [(family.slowest_edge(v), v) for v in supplies_to_judge(board)]
    known = [(limit, v) for limit, v in limits if limit is not None]
    limit, volts = min(known) if known and len(known) == len(limits) else (None, rail.max)
    for which, line in (("clock", board.chain.clock_line), ("latch", board.chain.latch_line)):
        lines = lines_at(board, volts)
        if lines is None:
            continue  # said already: levels are not known
        driven = lines[0] if which == "clock" else lines[1]
        quantity = f"rise time of the {which} line"
        n = board.chain.count
        said = (
            f"{n} {'register loads' if n == 1 else 'registers load'} the {which} line with {in_units(driven.capacitance, 'F')}: "
            f"it rises in {in_units(driven.full_edge, 's')}; "
        )
        hangs = assumed_among(
            output_resistance_of_the_controller=controller_of(board).resistance,
            **{f"capacitance_of_the_{which}_line": line.capacitance},
        )
        if limit is None:
            said += f"how slowly it may was not given for {register_name(board)}"
            yield chain_finding(
                board, "fan-out", quantity, driven.full_edge, None, "s", said, volts=volts, assumed=hangs
            )
            continue
        assert family is not None  # a limit comes from one
        yield chain_finding(
            board,
            "fan-out",
            quantity,
            driven.full_edge,
            limit,
            "s",
            f"{said}{in_units(limit, 's')} are allowed",
            margin=(limit - driven.full_edge) / limit,
            volts=volts,
            source=str(family.edges[0].slowest.origin),
            assumed=hangs,
            advice="a buffer, fewer registers on the line, or less resistance at the driver",
        )


def _not_known(board: Board, volts: float) -> str:
    """Why it is not known what the inputs' leakage does to a line at a logic rail. [V]"""
    family: LogicFamily | None = board.chain.register_.family
    name = register_name(board)
    if family is None:
        return f"no logic family of {name} was given, so that leakage and levels of its inputs are not known"
    if family.input_levels(volts) is None:
        return _levels_elsewhere(board, family, volts)
    return f"what an input of {name} leaks was not given (input_leakage of its logic family)"


def _levels_elsewhere(board: Board, family: LogicFamily, volts: float) -> str:
    printed = f"{in_units(family.printed[0], 'V')} to {in_units(family.printed[-1], 'V')}"
    return f"input levels of {family.title or 'its family'} are given for {printed} only, not at a logic rail of {in_units(volts, 'V')}"


def judge_floating(board: Board) -> Iterator[Finding]:
    """Clock and latch while the controller's pins float: a pull resistor has to hold them against all leakage.

    Notes
    -----
    Ohm's law: the leakage of the pin and of all inputs through the resistor moves the line away from where it is held. It
    must stay at most at V_IL, or at least at V_IH. Without any resistor the line takes any level, and noise may clock or latch.
    """
    controller, family = controller_of(board), board.chain.register_.family
    if controller.at_reset != "floating":
        return
    for which, line in (("clock", board.chain.clock_line), ("latch", board.chain.latch_line)):
        quantity = f"{which} line while the controller's pins float"
        resistor = line.pull_down or line.pull_up
        if resistor is None:
            said = (
                f"nothing was given that holds the {which} line until the firmware sets its pin "
                f"([chain] {which}_line = {{ pull_down = ... }})"
            )
            yield chain_finding(board, "floating-line", quantity, 0.0, None, "V", said)
            continue
        found = []
        for volts in supplies_to_judge(board):
            levels = board.chain.register_.input_levels(volts)
            if levels is None or family is None or family.input_leakage is None:
                said = f"the {which} line is held by {resistor}; {_not_known(board, volts)}"
                found.append(chain_finding(board, "floating-line", quantity, 0.0, None, "V", said, volts=volts))
                continue
            leak = controller.pin_leakage.max + board.chain.count * family.input_leakage.max
            moved = leak * resistor.max
            down = resistor is line.pull_down
            limit = levels[0] if down else volts - levels[1]
            way = "up from ground" if down else "down from the logic rail"
            said = (
                f"leakage of {in_units(leak, 'A')} moves the {which} line {in_units(moved, 'V')} {way} while the controller's pins "
                f"float; {in_units(limit, 'V')} are allowed"
            )
            found.append(
                chain_finding(
                    board,
                    "floating-line",
                    quantity,
                    moved,
                    limit,
                    "V",
                    said,
                    margin=(limit - moved) / limit,
                    volts=volts,
                    source=str(family.inputs[0].low.origin),
                    assumed=assumed_among(leakage_of_the_pin=controller.pin_leakage),
                    advice="a smaller pull resistor",
                )
            )
        yield min(found, key=severity)
