"""Board, output edges and a corner -> deck."""

from __future__ import annotations

import itertools
from collections.abc import Callable
from dataclasses import replace
from functools import partial
from typing import Literal

from boardsim.board.boost import feeds
from boardsim.board.matrix import LINES_FROM, Line
from boardsim.board.reader import Board, Channel
from boardsim.circuit.boost import BANK, OPEN, add_boost, closed_points
from boardsim.circuit.bridge import add_bridge_channel, drawn
from boardsim.circuit.build import Builder
from boardsim.circuit.deck import Deck, PlacedRule, Window
from boardsim.circuit.drivers import add_driver, refuse_too_short
from boardsim.circuit.enable import letting_go, logic_source
from boardsim.circuit.logic import LOGIC, clear_line, known_output, logic_rules, regulated
from boardsim.circuit.matrix import add_crossing, add_line
from boardsim.circuit.packages import of_package, of_sum
from boardsim.circuit.serial import Frames, busy, serial_lines
from boardsim.errors import InputError
from boardsim.firing.registers import ChainState, send
from boardsim.firing.schedule import Firing
from boardsim.parts.base import Assumption, Corner, Stamp
from boardsim.parts.clocked import Contents, Nets, comparator, flip_flops, output_pin
from boardsim.parts.elements import GROUND, Drive, Element, Port, Signal, VoltageLaw, plus
from boardsim.parts.rules import DipRule, HeatRule, Limit, PeakRule, Rule, SumRule, TogetherRule
from boardsim.quantities import Quantity

RAIL = "rail"
SUPPLY = "supply_out"

Detail = Literal["edges", "clocked"]
"""Registers as known edges on their outputs, or flip-flop by flip-flop; the same edges either way."""
MOST_CLOCKED = 50_000
"""Clock edges times channels that are worth a circuit: about ten seconds for a run, from measurements on 24 channels."""

STOPS = 16
"""Steps at least, while a switch that is slow follows an edge."""

Outputs = Callable[[Channel | Line], Stamp]
"""What drives the pin of a channel's switch, or of a line's."""


def windows(board: Board, firing: Firing) -> tuple[Window, ...]:
    """The stretches of time to run: so far one, with every channel in it."""
    return (Window(0.0, firing.duration, tuple(c.number for c in board.channels)),)


def gate_points(
    levels: tuple[tuple[float, bool], ...], window: Window, volts: float, edge: float
) -> tuple[tuple[float, float], ...]:
    """A register output as straight lines.

    Parameters
    ----------
    levels : tuple of (time, level)
        From `Firing.levels`. [s]
    window : Window
        Times before it only set the first level.
    volts, edge : float
        High level [V] and how long an edge takes [s].

    Returns
    -------
    tuple of (time, voltage)
        Relative to the window's start. [s], [V]
    """
    before = [level for t, level in levels if t <= window.start]
    points = [(0.0, volts * before[-1])]
    for t, level in levels:
        if window.start < t < window.stop:
            at = max(t - window.start, points[-1][0] + 1e-12)
            points += [(at, points[-1][1]), (at + edge, volts * level)]
    points.append((window.stop - window.start + edge, points[-1][1]))
    return tuple(points)


def looked_at(
    points: tuple[tuple[float, float], ...], lasting: float, moments: tuple[float, ...] = ()
) -> tuple[tuple[float, float], ...]:
    """The same straight lines with further points after each edge, at every one of which ngspice makes a step.

    Parameters
    ----------
    points : tuple of (time, voltage)
        [s], [V]
    lasting : float
        How long after an edge. [s]; 0 leaves the points as they are
    moments : tuple of float
        Further times after an edge. [s]

    Notes
    -----
    Its own estimate of the error lets ngspice step over most of what a slow gate does after its edge, and so miss a tenth of the
    energy that its transistor takes meanwhile.
    """
    if lasting <= 0 and not moments:
        return points
    steps = sorted({*(lasting * k / STOPS for k in range(1, STOPS + 1) if lasting > 0), *moments})
    clear = lasting / STOPS / 2 if lasting > 0 else steps[0] / 2  # of the next edge
    found: list[tuple[float, float]] = []
    for (t, volts), (then, _) in itertools.pairwise(points):
        found.append((t, volts))
        if found[:-1] and found[-2][1] != volts:
            found += [(t + step, volts) for step in steps if t + step < then - clear]
    return (*found, points[-1])


