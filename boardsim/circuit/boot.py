"""A board from switch-on, or from a reset, to its first enabled frame -> deck."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, replace

from boardsim.board.matrix import Line
from boardsim.board.power_up import ControlLine
from boardsim.board.reader import Board, Channel
from boardsim.circuit.assemble import (
    MOST_CLOCKED,
    RAIL,
    Assembly,
    Detail,
    Outputs,
    add_lines,
    add_loads,
    add_logic,
    add_rail,
    finished,
)
from boardsim.circuit.deck import Deck, Window
from boardsim.circuit.logic import LOGIC
from boardsim.circuit.serial import Frames, Points, as_points, busy
from boardsim.firing.registers import ChainState, frame_time, send
from boardsim.parts.base import Assumption, Corner, Stamp, listed
from boardsim.parts.clocked import (
    Contents,
    Leaning,
    Nets,
    comparator,
    drift,
    flip_flops,
    held,
    level,
    output_pin,
    slow_comparator,
)
from boardsim.parts.elements import (
    GROUND,
    Capacitor,
    CurrentLaw,
    Drive,
    Element,
    Probe,
    Resistor,
    ToAnalog,
    voltage,
)
from boardsim.parts.rules import BreakdownRule, EnergyRule, PeakRule, PulseRule

ENABLE, CLEAR, ENABLED = "line_enable", "line_clear", "enabled"
PIN_RESISTANCE = 50.0  # [ohm]
_PIN_EDGE = 10e-9  # [s]
PIN = Assumption("controller", "output resistance of its pins", "50 ohm", "from memory")
# What a board suffers before its first frame; averages and a rail that is only coming up are no question of it.
_JUDGED = (BreakdownRule, PeakRule, PulseRule, EnergyRule)


@dataclass(frozen=True)
class Boot:
    """One way in which a board comes up.

    Attributes
    ----------
    name : str
        What the registers hold, for reports.
    contents : Contents
        With what they wake up, or hold at first.
    leans_on : bool
        Whether what floats (gates, lines without a pull) drifts to where coils are on, or to where they are off.
    logic, coils : tuple of (time, share)
        The two rails, as shares of their voltage. [s], [1]
    frames : sequence of (start, image)
        What the firmware sends. [s]
    driven : tuple of (start, stop)
        When the firmware drives output enable low, and clear high. [s]
    since, until : float
        Between the two no coil may be on: from switch-on, or from when a reset may have lasted, to the first enabled frame. [s]
    duration : float
        [s]
    reset : float or None
        When the reset comes, of one that begins in operation, with both rails up. [s]
    """

    name: str
    contents: Contents
    leans_on: bool
    logic: Points
    coils: Points
    frames: Frames
    driven: tuple[tuple[float, float], ...]
    since: float
    until: float
    duration: float
    reset: float | None = None


def detail_of(board: Board, boot: Boot) -> Detail:
    """Flip-flop by flip-flop where that is worth it; the same edges computed bit by bit for very long chains."""
    edges = len(boot.frames) * board.chain.outputs * len(board.channels)
    return "clocked" if edges <= MOST_CLOCKED else "edges"


def boot_deck(board: Board, boot: Boot, corner: Corner, detail: Detail) -> Deck:
    """Assemble the deck of one boot in one corner; its window has every channel.

    Notes
    -----
    The rails are ideal in shape: the coil supply's set voltage and the logic rail rise on straight lines; a logic rail that hangs
    on the coil rail rises as its regulator lets it. Outputs count as
    enabled until output enable is surely high, and the shift stage as cleared until clear is surely high. An output that is not
    enabled has its leakage left (an open-drain one is off), and so has a line without a pull; where they drift is `Boot.leans_on`. A gate drifts up to the
    logic rail's full voltage as soon as either rail is there.
    """
    parts = Assembly()
    volts, v_set = board.logic.level(corner), corner.take(board.supply.voltage, "supply")
    window = Window(0.0, boot.duration, tuple(c.number for c in board.channels))
    setting = Drive("setting", "supply_set", GROUND, tuple((t, v_set * share) for t, share in boot.coils))
    if board.logic.derived:
        parts.add(Stamp(elements=(setting,)), None, "supply", "board")
        add_logic(parts, board, corner)
    else:
        rails = (Drive("logic", LOGIC, GROUND, tuple((t, volts * share) for t, share in boot.logic)), setting)
        parts.add(Stamp(elements=rails, probes=(Probe("v_logic", voltage(LOGIC), "V"),)), None, "logic rail", "board")
    add_rail(parts, board, corner, "supply_set")
    outputs = _chain(parts, board, boot, volts, detail)
    add_loads(parts, board, corner, outputs, window)
    deck = finished(parts, board, corner, window)
    rules = () if boot.reset is not None else tuple(p for p in deck.rules if isinstance(p.rule, _JUDGED))
    clocked = detail == "clocked"
    return replace(
        deck,
        rules=rules,
        rest={"supply_in": v_set} if boot.reset is not None else {},
        digital=True,
        clocked=busy(boot.frames, board.chain) if clocked else (),
    )


def _chain(parts: Assembly, board: Board, boot: Boot, volts: float, detail: Detail) -> Outputs:
    """Registers, output enable and clear; what then drives each channel's pin."""
    chain, register = board.chain, board.chain.register_
    elements: list[Element] = [*_control(board, boot, chain.output_enable, ENABLE, low_is_on=True)]
    probes: list[Probe] = [Probe("enabled", voltage(ENABLED), "1")]
    if chain.output_enable is None or chain.output_enable.tied:
        elements.append(Drive("enabled", ENABLED, GROUND, ((0.0, 1.0), (boot.duration, 1.0))))
    else:
        elements += slow_comparator("chain_enabled", ENABLE, level(register, LOGIC, "high"))
        elements.append(ToAnalog("enabled", ("chain_enabled",), (ENABLED,), register.output_edge.typ))
        probes.append(Probe("v_enable", voltage(ENABLE), "V"))
    cleared = chain.clear is not None and not chain.clear.tied
    if cleared:
        elements += _control(board, boot, chain.clear, CLEAR, low_is_on=False)
        elements += slow_comparator("chain_clear", CLEAR, level(register, LOGIC, "high"))
        probes.append(Probe("v_clear", voltage(CLEAR), "V"))
    if detail == "clocked":
        elements += comparator("chain_lost", LOGIC, repr(register.keeps_from), inverted=True)
        lines = add_lines(parts, board, boot.frames, boot.duration)
        nets = Nets(LOGIC, *lines, "chain_lost", "chain_clear" if cleared else "")
        elements += flip_flops(register, chain.count, nets, boot.contents, board.logic.voltage.typ)
    else:
        elements += _known_stages(board, boot)
    leaks = {} if register.open_drain else {"off_leakage": register.off_leakage}
    numbers = listed(
        "register",
        supply_from_which_outputs_drive=register.drives_from,
        **leaks,
        input_leakage=register.input_leakage,
        input_capacitance=register.input_capacitance,
    )
    pins = (PIN,) if any(line is not None and line.pin for line in (chain.output_enable, chain.clear)) else ()
    stamp = Stamp(elements=tuple(elements), probes=tuple(probes), assumptions=(*numbers, *pins))
    parts.add(stamp, None, register.title or "register", "chain")

    def driven(driver: Channel | Line) -> Stamp:
        name = f"{driver.stem}_q"
        leaning = None
        if not register.open_drain:
            # Both legs of a bridge at the same level would give its coil nothing.
            to_on = boot.leans_on and (isinstance(driver, Line) or driver.forwards)
            upwards = (driver.switch.active == "high") == to_on
            leaning = Leaning(upwards, register.off_leakage.typ, f"min(max(V({LOGIC}),V({RAIL})),{volts!r})")
        loads = board.logic.derived
        return Stamp(elements=output_pin(register, name, name, driver.output, LOGIC, ENABLED, leaning, loads))

    return driven


