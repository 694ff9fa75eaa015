"""When edges of clock, data and latch are seen along the chain: delays of registers, lines as resistance and capacitance.

A line is one resistance, that of its driver with the resistor behind it, into the sum of all capacitances on it. That is the
delay of Elmore (J. Appl. Phys. 19 (1948) 55) for a line whose own resistance is small against the driver's, and exact for
the single pole that is left: a step to V reaches a level u after t = R C ln(V / (V - u)), one down from V after R C ln(V / u).
A resistor R_p that pulls the line up or down loads the driver (Thevenin's theorem): the step is behind R R_p / (R + R_p), and
ends where the divider of the two puts it. It holds for lines that are short against the edges on them: as long as an edge lasts longer than about six times the run
along the line (about 6 ns/m, both from memory). Reflections on longer ones are not in it.
"""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import dataclass

from boardsim.board.reader import Board
from boardsim.board.schema import Chain, Line
from boardsim.parts.controller import Controller
from boardsim.parts.family import LogicFamily
from boardsim.parts.register import EdgeTimes, Register

_FULL_EDGE = math.log(9.0)  # from 10 % to 90 % of a step through one pole, in units of R C


@dataclass(frozen=True)
class Span:
    """From when to when an edge may be seen. [s]"""

    early: float
    late: float

    @property
    def width(self) -> float:
        """How uncertain it is. [s]"""
        return self.late - self.early


@dataclass(frozen=True)
class Driven:
    """A line, from ground (or where a pull-up leaves it) to a supply behind a resistance, into a capacitance.

    Attributes
    ----------
    resistance : float
        [ohm]
    capacitance : float
        [F]
    supply : (float, float)
        Lowest and highest of the driver, as the line's pull resistor leaves it. [V]
    levels : (float, float)
        Highest that counts as low, lowest that counts as high at the inputs. [V]
    floor : (float, float)
        Lowest and highest that the driver pulls it down to. [V]
    """

    resistance: float
    capacitance: float
    supply: tuple[float, float]
    levels: tuple[float, float]
    floor: tuple[float, float] = (0.0, 0.0)

    @property
    def tau(self) -> float:
        """Resistance times capacitance. [s]"""
        return self.resistance * self.capacitance

    @property
    def full_edge(self) -> float:
        """From 10 % to 90 % of the step. [s]"""
        return _FULL_EDGE * self.tau

    @property
    def rise(self) -> Span:
        """When a rising edge is seen, counted from the driver's own: from the low level on it may, from the high level on it is. [s]"""
        low, high = self.levels
        lowest, highest = self.floor
        return Span(
            self._until(self.supply[1] - highest, low - highest), self._until(self.supply[0] - lowest, high - lowest)
        )

    @property
    def fall(self) -> Span:
        """The same of a falling edge. [s]"""
        low, high = self.levels
        (lowest, highest), (weakest, strongest) = self.floor, self.supply
        early = self._until(weakest - lowest, weakest - high)
        return Span(early, self._until(strongest - highest, strongest - low))

    @property
    def either(self) -> Span:
        """Of an edge of either sense, as data have them. [s]"""
        return Span(min(self.rise.early, self.fall.early), max(self.rise.late, self.fall.late))

    def _until(self, step: float, way: float) -> float:
        """After which a step has gone so far; at once where it need not move, never where it does not get there. [V] -> [s]"""
        if way <= 0:
            return 0.0
        return self.tau * math.log(step / (step - way)) if way < step else math.inf


@dataclass(frozen=True)
class Window:
    """What a register asks for and what there is: `needed` has to fit into `available`. [s]

    Attributes
    ----------
    per_period : float
        Share of a clock period that `available` is; 0 where it does not follow the clock.
    fixed : float
        What of `available` does not follow the clock. [s]
    """

    what: str
    where: str
    needed: float
    available: float
    per_period: float = 0.0
    fixed: float = 0.0

    @property
    def shortest_period(self) -> float:
        """The clock period at which it just fits; 0 where it does not follow the clock. [s]"""
        return max(self.needed - self.fixed, 0.0) / self.per_period if self.per_period else 0.0


@dataclass(frozen=True)
class ChainTimes:
    """The chain at one voltage of the logic rail.

    Attributes
    ----------
    volts : float
        [V]
    period : float
        Shortest of the clock. [s]
    register : EdgeTimes
    clock, latch, data, link : Driven
        `data` is the line from the controller to the first register, `link` that from each register to the next.
    windows : tuple of Window
    """

    volts: float
    period: float
    register: EdgeTimes
    clock: Driven
    latch: Driven
    data: Driven
    link: Driven
    windows: tuple[Window, ...]


def supplies_to_judge(board: Board) -> tuple[float, ...]:
    """Voltages of the logic rail at which the chain can be at its worst: the ends, and where straight lines break. [V]"""
    rail, register = board.logic.voltage, board.chain.register_
    family: LogicFamily | None = register.family
    printed = list(register.printed)
    if family is not None:
        printed += [*family.printed, *(edge.rail.typ for edge in family.edges)]
    return tuple(sorted({rail.min, rail.max, *(v for v in printed if rail.min < v < rail.max)}))


def controller_of(board: Board) -> Controller:
    """The board's controller, or one of which only what is usual is known."""
    return board.controller or Controller()