class Assembly:
    """What the stamps add up to."""

    def __init__(self) -> None:
        self.builder = Builder()
        self.signals: dict[tuple[int | None, str], Signal] = {}
        self.units: dict[tuple[int | None, str], str] = {}
        self.ports: list[tuple[int | None, str, Port]] = []
        self.rules: list[PlacedRule] = []
        self.assumptions: dict[Assumption, None] = {}
        self.assumed: dict[int | None, dict[str, None]] = {}
        self.rest: dict[str, float] = {}
        self.totals: dict[tuple[str, str, SumRule, str], list[tuple[int, Signal]]] = {}
        self.heats: dict[tuple[str, str], list[tuple[int, HeatRule]]] = {}
        self.commons: dict[str, str] = {}
        self.together: dict[tuple[str, str, TogetherRule], list[int]] = {}

    def add(self, stamp: Stamp, channel: int | None, part: str, label: str, package: str = "") -> None:
        """Add one part's stamp at its place on the board, and those of what is inside it."""
        self.builder.add(stamp.elements)
        for probe in stamp.probes:
            self.signals[channel, probe.quantity] = probe.signal
            self.units[channel, probe.quantity] = probe.unit
        self.ports += [(channel, label, port) for port in stamp.ports]
        self.rules += [PlacedRule(rule, channel, part, label) for rule in stamp.rules]
        self.assumptions.update(dict.fromkeys(stamp.assumptions))
        names = self.assumed.setdefault(channel, {})
        names.update(dict.fromkeys(f"{a.part} {a.quantity}" for a in stamp.assumptions))
        self.rest.update(stamp.rest)
        for quantity, more in stamp.joins:
            self.signals[channel, quantity] = plus(self.signals[channel, quantity], more)
        for total in stamp.totals:
            if channel is None:
                continue
            if isinstance(total.rule, HeatRule):
                self.heats.setdefault((package, total.rule.part or part), []).append((channel, total.rule))
            elif isinstance(total.rule, TogetherRule):
                self.together.setdefault((package, part, total.rule), []).append(channel)
            else:
                self.totals.setdefault((package, part, total.rule, total.unit), []).append((channel, total.signal))
        for name, inner in stamp.inside:
            self.add(inner, channel, name, label, package)

    def add_common(self, channel: Channel | Line, b: str, corner: Corner) -> str:
        """Where a channel's clamp ends: at node `b`, or at what its package has in common, which is added once."""
        package = channel.package or channel.label
        node = self.commons.get(package, f"common{len(self.commons)}")
        shared = channel.clamp.common(node, node, b, corner)
        if shared is None:
            return b
        if package not in self.commons:
            self.commons[package] = node
            self.add(of_package(shared, package), None, f"{channel.clamp.kind} clamp", package)
        return node

    def add_totals(self) -> None:
        """The sums over each package, and their rules."""
        for (package, part, rule, unit), shares in self.totals.items():
            quantity, whole_sum = of_sum(rule, package)
            self.signals[None, quantity] = plus(*(signal for _, signal in shares))
            self.units[None, quantity] = unit
            self.rules.append(PlacedRule(whole_sum, None, part, package))
        for (package, part), heated in self.heats.items():
            # A package heats by its switches and by what else of it is used, such as its clamp diodes.
            powers = tuple(dict.fromkeys(pair for _, rule in heated for pair in rule.powers))
            channels = tuple(dict.fromkeys(channel for channel, _ in heated))
            whole = replace(heated[0][1], powers=powers, channels=channels)
            self.rules.append(PlacedRule(whole, None, part, package))
        for (package, part, taken), members in self.together.items():
            self.rules.append(PlacedRule(replace(taken, channels=tuple(members)), None, part, package))