def _control(board: Board, boot: Boot, line: ControlLine | None, node: str, low_is_on: bool) -> Iterator[Element]:
    """A line that all registers share, as a node; nothing for one that is tied.

    The inputs' and the pin's leakage is one current, which drifts to where coils are on or stay uncleared as the boot says.
    """
    if line is None or line.tied:
        return
    register, count = board.chain.register_, board.chain.count
    if line.pull_up is not None:
        yield Resistor(f"{node}_up", LOGIC, node, line.pull_up.typ)
    if line.pull_down is not None:
        yield Resistor(f"{node}_down", node, GROUND, line.pull_down.typ)
    own = count * register.input_capacitance.typ
    yield Capacitor(f"{node}_c", node, GROUND, own if line.capacitance is None else line.capacitance.typ + own)
    inputs = count + (1 if line.pin else 0)
    # Towards low where low means on; clear is worst while it stays low, whatever else floats.
    upwards = low_is_on and not boot.leans_on
    yield CurrentLaw(
        f"{node}_leak", node, GROUND, drift(Leaning(upwards, inputs * register.input_leakage.typ, f"V({LOGIC})"), node)
    )
    if line.pin:
        changes = [(at, on) for start, stop in boot.driven for at, on in ((start, True), (stop, False))]
        yield Drive(f"{node}_pin", f"{node}_pin", GROUND, as_points(changes, boot.duration, _PIN_EDGE))
        wanted = "0" if low_is_on else f"V({LOGIC})"
        yield CurrentLaw(f"{node}_pin", node, GROUND, f"V({node}_pin)*({wanted}-V({node}))/{PIN_RESISTANCE!r}")


def _known_stages(board: Board, boot: Boot) -> Iterator[Element]:
    """The storage stage of every output that drives a switch, computed bit by bit: a source of 0 V or 1 V each.

    A clear that empties it too is left out: what it wakes up with then counts until the first frame, which errs to the safe side.
    """
    chain, register = board.chain, board.chain.register_
    state = ChainState(chain.outputs, boot.contents.shift, boot.contents.storage)
    changes: dict[int, list[tuple[float, bool]]] = {d.output: [] for d in board.drivers}
    on_wire = 0
    for start, image in boot.frames:
        state, on_wire = send(state, image, chain, board.spi_mode, on_wire)
        at = start + frame_time(chain) + register.propagation.typ + register.output_edge.typ / 2
        for output, found in changes.items():
            found.append((at, bool(state.storage >> output & 1)))
    for output, found in changes.items():
        begin = (-1.0, bool(boot.contents.storage >> output & 1))
        points = as_points([begin, *found], boot.duration, register.output_edge.typ)
        yield Drive(held(output), held(output), GROUND, points)
