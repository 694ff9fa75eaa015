"""Made-up results for the report tests: no simulation behind them, only values of the right shape."""

from __future__ import annotations

import numpy as np

from boardsim.parts.base import Assumption
from boardsim.verdict.closeups import Closeup, Panel
from boardsim.verdict.findings import (
    AuditEntry,
    CornerAudit,
    Envelope,
    Finding,
    Result,
    Timing,
    Traces,
    Verdict,
    overall,
)

COLD = "supply high, coils cold"
HOT = "supply low, coils hot"


def finding(verdict: Verdict = "pass", channel: int | None = 0, **changes: object) -> Finding:
    """A clamp diode's peak current, with the verdict's usual numbers."""
    value = {"fail": 3.2, "tight": 1.9}.get(verdict, 1.2)
    limit = None if verdict == "limit-missing" else 2.0
    values: dict[str, object] = {
        "check": "overcurrent",
        "quantity": "peak current of the clamp diode",
        "part": "fast-2a",
        "channel": channel,
        "label": f"lane {channel}" if channel is not None else "board",
        "value": value,
        "limit": limit,
        "unit": "A",
        "margin": None if limit is None else (limit - value) / limit,
        "at": 0.0352,
        "consequence": "destroy",
        "verdict": verdict,
        "sentence": f"The clamp diode of lane {channel} carries {value} A at turn-off.",
        "corner": COLD,
        "source": "library: typical of its class",
    }
    return Finding(**{**values, **changes})  # type: ignore[arg-type]


def audit(passed: bool = True) -> tuple[CornerAudit, ...]:
    entries = [
        AuditEntry("passivity", corner, "step 2 us", "clamp of lane 7", 1e-6, 3e-6, "J", True) for corner in (COLD, HOT)
    ]
    entries += [
        AuditEntry("refinement", COLD, "step 2 us", "peak current of the clamp diode", 0.3, 1.0, "%", True),
        AuditEntry("refinement", HOT, "step 2 us", "coil rail", 0.2 if passed else 4.2, 1.0, "%", passed),
    ]
    return tuple(
        CornerAudit(corner, tuple(e for e in entries if e.corner == corner), passed or corner == COLD)
        for corner in (COLD, HOT)
    )


def traces(
    channels: int,
    *,
    limit: float | None = 19.0,
    ceiling: float | None = 10.0,
    sag: float = 2.6,
    label: str = "lane {n}",
    slices: int = 1500,
) -> Traces:
    """Channels fired in a staggered row, twice, with the rail sinking as the current rises."""
    duration = 0.4
    edges = np.linspace(0.0, duration, slices + 1)
    middle = (edges[:-1] + edges[1:]) / 2
    on: dict[int, np.ndarray] = {}
    total = np.zeros(slices)
    for n in range(channels):
        starts = np.array([0.02, 0.22]) + 0.1 * n / channels
        on[n] = np.column_stack([starts, starts + 0.03])
        for start in starts:
            rising = np.clip((middle - start) / 0.004, 0, None)
            current = 1.4 * (1 - np.exp(-rising)) * (middle < start + 0.03)
            total += current
    supply = np.convolve(np.concatenate([np.full(60, total[0]), total]), np.full(61, 1 / 61), "valid")
    rail = 24.0 - sag * total / max(total.max(), 1e-9)
    return Traces(
        corner=HOT,
        rail=Envelope("coil rail at the board", "V", edges, rail - 0.05, rail + 0.05),
        total=Envelope("sum of the coil currents", "A", edges, total * 0.97, total),
        supply=Envelope("current out of the supply", "A", edges, supply, supply),
        on=on,
        labels={n: label.format(n=n) for n in range(channels)},
        rail_limit=limit,
        supply_limit=ceiling,
    )


def wave(label: str, unit: str, low: float, high: float, start: float, stop: float, slices: int = 800) -> Envelope:
    """A hump from `low` up to `high` in the middle of a stretch, and back. [unit], [s]"""
    edges = np.linspace(start, stop, slices + 1)
    hump = low + (high - low) * np.sin(np.linspace(0.0, np.pi, slices)) ** 2
    return Envelope(label, unit, edges, hump - 0.01 * abs(high - low), hump)


