"""A trace over a computed pulse as files and as words: numbers as JSON, the computed waveform, the fitted record."""

from __future__ import annotations

import io
from collections.abc import Iterator
from pathlib import Path
from typing import Any

from rich.console import Console
from rich.text import Text

from boardsim.quantities import in_units
from boardsim.report.files import write_text
from boardsim.report.json_report import write_json
from boardsim.report.overlay_picture import draw_overlay
from boardsim.report.terminal import print_section
from boardsim.report.wording import moment, percent, plain
from boardsim.verdict.findings import CAUTIONS
from boardsim.verdict.fit import words
from boardsim.verdict.overlaid import Overlaid
from boardsim.verdict.overlay import Difference

_SCHEMA = "boardsim-overlay/1"


def write_overlay(found: Overlaid, folder: Path) -> Path:
    """Write picture, waveform, record and numbers; the path of the picture.

    Raises
    ------
    InputError
        If a file cannot be written.
    """
    draw_overlay(found, picture := folder / "overlay.png")
    course = found.overlay.course
    text = io.StringIO()
    text.write("time [s],current [A],voltage [V]\n")
    for row in zip(course.t, course.current, course.voltage, strict=True):
        text.write(",".join(repr(float(v)) for v in row) + "\n")
    write_text(folder / "computed.csv", text.getvalue())
    if found.record:
        write_text(folder / "coil.toml", found.record)
    write_json(folder / "overlay.json", overlay_to_dict(found))  # last: who waits for it finds the rest in place
    return picture


def overlay_to_dict(found: Overlaid) -> dict[str, Any]:
    """An overlay as plain values for JSON, in SI units; None for what does not apply."""
    laid = found.overlay
    return {
        "schema": _SCHEMA,
        "board": found.board,
        "pattern": found.pattern,
        "corner": found.corner,
        "channel": found.channel,
        "label": found.label,
        "pulse": found.pulse,
        "trace": found.trace.name,
        "turn_on": laid.course.on,
        "turn_off": laid.course.off,
        "shift": laid.shift,
        "aligned_by": laid.told_by,
        "trace_begins": laid.begins,
        "differences": [
            {
                "quantity": d.quantity,
                "unit": d.unit,
                "largest": d.largest,
                "at": d.at,
                "share_of_peak": _finite(d.share),
                "peak": d.peak,
                "mean": d.mean,
                "rms": d.rms,
                "points": len(d.t),
            }
            for d in laid.differences
        ],
        "within": found.within,
        "verdict": found.verdict,
        "fit": _fit(found),
        "engine": found.engine,
        "audit": {"passed": found.audit.proven, "entries": [str(e) for e in found.audit.entries]},
        "changed": list(found.changes),
        "assumed": _assumed(found),
    }


def _fit(found: Overlaid) -> dict[str, Any] | None:
    if (fit := found.fit) is None:
        return None
    return {
        "numbers": [
            {
                "name": n.name,
                "value": n.value,
                "standard_error": _finite(n.error),
                "unit": n.unit,
                "before": n.before,
                "told": n.told,
                "why": n.why,
            }
            for n in fit.numbers
        ],
        "driven_by": fit.driven_by,
        "offset": fit.offset,
        "delay": fit.delay,
        "rms": fit.rms,
        "largest": fit.largest,
        "noise": fit.noise,
        "moved": fit.moved,
        "follows": fit.follows,
        "record": found.record,
    }


def _finite(value: float) -> float | None:
    return value if abs(value) < float("inf") else None


def _assumed(found: Overlaid) -> list[str]:
    return [*found.assumed, *(f"{a.part}: {a.quantity} {a.value} ({a.why})" for a in found.assumptions)]


def print_overlay(found: Overlaid, console: Console, picture: Path, folder: Path) -> None:
    """Print an overlay for people; what was judged is the last line.

    Parameters
    ----------
    found : Overlaid
    console : rich.console.Console
    picture : Path
    folder : Path
        Where the files are.
    """
    laid = found.overlay
    console.print(Text(plain(f"{found.board}, pattern {found.pattern}: {found.label}, pulse {found.pulse}"), "bold"))
    on, off = moment(laid.course.on), moment(laid.course.off)
    where = (
        f"the output is on from {on} to {off}; computed with {found.corner} parts"
        if found.corner == "nominal"
        else (f"the output is on from {on} to {off}; corner: {found.corner}")
    )
    print_section(console, "Compared", [where, _aligned(found), *map(difference_words, laid.differences)])
    print_section(console, "Fitted", list(_fitted(found)))
    if found.record:
        console.print()
        console.print(Text(found.record.rstrip()), soft_wrap=True)
    print_section(console, "Changed", found.changes)
    print_section(console, "Assumed, since the files do not say", _assumed(found))
    failed = [str(e) for e in found.audit.entries if not e.passed]
    held = "every audit of the run and of its repeat holds, and both agree"
    print_section(console, "Audit", failed if not found.audit.proven else [held])
    print_section(console, "Cautions", CAUTIONS)
    console.print()
    console.print(plain(f"{_judged(found)}. Picture {picture}; all files in {folder}"), soft_wrap=True, markup=False)


def _aligned(found: Overlaid) -> str:
    laid = found.overlay
    seen = moment(laid.begins)
    if laid.told_by == "as told":
        return f"the trace's {seen} is the turn-on, as told: its times are shifted by {moment(laid.shift)}"
    what = "voltage rises" if laid.told_by == "voltage" else "current begins"
    return f"its {what} at {seen} in the trace, laid on where the computed one does: the trace's times are shifted by {moment(laid.shift)}"


def difference_words(d: Difference) -> str:
    """The largest difference of a quantity with its time and share, its mean and its root mean square."""
    return (
        f"{d.quantity}: differs most at {moment(d.at)}, by {_signed(d.largest, d.unit)}, {percent(d.share)} of the computed peak of "
        f"{in_units(d.peak, d.unit)}; {_signed(d.mean, d.unit)} on average, {in_units(d.rms, d.unit)} root mean square"
    )


def _signed(value: float, unit: str) -> str:
    return f"{'+' if value > 0 else ''}{in_units(value, unit)}"


def _fitted(found: Overlaid) -> Iterator[str]:
    if (fit := found.fit) is None:
        return
    for number in fit.numbers:
        yield f"{number.name.replace('_', ' ')}: {words(number)}"
    delay = f" and {in_units(fit.delay, 's')} later" if fit.delay else ""
    yield f"driven by {fit.driven_by}; the trace lies {_signed(fit.offset, 'A')} off{delay}, which was fitted along"
    moves = f"; what moves got {percent(fit.moved)} of its way" if fit.moved else ""
    yield (
        f"the fit leaves {in_units(fit.rms, 'A')} root mean square, {_signed(fit.largest, 'A')} at most, where the trace has "
        f"{in_units(fit.noise, 'A')} of noise{moves}"
    )
    if not fit.follows:
        yield (
            "the fitted coil does not follow the trace: something is in it that the model has not (a core that saturates, a motion that is described "
            "otherwise, another coil); do not take these numbers over"
        )


def _judged(found: Overlaid) -> str:
    d = found.judged
    if found.verdict == "unproven":
        return "verdict: unproven - the audit of the run did not hold, so nothing can be compared with it"
    if found.within is None:
        return f"{d.quantity}: within {percent(d.share)} of the peak"
    more = "" if found.verdict == "pass" else " not"
    return f"verdict: {found.verdict} - the {d.quantity} does{more} stay within {percent(found.within)} of the peak: {percent(d.share)}"
