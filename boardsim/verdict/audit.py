"""The audit of every run: passivity, refinement, and whether points are dense enough for energies."""

from __future__ import annotations

import math
from collections.abc import Sequence

from boardsim.verdict.findings import AuditEntry, Finding, Reading
from boardsim.verdict.readings import PortReading, Readings

SHARE = 0.01  # of the deciding energy or reading
POINTS = 1.5  # a repeat counts as a refinement only with this many times the points
DECIDING = 0.5  # a reading with more margin than this decides nothing, and may move by
FAR = 0.1  # this share of itself, so that what is printed is right and far from deciding


def passivity(readings: Readings, corner: str, run: str, floor: float) -> AuditEntry:
    """No switch, clamp, coil or capacitor may give out energy that it did not have.

    Parameters
    ----------
    readings : Readings
    corner, run : str
        For the entry.
    floor : float
        Smallest energy that can decide a finding on this board. [J]

    Returns
    -------
    AuditEntry
        Of the part that comes closest to its bound, or is the farthest beyond it.

    Notes
    -----
    The total energy taken by a part, less what it stores (L i^2/2, C v^2/2), must not fall by more than its own
    capacitances can hold plus 1 % of the energy that decides: the largest energy that the channel's coil held. A sum over the
    whole circuit would not do: it is zero for wrong runs as well (Tellegen's theorem). For the bulk capacitor,
    through which the energy of all channels passes at the full rail voltage, 1 % of what passes counts.
    """
    worst = max(readings.ports, key=lambda p: _share(p.drop, _allowed(p, floor)))
    allowed = _allowed(worst, floor)
    passed = all(p.drop <= _allowed(p, floor) for p in readings.ports)
    return AuditEntry("passivity", corner, run, f"{worst.name} gave out", worst.drop, allowed, "J", passed)


def _allowed(port: PortReading, floor: float) -> float:
    """How far a part's energy may fall. [J]"""
    scale = max(port.deciding, floor)
    return port.holds + SHARE * (scale if port.channel is not None else max(scale, port.through))


def _share(measured: float, allowed: float) -> float:
    """Measured over allowed; what is no number is worst of all."""
    return measured / allowed if math.isfinite(measured) else math.inf


def density(readings: Readings, corner: str, run: str, floor: float) -> AuditEntry:
    """Points must be dense enough that two ways to integrate the same energies agree.

    Notes
    -----
    Compares the trapezoid rule with midpoint products, part by part. It says nothing about the engine's own
    integration; passivity and refinement do that.
    """
    worst = max(readings.ports, key=lambda p: _share(p.spread, max(p.through, p.deciding, floor)))
    allowed = SHARE * max(worst.through, worst.deciding, floor)
    passed = all(p.spread <= SHARE * max(p.through, p.deciding, floor) for p in readings.ports)
    return AuditEntry("density", corner, run, f"{worst.name}: energy uncertain by", worst.spread, allowed, "J", passed)


def refinement(
    coarse: Sequence[Finding],
    fine: Sequence[Finding],
    points: tuple[int, int],
    corner: str,
    run: str,
    readings: tuple[Sequence[Reading], Sequence[Reading]] = ((), ()),
) -> AuditEntry:
    """A repeat with at least 1.5 times the points must not move any deciding reading by 1 %.

    A reading decides unless its margin is above one half in both runs; those others may move by 10 %.

    Parameters
    ----------
    coarse, fine : sequence of Finding
        Of the run and of its repeat.
    points : tuple of int
        Of the run and of its repeat.
    readings : tuple of two sequences of Reading
        Of the run and of its repeat, what no finding holds; all of them decide.
    """
    if points[1] < POINTS * points[0]:
        ratio = points[1] / points[0]
        return AuditEntry("refinement", corner, run, "too few points in the repeat, ratio", ratio, POINTS, "1", False)
    before = {f.key: f for f in coarse}
    worst, allowed, subject = -1.0, SHARE, "nothing was read"
    for f in fine:
        old = before.pop(f.key, None)
        far = old is not None and f.limit is not None and all((g.margin or 0.0) > DECIDING for g in (old, f))
        moved = 1.0 if old is None else _moved(old, f)
        bound = FAR if far else SHARE
        if _share(moved, bound) > worst / allowed:
            worst, allowed = moved if math.isfinite(moved) else math.inf, bound
            subject = f"{f.label}: {f.quantity} moved by"
    others = {(r.quantity, r.label): r for r in readings[0]}
    for r in readings[1]:
        earlier = others.pop((r.quantity, r.label), None)
        size = max(abs(r.value), SMALL * r.scale)
        shift = abs(earlier.value - r.value) / size if earlier is not None and size else float(earlier is None)
        if _share(shift, SHARE) > worst / allowed:
            worst, allowed = shift if math.isfinite(shift) else math.inf, SHARE
            subject = f"{r.label}: {r.quantity} moved by"
    gone = [(g.label, g.quantity) for g in before.values()] + [(r.label, r.quantity) for r in others.values()]
    if gone:
        worst, allowed, subject = 1.0, SHARE, f"{gone[0][0]}: {gone[0][1]} is gone, moved by"
    worst = max(worst, 0.0)
    return AuditEntry("refinement", corner, run, subject, worst * 100, allowed * 100, "%", worst <= allowed)


def _moved(old: Finding, new: Finding) -> float:
    """Change of a reading, and of a duration that breaks a limit, as a share of itself.

    Small readings, such as a coil current long gone, are compared on the scale of their limit or, without one, of
    what the quantity reaches.
    """
    size = max(abs(new.value), SMALL * max(abs(new.limit or 0.0), new.scale))
    share = abs(old.value - new.value) / size if size else float(old.value != new.value)
    if "fail" in (old.verdict, new.verdict) and (old.lasting or new.lasting):
        longest = max(old.lasting or 0.0, new.lasting or 0.0)
        share = max(share, abs((old.lasting or 0.0) - (new.lasting or 0.0)) / longest)
    return share


SMALL = 0.05  # of the limit or of the scale