def controller_supply(board: Board, volts: float) -> tuple[float, float]:
    """Lowest and highest supply of the controller while the logic rail is at `volts`. [V]"""
    own = controller_of(board).voltage
    return (volts, volts) if own is None else (own.min, own.max)


def loaded(board: Board, line: Line, volts: float) -> tuple[tuple[float, float], tuple[float, float], float]:
    """What a line's pull resistor leaves of its driver's step, by Ohm's law.

    Parameters
    ----------
    volts : float
        The logic rail. [V]

    Returns
    -------
    tuple of (float, float), (float, float) and float
        Lowest and highest of its high level and of its low one [V], and the largest resistance behind the step. [ohm]

    Notes
    -----
    The driver's pin and the resistor in series with it lie on one side of the line, the pull resistor on the other, to ground
    or to the logic rail. Without a pull resistor the step is that of the supply.
    """
    pin, supply, pull = controller_of(board).resistance, controller_supply(board, volts), line.pull
    most, least = pin.max + line.series.max, pin.min + line.series.min
    if pull is None:
        return supply, (0.0, 0.0), most
    behind = most * pull.max / (most + pull.max)
    heavy, light = most / (most + pull.min), least / (least + pull.max)  # shares of the step that the driver loses
    if line.pull_down is not None:
        return (supply[0] * (1 - heavy), supply[1] * (1 - light)), (0.0, 0.0), behind
    ends = [v + share * (volts - v) for v in supply for share in (light, heavy)]
    return (min(ends), max(ends)), (light * volts, heavy * volts), behind


def lines_at(board: Board, volts: float) -> tuple[Driven, Driven, Driven, Driven] | None:
    """Clock, latch, data and link at a voltage of the logic rail; None where levels are not known. [V]"""
    chain, register = board.chain, board.chain.register_
    levels, family = register.input_levels(volts), register.family
    if levels is None or family is None:
        return None
    inputs = family.input_capacitance.max

    def driven(line: Line, registers: int) -> Driven:
        load = registers * (inputs + line.capacitance.max)
        supply, floor, resistance = loaded(board, line, volts)
        return Driven(resistance, load, supply, levels, floor)

    # A register's delay is printed with the test load in it: only what goes beyond that comes on top.
    beyond = max(inputs + chain.data_line.capacitance.max - family.test_load.typ, 0.0)
    return (
        driven(chain.clock_line, chain.count),
        driven(chain.latch_line, chain.count),
        driven(chain.data_line, 1),
        Driven(register.serial_resistance.max, beyond, (volts, volts), levels),
    )


def times_at(board: Board, volts: float) -> ChainTimes | None:
    """The chain at a voltage of the logic rail; None where its register's times or levels are not known there. [V]"""
    register: Register = board.chain.register_
    times, lines = register.timing(volts), lines_at(board, volts)
    if times is None or lines is None:
        return None
    clock, latch, data, link = lines
    period = 1 / board.chain.clock.max
    windows = tuple(_windows(board.chain, controller_of(board), period, times, lines))
    return ChainTimes(volts, period, times, clock, latch, data, link, windows)


def _windows(
    chain: Chain, controller: Controller, period: float, times: EdgeTimes, lines: tuple[Driven, Driven, Driven, Driven]
) -> Iterator[Window]:
    """Everything that has to fit.

    Notes
    -----
    Every edge is taken where it is worst within its span, on every line by itself: the earliest clock for set-up, the latest
    for hold. All registers hang on one clock line, so that two of them may see one edge as far apart as that span is wide.
    """
    clock, latch, data, link = lines
    high = controller.clock_duty.min
    low = 1 - controller.clock_duty.max
    needed = controller.data_valid.max + data.either.late + times.setup - clock.rise.early
    held = times.hold + clock.rise.late
    kept = controller.data_hold.min + data.either.early
    first, on = "controller to register 1", "register to register"
    if controller.spi_mode in (0, 3):
        yield Window("set-up", first, needed, low * period, low)
        yield Window("hold", first, held, high * period + kept, high, kept)
    else:  # data change at the edge that the registers take them on
        yield Window("set-up", first, needed, period, 1.0)
        yield Window("hold", first, held, kept, 0.0, kept)
    if chain.count > 1:
        between = times.shift_delay + link.either.late + clock.rise.width + times.setup
        yield Window("set-up", on, between, period, 1.0)
        least = times.shift_delay_least
        yield Window("hold", on, times.hold + clock.rise.width, least, 0.0, least)
    everywhere = "controller to every register"
    shrunk_high = max(clock.rise.late - clock.fall.early, 0.0)
    shrunk_low = max(clock.fall.late - clock.rise.early, 0.0)
    yield Window("high clock pulse", everywhere, times.clock_width + shrunk_high, high * period, high)
    yield Window("low clock pulse", everywhere, times.clock_width + shrunk_low, low * period, low)
    pulse = controller.latch_width.min
    shrunk = max(latch.rise.late - latch.fall.early, 0.0)
    yield Window("latch pulse", everywhere, times.latch_width + shrunk, pulse, 0.0, pulse)
    wait = chain.latch_time.min
    yield Window(
        "latch after clock", everywhere, times.latch_setup + clock.rise.late - latch.rise.early, wait, 0.0, wait
    )
