"""An overlay in words, numbers and a picture: made-up traces, no run behind them."""

from __future__ import annotations

import io
import json
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from rich.console import Console

from boardsim.report.drawing import own_look
from boardsim.report.overlay_picture import overlay_figure
from boardsim.report.overlay_report import overlay_to_dict, print_overlay, write_overlay
from boardsim.verdict.findings import AuditEntry, CornerAudit
from boardsim.verdict.fit import Fit, Fitted
from boardsim.verdict.overlaid import Overlaid
from boardsim.verdict.overlay import Course, lay_over
from boardsim.verdict.trace import Trace

ENTRY = AuditEntry("refinement", "nominal", "step 2 us", "peak coil current", 0.2, 1.0, "%", True)


def overlaid(voltage: bool = True, *, offset: float = 0.0, points: int = 900, **changes: object) -> Overlaid:
    """Two humps 50 mA apart where they are highest, plus an offset."""
    t = np.linspace(0.0, 10e-3, 2001)
    on = (t > 1e-3) & (t <= 7e-3)
    current = np.where(on, np.sin(np.pi * (t - 1e-3) / 6e-3), 0.0)
    volts = np.where(on, 24.0, 0.0)
    course = Course(t, current, volts, 1e-3, 7e-3)
    at = np.linspace(0.0, 10e-3, points)
    seen = 0.95 * np.interp(at, t, current) + offset
    trace = Trace(Path("bench.csv"), at + 3.0, seen, np.interp(at, t, volts) if voltage else None)
    values: dict[str, object] = {
        "board": "fruit sorter",
        "pattern": "steady",
        "corner": "nominal",
        "channel": 7,
        "label": "lane 7",
        "coil": "ejector",
        "pulse": 1,
        "trace": trace.path,
        "overlay": lay_over(trace, course, at=3.001),
        "within": None,
        "audit": CornerAudit("nominal", (ENTRY,), True),
        "engine": "ngspice-39",
    }
    return Overlaid(**{**values, **changes})  # type: ignore[arg-type]


def fitted(follows: bool = True) -> Fit:
    numbers = (
        Fitted("resistance", 17.3, 0.02, "ohm", 16.0, "fitted"),
        Fitted("inductance", 13.4e-3, 20e-6, "H", 12e-3, "fitted"),
        Fitted("closed_inductance", 30e-3, float("inf"), "H", 30e-3, "left", "nothing moves far in this trace"),
        Fitted("core_loss", 9000.0, 800.0, "ohm", 3200.0, "at least", "the trace shows no core loss beyond its noise"),
    )
    t = np.linspace(0.0, 10e-3, 50)
    return Fit(numbers, "the measured voltage", -2e-3, 0.0, 8e-3, 30e-3, 8e-3, 0.0, follows, t, np.zeros(50))


def printed(found: Overlaid) -> str:
    text = io.StringIO()
    print_overlay(found, Console(file=text, width=300), Path("out/overlay.png"), Path("out"))
    return text.getvalue()


@pytest.mark.parametrize(
    ("within", "proven", "verdict"),
    [
        (None, True, None),
        (0.06, True, "pass"),
        (0.04, True, "fail"),
        (0.06, False, "unproven"),
        (None, False, "unproven"),
    ],
)
def test_only_what_was_asked_is_judged_and_nothing_without_its_audit(
    within: float | None, proven: bool, verdict: str | None
) -> None:
    found = overlaid(within=within, audit=CornerAudit("nominal", (replace(ENTRY, passed=proven),), proven))
    assert found.verdict == verdict
    last = printed(found).splitlines()[-1]
    assert ("verdict" in last) == (verdict is not None)
    assert verdict is None or verdict in last


def test_words_name_the_largest_difference_its_time_and_share_and_the_shift() -> None:
    said = printed(overlaid())
    assert "shifted by -3.0000 s" in said
    assert "current: differs most at 4.0" in said
    assert "by -50.0 mA, 5.0 % of the computed peak of 1.00 A" in said
    assert "voltage: differs most" in said
    assert "Changed" not in said
    assert "board.toml has changed" in printed(overlaid(changes=("board.toml has changed since it was fired",)))


def test_words_say_what_the_trace_does_not_tell_and_whether_the_fit_follows() -> None:
    said = printed(overlaid(fit=fitted(), record="[coils.ejector]\n"))
    assert "resistance: 17.30 ohm, standard error 20 mohm (was 16.00 ohm)" in said
    assert "closed inductance: left at 30.00 mH: nothing moves far in this trace" in said
    assert "core loss: at least 9.000 kohm" in said
    assert "[coils.ejector]" in said
    assert "does not follow" not in said
    assert "do not take these numbers over" in printed(overlaid(fit=fitted(follows=False)))


def test_numbers_are_plain_json_in_si_units() -> None:
    values = json.loads(json.dumps(overlay_to_dict(overlaid(fit=fitted(), within=0.06)), allow_nan=False))
    current, voltage = values["differences"]
    assert (current["unit"], voltage["unit"]) == ("A", "V")
    assert current["largest"] == pytest.approx(-0.05, rel=1e-3)
    assert current["share_of_peak"] == pytest.approx(0.05, rel=1e-3)
    assert values["shift"] == pytest.approx(-3.0)
    assert values["verdict"] == "pass"
    assert values["fit"]["numbers"][2]["standard_error"] is None


@pytest.mark.parametrize(
    "found",
    [
        overlaid(),
        overlaid(voltage=False),
        overlaid(within=0.06, fit=fitted()),
        overlaid(offset=1e-9, label="a" * 200, trace=Path("b" * 200)),
        overlaid(points=200_000, offset=0.5),
    ],
    ids=["both", "current only", "fitted and allowed", "long names", "many points"],
)
def test_every_picture_has_its_panels_and_nothing_leaves_it(found: Overlaid) -> None:
    with own_look():
        figure = overlay_figure(found)
        assert len(figure.axes) == 2 * len(found.overlay.differences)
        figure.canvas.draw()
        width, height = figure.canvas.get_width_height()  # type: ignore[attr-defined]
        for text in figure.findobj(lambda artist: hasattr(artist, "get_text") and bool(artist.get_text())):
            box = text.get_window_extent()
            assert box.x0 >= -1, text
            assert box.x1 <= width + 1, text
            assert box.y0 >= -1, text
            assert box.y1 <= height + 1, text


def test_files_are_left_whole(tmp_path: Path) -> None:
    picture = write_overlay(overlaid(fit=fitted(), record="[coils.ejector]\n"), tmp_path / "out")
    assert picture.read_bytes().startswith(b"\x89PNG")
    assert sorted(p.name for p in picture.parent.iterdir()) == [
        "coil.toml",
        "computed.csv",
        "overlay.json",
        "overlay.png",
    ]
    table = np.loadtxt(picture.parent / "computed.csv", delimiter=",", skiprows=1)
    np.testing.assert_array_equal(table[:, 1], overlaid().overlay.course.current)
