"""Which corners a board is run in: the worst ends of the tolerances that were given."""

from __future__ import annotations

import math
from collections.abc import Iterator

from boardsim.board.reader import Board
from boardsim.parts.base import NOMINAL, T_MODEL, Assumption, Corner
from boardsim.parts.record import Record
from boardsim.quantities import Bound, Quantity, in_units

_INPUT_NAMES = {
    "supply": "supply voltage",
    "coil_resistance": "coil resistance",
    "inductance": "coil inductance",
    "bulk": "bulk capacitance",
    "esr": "bulk series resistance",
    "reservoir": "reservoir's capacitance",
    "reservoir_esr": "reservoir's series resistance",
    "clamp_voltage": "clamp voltage",
    "breakdown": "breakdown voltage",
    "logic": "logic rail",
    "on_resistance": "on-resistance",
    "threshold": "threshold",
    "gate_supply": "gate driver's supply",
    "charge_high": "gate charge of the high transistor",
    "charge_low": "gate charge of the low transistor",
    "gate_resistances": "gate resistances",
    "charging": "charging resistor",
}
_GATES: dict[str, Bound] = {"charge_high": "max", "charge_low": "max", "gate_resistances": "max"}


def _varied(board: Board) -> dict[str, list[Quantity]]:
    """Every number that corners vary, by its key."""
    found: dict[str, list[Quantity]] = {
        "supply": [board.supply.voltage],
        "bulk": [board.bulk.capacitance],
        "esr": [board.bulk.esr],
        "logic": [board.logic.voltage],
    }
    if board.boost is not None:
        found["supply"].append(board.boost.voltage)
        found |= {"reservoir": [board.boost.capacitance], "reservoir_esr": [board.boost.esr]}
    if board.charging is not None:
        found |= {key: [quantity] for key, quantity in board.charging.tolerances().items()}
    for parts in ((c.coil for c in board.channels), *((d.switch, d.clamp) for d in board.drivers)):
        for part in parts:
            for key, quantity in (*part.tolerances().items(), *part.tolerances_too()):
                found.setdefault(key, []).append(quantity)
    return found


def nominal_only(board: Board) -> tuple[str, ...]:
    """Names of the numbers that had no tolerance and so were run at their nominal value."""
    names = [
        _INPUT_NAMES.get(key, key.replace("_", " "))
        for key, found in _varied(board).items()
        if not all(q.toleranced for q in found)
    ]
    return (*names, *(() if board.around else ("winding temperature",)))


def corners(board: Board, shortest: float = math.inf, held: bool = False) -> tuple[Corner, ...]:
    """The corners to run.

    Parameters
    ----------
    board : Board
    shortest : float
        Width of the shortest pulse. [s]
    held : bool
        Whether any pulse is held by a chop.

    Notes
    -----
    Every finding is judged in every corner and reported in its worst, so a corner only has to be the worst for
    something: supply high with cold windings and stiff clamps for voltage, current and power; the same with soft
    clamps and low breakdown for energy and release; supply low with hot windings for pull-in; supply low with cold
    windings for the rail, which then has to feed the most. A coil of high inductance holds the most energy and lets go
    latest, unless pulses end before its current has settled (five times L/R): then the first two are run with low
    inductance as well, which lets the current rise further. A chop's current falls lowest with the supply low, coils hot and low
    inductance. Corners that come out alike are run once.

    Semiconductors are hot in the first and in the third: a Zener then clamps highest, a diode lowest, and a MOSFET's
    on-resistance is largest; they are cold in the others, where breakdown is lowest and a bipolar transistor needs the
    most drive. Hot is the warmest air and `junction_rise`, cold the coldest air. Cold windings with hot junctions do not
    go together for long, which makes the first corner an upper bound.

    Gates are driven hardest with the supply high and weakest with it low; with it high a leg's gates also turn off as late and on as
    early as they may, and in the first corner their thresholds are lowest besides. A boost's reservoir is smallest throughout, which is
    what a burst empties furthest.
    """
    strong: dict[str, Bound] = {"supply": "max", "coil_resistance": "min", "logic": "max", "bulk": "min", "esr": "max"}
    reservoir: dict[str, Bound] = {"reservoir": "min", "reservoir_esr": "max"}
    strong |= {"gate_supply": "max", "opposing_force": "min", "charging": "min", **_GATES, **reservoir}
    weak: dict[str, Bound] = {"supply": "min", "bulk": "min", "esr": "max", "logic": "min", "gate_supply": "min"}
    weak |= reservoir
    weak["charging"] = "max"  # recharges slowest
    # Hot: the least threshold leaks most, the largest on-resistance heats most.
    stiff: dict[str, Bound] = {"clamp_voltage": "max", "breakdown": "max", "on_resistance": "max", "threshold": "min"}
    soft: dict[str, Bound] = {"clamp_voltage": "min", "breakdown": "min"}
    warm, cool = hot_junction(board), cold_junction(board)
    wanted = [
        Corner(
            "supply high, coils cold, clamps high and hot",
            {**strong, **stiff, "inductance": "max"},
            "cold",
            junction=warm,
        ),
        Corner(
            "supply high, coils cold, clamps low and cold",
            {**strong, **soft, "inductance": "max"},
            "cold",
            junction=cool,
        ),
        Corner(
            "supply low, coils hot",
            {**weak, "coil_resistance": "max", "inductance": "max", "on_resistance": "max", "opposing_force": "max"},
            "hot",
            junction=warm,
        ),
        Corner(
            "supply low, coils cold", {**weak, "coil_resistance": "min", "inductance": "min"}, "cold", junction=cool
        ),
    ]
    if shortest < 5 * max(c.coil.inductances[1] / c.coil.resistance.min for c in board.channels):
        high = "supply high, coils cold, low inductance"
        wanted += [
            Corner(f"{high}, clamps high and hot", {**strong, **stiff, "inductance": "min"}, "cold", junction=warm),
            Corner(f"{high}, clamps low and cold", {**strong, **soft, "inductance": "min"}, "cold", junction=cool),
        ]
    if held:
        ends: dict[str, Bound] = {**weak, "coil_resistance": "max", "inductance": "min", "on_resistance": "max"}
        ends |= {"clamp_voltage": "max", "opposing_force": "max"}
        wanted.append(Corner("supply low, coils hot, low inductance", ends, "hot", junction=warm))
    return _distinct(board, wanted)


