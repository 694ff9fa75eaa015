"""A chain of registers at circuit level: flip-flops clocked by lines, outputs that follow the logic rail or let go.

The digital part is event-driven (ngspice's XSPICE devices), everything that carries a current is analogue. A register that
is a voltage source with known edges (`Register.drive`) does the same for a thousandth of the time; this one also wakes up with
any contents, loses them, is cleared, and lets its outputs float.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Literal

from boardsim.parts.elements import (
    GROUND,
    Capacitor,
    Element,
    FlipFlop,
    Gate,
    Resistor,
    ToAnalog,
    ToDigital,
    VoltageLaw,
)
from boardsim.parts.register import Register

EVENT = 1e-9  # [s], the least delay of an event-driven device of ngspice
_ENABLING = 0.05  # [V], over which outputs begin to conduct as the logic rail rises: a slope for Newton's method
_LEANING = 0.1  # [V], over which a leakage fades as its pin comes to rest, for the same reason
_CROSSING = 1e-3  # [V], over which a slow line's crossing is followed
_EDGE_RESISTANCE = 1e3  # [ohm], any: with a capacitor it makes the time constant of an edge
_STAGE = 3e-9  # [s], of a shift stage inside its register, from memory; only the serial output has the printed delay


@dataclass(frozen=True)
class Nets:
    """Nodes that a chain is wired to. Analogue: logic rail, data, clock and latch lines. Digital, "" where there is none:
    `lost` (the rail is too low for contents to be kept) and `clear` (the shift stage is held at zero).
    """

    rail: str
    data: str
    clock: str
    latch: str
    lost: str = ""
    clear: str = ""


@dataclass(frozen=True)
class Contents:
    """What shift and storage stage of a chain hold at first, and again after their rail was lost; bit k is output k."""

    shift: int
    storage: int


Which = Literal["threshold", "high"]


def level_points(register: Register, which: Which) -> tuple[tuple[float, float], ...]:
    """An input level against the logic rail, as points between which straight lines run. [V], [V]

    Parameters
    ----------
    register : Register
    which : {"threshold", "high"}
        Where an input of this kind switches, halfway between what is surely low and surely high; or surely high.

    Notes
    -----
    At the supplies that the register's family prints (`Register.switching_levels`); from its lowest straight to nothing at no
    supply, above its highest as there.
    """
    points = [(0.0, 0.0)]
    for volts, below, above in register.switching_levels():
        points.append((volts, above if which == "high" else (below + above) / 2))
    return tuple(points)


def level(register: Register, rail: str, which: Which) -> str:
    """An input level that moves with the logic rail, as an expression of the rail's node. [V]"""
    return f"pwl(V({rail}),{','.join(f'{x!r},{y!r}' for x, y in level_points(register, which))})"


def comparator(name: str, line: str, bound: str, inverted: bool = False) -> tuple[Element, ...]:
    """Digital node `name`: one while a line is above (or, inverted, below) a voltage given as an expression."""
    over = f"({bound})-V({line})" if inverted else f"V({line})-({bound})"
    return VoltageLaw(f"{name}_over", f"{name}_over", GROUND, over), ToDigital(name, f"{name}_over", name, EVENT)


def slow_comparator(name: str, line: str, bound: str) -> tuple[Element, ...]:
    """Digital node `name`: one while a line, which may rise slowly, is below a voltage given as an expression.

    Notes
    -----
    ngspice looks for events at the points that it takes anyway, so that a slow line's would be found up to a whole step late. Here
    a capacitor follows the comparison, saturated over 1 mV; its charge, large enough to count against the engine's absolute
    tolerance, makes it take small steps around the crossing. It adds 0.1 us.
    """
    over, slow = f"{name}_over", f"{name}_slow"
    return (
        VoltageLaw(over, over, GROUND, f"tanh((({bound})-V({line}))/{_CROSSING!r})"),
        Resistor(slow, over, slow, 0.1),
        Capacitor(slow, slow, GROUND, 1e-6),
        ToDigital(name, slow, name, EVENT),
    )