def assemble(board: Board, firing: Firing, corner: Corner, window: Window, detail: Detail = "edges") -> Deck:
    """Assemble the deck of one window in one corner.

    Raises
    ------
    InputError
        If the pattern is too long for clocked registers, or has pulses too short for the models of switches.
    """
    refuse_too_short(board, firing)
    parts = Assembly()
    add_rail(parts, board, corner, closed=closed_points(board, firing.held, window))
    if board.logic.derived:
        add_logic(parts, board, corner)
        parts.add(clear_line(board, corner), None, "clear line", "chain")
    elif firing.held.let_go and detail == "edges":
        parts.add(logic_source(board, corner), None, "logic rail", "chain")
    outputs: Outputs = partial(_known_edges, board, firing, corner, window)
    frames: Frames = ()
    if detail == "clocked":
        refuse_too_many(board, firing)
        frames = [(start - window.start, image) for start, image in firing.sent if start >= window.start]
        before = [image for start, image in firing.sent if start < window.start]
        outputs = _clocked(parts, board, frames, before[-1] if before else 0, corner, window)
    add_loads(parts, board, corner, outputs, window)
    deck = finished(parts, board, corner, window)
    stretches = tuple((a + window.start, b + window.start) for a, b in busy(frames, board.chain))
    return replace(deck, digital=detail == "clocked", clocked=stretches)


def add_loads(parts: Assembly, board: Board, corner: Corner, outputs: Outputs, window: Window) -> None:
    """Lines, and the channels of a window."""
    for line in board.lines:
        add_line(parts, board, corner, line, outputs(line), RAIL)
    for channel in board.channels:
        if channel.number not in window.channels:
            continue
        if channel.crossing is not None:
            add_crossing(parts, board, corner, channel, channel.crossing)
        else:
            add_channel(parts, board, corner, channel, outputs(channel))


def refuse_too_many(board: Board, firing: Firing) -> None:
    """Refuse a pattern that would take clocked registers too long.

    Raises
    ------
    InputError
        If it has more clock edges, times channels, than are worth it, or was captured.
    """
    if firing.recorded is not None:
        raise InputError(
            "a capture holds what the bus did, and its registers were followed bit by bit; leave --clocked out, which would send "
            "frames of its own"
        )
    if firing.held.lines:
        raise InputError(
            f"the enable line {firing.held.lines[0].line.name} chops outputs behind the registers, which are followed flip-flop by "
            "flip-flop only with their outputs enabled; leave --clocked out"
        )
    edges = len(firing.sent) * board.chain.outputs
    if edges * len(board.channels) > MOST_CLOCKED:
        most = MOST_CLOCKED // (board.chain.outputs * len(board.channels))
        raise InputError(
            f"this pattern sends {len(firing.sent)} register frames; flip-flop by flip-flop at most {most} can be followed on "
            "this board: run a shorter pattern, or leave --clocked out, which gives the same edges"
        )


def _known_edges(board: Board, firing: Firing, corner: Corner, window: Window, driver: Channel | Line) -> Stamp:
    """An output that does what the bits say, as a source."""
    register, name = board.chain.register_, f"{driver.stem}_q"
    if driver.output in firing.held.let_go:
        held, off = firing.held.let_go[driver.output]
        edges = (held, ((0.0, True), *((t, on) for a, b in off for t, on in ((a, False), (b, True)))))
        bit, enabled = (gate_points(of, window, 1.0, register.output_edge.typ) for of in edges)
        return letting_go(board, driver, bit, enabled)
    volts = 1.0 if board.logic.derived else board.logic.level(corner)
    points = gate_points(firing.levels[driver.output], window, volts, register.output_edge.typ)
    points = looked_at(points, driver.switch.follows_within(), driver.switch.moments())
    if board.logic.derived:
        return known_output(register, name, driver.output, points)
    driven: Stamp = register.drive(name, name, points)
    return driven