def slow_rail(board: Board) -> Corner | None:
    """The corner in which a rail that is already too low stays so for longest: the larger bulk capacitance takes the
    supply longer to fill. None where the capacitance has no tolerance.
    """
    if not board.bulk.capacitance.toleranced:
        return None
    ends: dict[str, Bound] = {
        "supply": "min",
        "bulk": "max",
        "esr": "max",
        "coil_resistance": "min",
        "inductance": "min",
        "charging": "max",
    }
    (corner,) = _distinct(
        board,
        [Corner("supply low, coils cold, bulk high", {**ends, "logic": "min"}, "cold", junction=cold_junction(board))],
    )
    return corner


def _distinct(board: Board, wanted: list[Corner]) -> tuple[Corner, ...]:
    """The corners that differ on this board; one nominal corner where none has anything to vary."""
    has_tolerance = {key: any(q.toleranced for q in found) for key, found in _varied(board).items()}
    distinct: dict[tuple[object, ...], Corner] = {}
    for corner in wanted:
        ends = {k: v for k, v in corner.ends.items() if has_tolerance.get(k)}
        winding = corner.winding if board.around else "reference"
        alike = (tuple(sorted(ends.items())), winding, corner.junction)
        distinct.setdefault(alike, Corner(corner.name, ends, winding, _air(board), corner.junction))
    only = tuple(distinct.values())
    return only if any(c.ends or c.winding != "reference" for c in only) else (NOMINAL,)


def hot_junction(board: Board) -> float:
    """The temperature of semiconductors that have warmed up in the warmest air; 25 degC where no ambient was given. [K]"""
    return T_MODEL if board.around is None else board.around.ambient_high + board.around.junction_rise


def cold_junction(board: Board) -> float:
    """The temperature of semiconductors in the coldest air; 25 degC where no ambient was given. [K]"""
    return T_MODEL if board.around is None else board.around.ambient_low


def _air(board: Board) -> float:
    """The warmest air, from which junction temperatures count in every corner. [K]

    Coils that are cold draw most and heat the semiconductors most; on a hot day they are cold at switch-on only, which
    makes the sum of both an upper bound.
    """
    return T_MODEL if board.around is None else board.around.ambient_high


def not_varied(board: Board) -> tuple[Assumption, ...]:
    """Tolerances that were given but that no corner varies, so that nobody takes them for covered."""
    used = [q for found in _varied(board).values() for q in found]
    # Judged at their worse end, or only read as a band.
    used += [board.chain.clock, board.chain.register_.times_hold_at, *(q for _, q in _of_the_chain(board))]
    used += [q for q in (board.supply.current_ceiling,) if q is not None]
    for channel in board.channels:
        coil = channel.coil
        used += [q for q in (coil.pull_in, coil.release, coil.hold, coil.longest_on, coil.least_off) if q is not None]
        used += coil.taken_at_ends()
    parts: list[tuple[str, Record]] = [
        ("supply", board.supply),
        ("cable", board.cable),
        ("bulk capacitor", board.bulk),
        ("chain", board.chain),
    ]
    for channel in board.channels:
        parts += [(f"coil {channel.coil_name}", channel.coil)]
        parts += [("series diode", channel.diode)] if channel.diode is not None else []
    if board.boost is not None:
        parts += [("boost", board.boost)]
        used += [q for q in (board.boost.least,) if q is not None]
    for driver in board.drivers:
        parts += [("switch", driver.switch), ("clamp", driver.clamp)]
        used += driver.switch.taken_at_ends()
    found = {
        Assumption(
            part,
            name.replace("_", " "),
            in_units(q.typ, q.unit),
            "its tolerance is not varied; the typical value, or what a vendor's model of the part has, is used",
        ): None
        for part, record in parts
        for name, q in _quantities(record)
        if q.toleranced and not any(q is u for u in used)
    }
    return tuple(found)


def _of_the_chain(board: Board) -> Iterator[tuple[str, Quantity]]:
    """Numbers of the chain's lines and of its register's tables, which are judged at their worse ends."""
    chain = board.chain
    for record in (chain.data_line, chain.clock_line, chain.latch_line, chain.register_.family, *chain.register_.times):
        if record is not None:
            yield from _quantities(record)


def _quantities(record: Record) -> Iterator[tuple[str, Quantity]]:
    """Every number of a record and of the records in it."""
    for name, value in record:
        for item in value if isinstance(value, tuple) else (value,):
            if isinstance(item, Quantity):
                yield name, item
            elif isinstance(item, Record):
                for inner, quantity in _quantities(item):
                    title = getattr(item, "title", None)
                    yield f"{title} {inner}" if title else inner, quantity