def flip_flops(
    register: Register, count: int, nets: Nets, start: Contents, volts: float | None = None
) -> tuple[Element, ...]:
    """Shift and storage stage of every register, and the storage stage as voltages of 0 V and 1 V at nodes `held(k)`.

    Parameters
    ----------
    register : Register
    count : int
        Registers in the chain.
    nets : Nets
    start : Contents
    volts : float or None
        Logic rail in operation, at which its serial output's delay is taken where that is printed. [V]

    Notes
    -----
    Rising edges of the clock move every bit to the next higher output, across registers; rising edges of the latch copy the
    shift stage into the storage stage. Clear holds the shift stage at zero, and leaves the storage stage alone in registers whose
    `clears` says so; the output enable leaves both alone (NXP 74HC595 rev. 6, table 3). While the rail is lost both stages are held at `start`, which
    stands for whatever they wake up with: a clear that is active outlasts it.

    The printed propagation delays count from the threshold of the line to the output's edge; the comparator's own delay is
    taken off. An output's edge is an exponential whose middle is that of a straight one of the printed transition time, at
    half of it: ramps of event-driven devices, on 64 Darlington outputs at once, stalled the engine. Ignores set-up and hold
    times, whose violation makes either level.
    """
    elements: list[Element] = []
    for name, line in (("chain_data", nets.data), ("chain_clock", nets.clock), ("chain_latch", nets.latch)):
        elements += comparator(name, line, level(register, nets.rail, "threshold"))
    sets, resets = _wake_nets(nets, elements)
    delay = max(register.propagation.typ - EVENT, EVENT)
    times = register.timing(volts) if volts is not None else None
    onwards = delay if times is None else max(times.shift_delay - EVENT, EVENT)
    before, size = "chain_data", int(register.outputs)
    for k in range(count * size):
        first, then = bool(start.shift >> k & 1), bool(start.storage >> k & 1)
        of_register = onwards if (k + 1) % size == 0 else _STAGE  # the last stage is the serial output as well
        elements.append(
            FlipFlop(
                f"shift{k}",
                before,
                "chain_clock",
                sets if first else "",
                nets.clear if first else resets,
                f"shift{k}",
                of_register,
                first,
            )
        )
        woken = (nets.lost, "") if then else ("", nets.lost)
        if register.clears == "all":
            woken = (sets, nets.clear) if then else ("", resets)
        elements.append(FlipFlop(f"store{k}", f"shift{k}", "chain_latch", *woken, f"store{k}", delay, then))
        before = f"shift{k}"
    outputs = range(count * size)
    steps = tuple(f"step{k}" for k in outputs)
    elements.append(ToAnalog("held", tuple(f"store{k}" for k in outputs), steps, EVENT))
    farads = register.output_edge.typ / (2 * math.log(2)) / _EDGE_RESISTANCE
    for k in outputs:
        elements.append(Resistor(f"step{k}", f"step{k}", held(k), _EDGE_RESISTANCE))
        elements.append(Capacitor(f"step{k}", held(k), GROUND, farads))
    return tuple(elements)


def _wake_nets(nets: Nets, elements: list[Element]) -> tuple[str, str]:
    """The digital nodes that set a shift stage which wakes up as one, and that reset one which wakes up as zero."""
    if not nets.lost or not nets.clear:
        return nets.lost, nets.lost or nets.clear
    elements += [
        Gate("chain_kept", "inverter", (nets.clear,), "chain_kept", EVENT),
        Gate("chain_set", "and", (nets.lost, "chain_kept"), "chain_set", EVENT),
        Gate("chain_reset", "or", (nets.lost, nets.clear), "chain_reset", EVENT),
    ]
    return "chain_set", "chain_reset"


def held(output: int) -> str:
    """The node that is 1 V while an output's storage stage holds a one, else 0 V."""
    return f"held{output}"


@dataclass(frozen=True)
class Leaning:
    """Where what nothing drives drifts: `upwards` to the highest voltage that it has in operation, else to ground."""

    upwards: bool
    amperes: float
    target: str  # expression of the voltage that it drifts up to


def output_pin(
    register: Register,
    name: str,
    pin: str,
    output: int,
    rail: str,
    enabled: str = "",
    leaning: Leaning | None = None,
    loads_rail: bool = False,
) -> tuple[Element, ...]:
    """One output of a chain.

    Parameters
    ----------
    register : Register
    name, pin : str
        Of the element, and the node that goes to the channel.
    output : int
        Which.
    rail : str
        Node of the logic rail.
    enabled : str
        Node that is 1 V while outputs are enabled and 0 V while not; always if empty.
    leaning : Leaning or None
        The leakage of an output that is not enabled; an open-drain one is off then.
    loads_rail : bool
        Whether what a high output gives comes out of the rail's node; else it is a stiff rail's, and nobody asks.

    Notes
    -----
    What the output makes of its bit is its kind's matter (`Register.follows`). It drives while it is enabled and the rail is above
    `drives_from`; not enabled only the leakage is left, which fades where the pin has arrived.
    """
    drives = f"(0.5+0.5*tanh((V({rail})-{register.drives_from.typ!r})/{2 * _ENABLING!r}))"
    if enabled:
        drives = f"V({enabled})*{drives}"
    idle = "" if leaning is None or not enabled else drift(leaning, pin)
    return register.follows(name, pin, f"V({held(output)})", drives, rail, enabled != "", idle, loads_rail)


def drift(leaning: Leaning, pin: str) -> str:
    """The leakage into a pin, as an expression. [A]"""
    away = f"{leaning.target}-V({pin})" if leaning.upwards else f"-V({pin})"
    return f"{leaning.amperes!r}*tanh(({away})/{_LEANING!r})"