def closeup(
    of: Finding,
    channels: int = 24,
    *,
    span: tuple[float, float] = (0.02, 0.06),
    waves: tuple[tuple[str, float, float], ...] = (("current of the clamp diode", 0.0, 3.0),),
    label: str = "lane {n}",
    sign: float = 1.0,
    **changes: object,
) -> Closeup:
    """A close-up of a finding: its quantity, the coil rail and the currents beside it, and who was on.

    `waves` are those of the first panel: name, lowest and highest value. [unit of the finding]
    """
    start, stop = span
    width = stop - start
    marked = None if of.at is None else (min(max(of.at, start), stop), sign * of.value)
    limit = None if of.limit is None else sign * of.limit
    first = tuple(wave(name, of.unit, low, high, start, stop) for name, low, high in waves)
    currents = (("all coils together", 28.0), ("out of the supply", 9.9))
    panels = (
        Panel("Currents" if len(first) > 1 else first[0].label.capitalize(), of.unit, first, limit, marked),
        Panel("Coil rail at the board", "V", (wave("coil rail at the board", "V", 5.1, 25.2, start, stop),)),
        Panel("Currents", "A", tuple(wave(name, "A", -0.01, high, start, stop) for name, high in currents)),
    )
    starts = start + width * (0.1 + 0.4 * np.arange(channels) / channels)
    on = {n: np.array([[t, t + 0.3 * width]]) for n, t in enumerate(starts)}
    values: dict[str, object] = {
        "finding": of.key,
        "corner": of.corner,
        "start": start,
        "stop": stop,
        "panels": panels,
        "on": on,
        "asked": on,
        "labels": {n: label.format(n=n) for n in range(channels)},
        "who": () if of.channel is None else (of.channel,),
    }
    return Closeup(**{**values, **changes})  # type: ignore[arg-type]


def result(
    findings: tuple[Finding, ...] | None = None,
    *,
    proven: bool = True,
    strict: bool = False,
    **changes: object,
) -> Result:
    """A fruit sorter's rush: unless told otherwise 24 lanes fail, the rail is tight, one limit is missing."""
    if findings is None:
        findings = mixed()
    values: dict[str, object] = {
        "board": "fruit sorter",
        "pattern": "rush",
        "duration": 0.4,
        "verdict": overall(findings, proven, strict),
        "findings": findings,
        "assumptions": (
            *(Assumption(f"coil lane {n}", "core loss", "12.0 kohm", "solid core, from memory") for n in range(24)),
            Assumption("supply", "resistance", "20.0 mohm", "enclosed switching supply, from memory"),
        ),
        "audit": audit(proven),
        "firing": ("A register frame takes 6.50 us; the latest edge moved by 6.50 us.",),
        "traces": traces(24),
        "deck": "* deck\n.end\n",
        "timings": (
            Timing("assemble", 0.1),
            Timing("ngspice", 8.25),
            Timing("ngspice", 4.25),
            Timing("audit", 1.5),
        ),
    }
    return Result(**{**values, **changes})  # type: ignore[arg-type]


def mixed() -> tuple[Finding, ...]:
    failing = [finding("fail", n, value=3.2 + n / 100, margin=(2.0 - 3.2 - n / 100) / 2.0) for n in range(24)]
    passing = [
        finding(
            channel=n,
            check="overvoltage",
            quantity="peak voltage from drain to source",
            part="n-logic-60v",
            value=43.1,
            limit=48.0,
            unit="V",
            margin=4.9 / 48,
        )
        for n in range(24)
    ]
    rail = finding(
        "tight",
        None,
        check="rail-sag",
        quantity="lowest voltage of the coil rail",
        part="bulk capacitor",
        label="coil rail",
        value=19.8,
        limit=19.0,
        unit="V",
        margin=0.042,
        lasting=0.0031,
        consequence="misbehave",
        corner=HOT,
        sentence="The coil rail sinks to 19.8 V while 6 lanes fire; below 19.0 V the board resets.",
    )
    pulse = finding(
        "limit-missing",
        7,
        check="avalanche",
        quantity="energy per pulse",
        part="n-logic-60v",
        value=0.0123,
        unit="J",
        sentence="Lane 7 turns off through its switch with 12.3 mJ; no repetitive rating is given.",
    )
    return (*passing, pulse, rail, *failing)