def _clocked(parts: Assembly, board: Board, frames: Frames, image: int, corner: Corner, window: Window) -> Outputs:
    """Flip-flops for the whole chain, which hold the frame of an image at first; what then drives each channel's pin."""
    chain, register = board.chain, board.chain.register_
    state, on_wire = ChainState(chain.outputs), 0
    for _ in range(2):  # what was on the wire before the first one is then of no matter
        state, on_wire = send(state, image, chain, board.spi_mode, on_wire)
    volts = board.logic.level(corner)
    span = window.stop - window.start
    lines = add_lines(parts, board, frames, span, on_wire)
    rail: tuple[Element, ...] = (Drive("logic", LOGIC, GROUND, ((0.0, volts), (span + 1e-6, volts))),)
    if board.logic.derived:  # its node is there already; too low, it takes the registers' contents with it
        rail = comparator("chain_lost", LOGIC, repr(register.keeps_from), inverted=True)
    nets = Nets(LOGIC, *lines, "chain_lost" if board.logic.derived else "")
    stages = flip_flops(register, chain.count, nets, Contents(state.shift, state.storage), volts)
    parts.add(Stamp(elements=(*rail, *stages)), None, register.title or "register", "chain")

    def driven(driver: Channel | Line) -> Stamp:
        name = f"{driver.stem}_q"
        pin = output_pin(register, name, name, driver.output, LOGIC, loads_rail=board.logic.derived)
        return Stamp(elements=pin)

    return driven


def add_lines(parts: Assembly, board: Board, frames: Frames, span: float, on_wire: int = 0) -> tuple[str, str, str]:
    """The controller's data, clock and latch, at the level of the logic rail; their nodes. `on_wire` is the data's first level."""
    lines = serial_lines(frames, board.chain, span, board.spi_mode, on_wire)
    names = ("line_data", "line_clock", "line_latch")
    for name, points in zip(names, (lines.data, lines.clock, lines.latch), strict=True):
        shape = Drive(f"{name}_bit", f"{name}_bit", GROUND, points)
        law = VoltageLaw(name, name, GROUND, f"V({name}_bit)*V({LOGIC})")
        parts.add(Stamp(elements=(shape, law)), None, "controller", "chain")
    return names


def add_rail(
    parts: Assembly, board: Board, corner: Corner, setting: str = "", closed: tuple[tuple[float, float], ...] = OPEN
) -> None:
    """Supply, cable, bulk capacitor and a boosted bank; the supply follows node `setting`, its own voltage if empty.

    `closed` is the bank's switch over time. [s], [1]
    """
    parts.add(board.supply.stamp(SUPPLY, corner, setting), None, board.supply.title or "supply", "supply")
    around = board.around
    fed = RAIL if board.charging is None else "charging_from"
    parts.add(board.cable.stamp(SUPPLY, fed, corner, around), None, board.cable.title or "cable", "cable")
    if board.charging is not None:
        parts.add(board.charging.stamp(fed, RAIL, corner), None, "charging resistor", "board")
    parts.add(board.bulk.stamp(RAIL, corner), None, board.bulk.title or "bulk capacitor", "board")
    add_boost(parts, board, corner, RAIL, closed)


def add_logic(parts: Assembly, board: Board, corner: Corner) -> None:
    """A logic rail that hangs on the coil rail."""
    parts.add(regulated(board, corner, RAIL), None, board.logic.title or board.logic.kind, "logic rail")


