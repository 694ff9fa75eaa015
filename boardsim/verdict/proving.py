"""Holds a part's model against its datasheet: reads a proof's waveforms, and judges what was read."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from boardsim.engine.waves import Waves
from boardsim.errors import EXIT_LIMIT_BROKEN, EXIT_PASS, EXIT_UNPROVEN
from boardsim.parts.elements import Signal
from boardsim.parts.proof import AtEnd, Between, Proof, Ratio
from boardsim.quantities import in_units
from boardsim.verdict.readings import our_name

ProofVerdict = Literal["pass", "fail", "unproven"]

AGREEMENT = 0.01  # share of the reading by which two runs of a proof may differ
_ROUNDING = 1e-9  # share by which a value at the very end of a band may be beyond it


@dataclass(frozen=True)
class ProofLine:
    """One printed number of a part beside what its model does.

    Attributes
    ----------
    part, kind : str
    proof : Proof
    value : float or None
        What the finer run reads; None where no run came to a reading. [proof.unit]
    points : tuple of int
        Points of the runs that were compared, the finest last.
    verdict : {"pass", "fail", "unproven"}
    reason : str
        Why it is no pass; empty for a pass.
    """

    part: str
    kind: str
    proof: Proof
    value: float | None
    points: tuple[int, ...]
    verdict: ProofVerdict
    reason: str = ""

    @property
    def deviation(self) -> float | None:
        """How far the model is from the typical point, as a share of it; None where that is only a bound."""
        if self.value is None or not self.proof.shapes:
            return None
        return self.value / self.proof.printed.typ - 1


@dataclass(frozen=True)
class PartProofs:
    """The lines of one part, none if its kind takes the printed numbers as they are, and the engine that ran them."""

    part: str
    kind: str
    lines: tuple[ProofLine, ...]
    engine: str = ""


def vectors_of(reading: AtEnd | Ratio | Between) -> tuple[str, ...]:
    """What has to be saved for a reading, each vector once."""
    signals: tuple[Signal, ...]
    if isinstance(reading, AtEnd):
        signals = (reading.signal,)
    elif isinstance(reading, Ratio):
        signals = (reading.over, reading.under)
    else:
        signals = (reading.first, reading.second)
    return tuple(dict.fromkeys(name for signal in signals for _, name in signal))


def read_proof(reading: AtEnd | Ratio | Between, waves: Waves) -> float | None:
    """What a proof reads from its waveforms; None where a level is never crossed, or a ratio has nothing below."""
    blocks = list(waves.blocks())
    rows = np.concatenate([blocks[0], *(block[1:] for block in blocks[1:])])
    column = {our_name(name): rows[:, i] for i, name in enumerate(waves.names)}

    def of(signal: Signal) -> NDArray[np.float64]:
        total: NDArray[np.float64] = np.zeros(len(rows))
        for factor, name in signal:
            total = total + factor * column[name.lower()]
        return total

    if isinstance(reading, AtEnd):
        return float(of(reading.signal)[-1])
    if isinstance(reading, Ratio):
        under = float(of(reading.under)[-1])
        return float(of(reading.over)[-1]) / under if under else None
    time = rows[:, 0]
    start = crossing(time, of(reading.first), reading.first_level, reading.first_edge, time[0])
    if start is None:
        return None
    second = of(reading.second)
    level = reading.second_level + (float(np.interp(start, time, second)) if reading.relative else 0.0)
    stop = crossing(time, second, level, reading.second_edge, start)
    return None if stop is None else reading.factor * (stop - start)


def crossing(
    time: NDArray[np.float64],
    values: NDArray[np.float64],
    level: float,
    edge: Literal["rise", "fall"],
    after: float,
) -> float | None:
    """When a waveform first crosses a level in one direction.

    Parameters
    ----------
    time : (n,) array
        Rising. [s]
    values : (n,) array
        [unit of the level]
    level : float
        [unit of the values]
    edge : {"rise", "fall"}
    after : float
        A crossing before this time does not count. [s]

    Returns
    -------
    float or None
        By straight lines between the points; None if there is none. [s]

    Examples
    --------
    >>> crossing(np.array([0.0, 1.0, 2.0]), np.array([0.0, 2.0, 0.0]), 1.0, "fall", 0.0)
    1.5
    """
    sign = 1.0 if edge == "rise" else -1.0
    v = sign * (values - level)
    for i in np.flatnonzero((v[:-1] < 0) & (v[1:] >= 0)):
        at = float(time[i] + (time[i + 1] - time[i]) * (-v[i]) / (v[i + 1] - v[i]))
        if at >= after:
            return at
    return None


def judge_proof(
    part: str, kind: str, proof: Proof, readings: Sequence[float | None], points: Sequence[int]
) -> ProofLine:
    """The line of a proof from its runs, the finest last.

    Notes
    -----
    Two runs must agree within 1 % of the reading, otherwise the number is the integrator's and not the model's. Then
    the model must lie inside the printed band and, where the typical point shapes it, within the tolerance of that. An
    end of the band that equals a typical point was not printed: "22 mohm -0/+4.5 mohm" is a typical figure with a
    maximum. A number that only bounds the model needs a band; without one nothing is proven.
    """
    value = readings[-1] if readings else None
    numbers = tuple(points)

    def line(verdict: ProofVerdict, reason: str = "") -> ProofLine:
        return ProofLine(part, kind, proof, value, numbers, verdict, reason)

    if value is None:
        return line("unproven", "the test circuit came to no reading")
    before = readings[-2] if len(readings) > 1 else None
    if before is None or abs(value - before) > AGREEMENT * abs(value):
        return line("unproven", f"two runs of the test circuit do not agree within {AGREEMENT:.0%} of the reading")
    printed = proof.printed
    if not proof.shapes and not printed.toleranced:
        return line("unproven", "there is no band to hold it against")
    slack = _ROUNDING * abs(value)
    if (printed.min < printed.typ or not proof.shapes) and value < printed.min - slack:
        return line("fail", f"below the printed minimum of {in_units(printed.min, proof.unit)}")
    if (printed.max > printed.typ or not proof.shapes) and value > printed.max + slack:
        return line("fail", f"above the printed maximum of {in_units(printed.max, proof.unit)}")
    if proof.shapes and abs(value - printed.typ) > proof.tolerance * abs(printed.typ):
        return line("fail", f"more than {proof.tolerance:.0%} from the printed typical value")
    return line("pass")


def status_of_proofs(parts: Sequence[PartProofs]) -> int:
    """Exit status: 1 if a value is off, 3 if one is unproven or there is none at all, 0 otherwise."""
    verdicts = {line.verdict for part in parts for line in part.lines}
    if "fail" in verdicts:
        return EXIT_LIMIT_BROKEN
    return EXIT_UNPROVEN if "unproven" in verdicts or not verdicts else EXIT_PASS
