"""Whether the inputs of gate drivers understand the registers' outputs."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace

from boardsim.board.matrix import Line
from boardsim.board.reader import Board, Channel
from boardsim.parts.family import LogicFamily
from boardsim.quantities import Quantity, apart, in_units
from boardsim.verdict.chain_findings import assumed_among, chain_finding, register_name
from boardsim.verdict.findings import Finding

_ADVICE = "a driver for these levels, or another logic rail"


def judge_driver_levels(board: Board) -> Iterator[Finding]:
    """The lowest high and the highest low level of an output against the thresholds of the driver at it.

    Notes
    -----
    A high output gives the logic rail, at its lowest, less the drop that its family prints for a light load, a low one what that
    prints. The highest threshold that the driver may have must be below the first, and the lowest above the second. Of a
    threshold that was given as one number that one counts for both. The driver's input takes next to no current, and a
    pull-down the microamperes that are a light load; the hysteresis that such inputs have is left out.
    """
    by_threshold: dict[tuple[float, float], tuple[Channel | Line, Quantity]] = {}
    for driver in board.drivers:
        threshold = driver.switch.input_threshold()
        if threshold is not None:  # alike ones are said once
            by_threshold.setdefault((threshold.min, threshold.max), (driver, threshold))
    for driver, threshold in by_threshold.values():
        yield from _both(board, driver, threshold)


def _both(board: Board, driver: Channel | Line, threshold: Quantity) -> Iterator[Finding]:
    family: LogicFamily | None = board.chain.register_.family
    volts, name = board.logic.voltage.min, register_name(board)
    for what, bound in (("high", threshold.max), ("low", threshold.min)):
        quantity = f"{what} level at the gate driver"
        if family is None:
            said = f"{driver.label}: no logic family of {name} was given: whether its gate driver understands its outputs is not known"
            yield _placed(chain_finding(board, "logic-level", quantity, bound, None, "V", said, volts=volts), driver)
            continue
        level = volts - family.high_drop.max if what == "high" else family.low_output.max
        margin = (level - bound) / bound if what == "high" else (bound - level) / bound
        reading, limit = apart(level, bound, "V")
        said = f"{driver.label}: {name} gives a {what} level of {reading} at {'least' if what == 'high' else 'most'}"
        said += f", at a logic rail of {in_units(volts, 'V')}" if what == "high" else ""
        said += f"; its gate driver's input switches {'up to' if what == 'high' else 'from'} {limit}{' on' if what == 'low' else ''}"
        found = chain_finding(
            board,
            "logic-level",
            quantity,
            level,
            bound,
            "V",
            said,
            margin=margin,
            volts=volts if what == "high" else None,
            source=str(threshold.origin),
            worse="low" if what == "high" else "high",
            assumed=assumed_among(gate_driver_input_threshold=threshold),
            advice=_ADVICE,
        )
        yield _placed(found, driver)


def _placed(found: Finding, driver: Channel | Line) -> Finding:
    """At the channel of the first such driver."""
    return replace(found, label=driver.label, channel=driver.number if isinstance(driver, Channel) else None)