def finished(parts: Assembly, board: Board, corner: Corner, window: Window) -> Deck:
    """What was collected as a deck: sums over packages and over all coils, and the rail's own rule."""
    parts.add_totals()
    parts.signals[None, "i_total"] = plus(*drawn(parts.signals))
    parts.units[None, "i_total"] = "A"
    parts.rules.append(PlacedRule(_rail_rule(board), None, "coil rail", "board"))
    if board.logic.derived:
        parts.rules += logic_rules(board)
    if board.limits.most_current is not None:
        parts.rules.append(PlacedRule(_current_rule(board.limits.most_current), None, "[limits]", "board"))
    vectors = dict.fromkeys(name for signal in parts.signals.values() for _, name in signal)
    return Deck(
        parts.builder.netlist(),
        window,
        corner,
        tuple(vectors),
        parts.signals,
        parts.units,
        tuple(parts.ports),
        tuple(parts.rules),
        tuple(parts.assumptions),
        {channel: tuple(names) for channel, names in parts.assumed.items()},
        _measures(parts.signals),
        parts.rest,
        lines={line.number: line.channels for line in board.lines},
        bridges=sum(c.opposite is not None for c in board.channels) // 2,
    )


def add_channel(parts: Assembly, board: Board, corner: Corner, channel: Channel, driven: Stamp) -> None:
    """A channel behind what drives its pin."""
    if channel.opposite is not None:
        add_bridge_channel(parts, board, corner, channel, driven, RAIL)
        return
    k, name, label = channel.number, channel.stem, channel.label
    load = f"{name}_d"
    coil_end = load if channel.leads is None else f"{name}_k"
    low, rail = channel.switch.side == "low", feeds(board, channel, RAIL, BANK)
    parts.add(driven, k, board.chain.register_.title or "register", label)
    ends = (rail, coil_end) if low else (coil_end, GROUND)
    coil = channel.coil.stamp(name, channel.coil_name, *ends, corner, board.around)
    parts.add(coil, k, channel.coil_name, label)
    if channel.leads is not None:
        parts.add(channel.leads.stamp(f"{name}_lead", coil_end, load, corner, board.around), k, "leads", label)
    add_driver(parts, corner, channel, load, coil_end if channel.clamp.at_the_coil() else load, rail)


def _rail_rule(board: Board) -> Rule:
    brown_out = board.limits.brown_out
    if brown_out is None:
        return DipRule("rail-sag", "v_rail", Limit(None, "V", None, "", "brown-out level"), 0.0, "coil rail")
    return DipRule(
        "rail-sag",
        "v_rail",
        Limit.of(brown_out.voltage, "brown-out level", "V", None, brown_out.voltage.max),
        brown_out.lasting.min,
        "coil rail",
        board.limits.guard_band.typ,
    )


def _current_rule(most: Quantity) -> Rule:
    """What the firmware may draw at once, held against what the coils carry and not against their nameplates."""
    limit = Limit.of(most, "most_current", "A", None, most.min)
    return PeakRule("most-current", "i_total", limit, "misbehave", "the current of all coils together", "a stagger")


def _measures(signals: dict[tuple[int | None, str], Signal]) -> tuple[str, ...]:
    """The readings that plain ngspice can print by itself: extremes of vectors, and of sums of them."""
    wanted = {
        "v_rail": ("MIN", "MAX"),
        "i_supply": ("MAX",),
        "v_ds": ("MAX",),
        "i_d": ("MAX",),
        "v_gs": ("MAX",),
    }
    if (None, "i_regulator") in signals:  # a logic rail that can move
        wanted["v_logic"] = ("MIN",)
    lines = []
    for (channel, quantity), signal in signals.items():
        if quantity in wanted and signal:
            # ngspice takes no sums but in par('...').
            alone = len(signal) == 1 and signal[0][0] == 1.0
            read = signal[0][1] if alone else f"par('{'+'.join(f'({share!r})*{name}' for share, name in signal)}')"
            prefix = (
                "board" if channel is None else f"c{channel}" if channel < LINES_FROM else f"line{channel - LINES_FROM}"
            )
            lines += [f".meas tran {prefix}_{quantity}_{how.lower()} {how} {read}" for how in wanted[quantity]]
    return tuple(lines)
