"""From which width on a pulse works: of made-up points in several corners, and in words."""

from __future__ import annotations

from typing import Any

import pytest

from boardsim.scenarios.stroke_words import answer_of
from boardsim.verdict.findings import Verdict
from boardsim.verdict.strokes_study import StrokePoint, StrokeRow, StrokeStudy

MS = 1e-3
LATE = "row 0: commanded at 0 s, rod arrives after 12.0 ms; the latest arrival is at 10.0 ms"


def point(width: float, verdict: Verdict = "pass", flies: float | None = 6 * MS, **other: Any) -> StrokePoint:
    """Of 2 mm, 1 m/s, 0.5 mJ; a width in milliseconds."""
    values: dict[str, Any] = {
        "arrives": None if flies is None else flies + 0.1 * MS,
        "speed": None if flies is None else 1.0,
        "energy": None if flies is None else 0.5 * MS,
        "farthest": 2 * MS if flies is not None else 1 * MS,
        "back": 10 * MS,
        "why": LATE if verdict == "fail" else "",
    }
    return StrokePoint(width * MS, flies=flies, verdict=verdict, **{**values, **other})


def row(strong: str, weak: str, asked: float | None = None, **other: Any) -> StrokeRow:
    """Pulses of 2, 4, 6, ... ms: "p" passes, "t" is tight, "f" fails, "u" is unproven; one that fails does not arrive."""
    verdicts: dict[str, Verdict] = {"p": "pass", "t": "tight", "f": "fail", "u": "unproven"}

    def points(letters: str, flies: float) -> tuple[StrokePoint, ...]:
        return tuple(point(2.0 * k, verdicts[c], None if c == "f" else flies * MS) for k, c in enumerate(letters, 1))

    both = {"supply high": points(strong, 5.0), "supply low": points(weak, 9.0)}
    values: dict[str, Any] = {"shown": 12 * MS, "due": 10 * MS, "least": 0.1 * MS, "most": 0.9 * MS}
    return StrokeRow(0, "row 0", "rod", 2 * MS, both, asked=asked, **{**values, **other})


def test_the_shortest_width_is_that_which_works_in_every_corner() -> None:
    found = row("fpppppp", "ffftppp")
    assert found.stretch == (8 * MS, 14 * MS)
    answer = answer_of(found, 0.1)
    assert (answer.verdict, answer.value, answer.limit) == ("pass", 8 * MS, 14 * MS)
    assert (
        "row 0: the shortest pulse that works in every corner is 8.00 ms: rod arrives within 9.10 ms" in answer.sentence
    )
    assert "with 6.00 ms, commanded at 0 s, rod arrives after 12.0 ms" in answer.sentence
    assert "(supply low)" in answer.sentence
    assert "from 9.00 ms on a longer pulse makes no harder blow" in answer.sentence


def test_widths_that_stop_working_again_bound_the_stretch_and_a_narrow_one_is_tight() -> None:
    found = row("fffpfff", "fffppff")
    assert found.stretch == (8 * MS, 8 * MS)
    answer = answer_of(found, 0.1)
    assert (answer.verdict, answer.margin) == ("tight", 0.0)
    assert "the longest is 8.00 ms: with 10.0 ms" in answer.sentence
    assert "makes no harder blow" not in answer.sentence


def test_where_no_width_works_the_one_that_does_most_says_what_stands_in_the_way() -> None:
    answer = answer_of(row("fpppppp", "fffffff"), 0.1)
    assert (answer.verdict, answer.value, answer.limit) == ("fail", 0.0, 1.0)
    assert "no pulse up to 14.0 ms works in every corner; with 14.0 ms, commanded at 0 s" in answer.sentence


def test_widths_of_which_nothing_is_proven_do_not_work_and_do_not_fail() -> None:
    assert answer_of(row("uuu", "uuu"), 0.1).verdict == "unproven"
    assert row("ppp", "uup").stretch == (6 * MS, 6 * MS)


@pytest.mark.parametrize(
    ("asked", "verdict", "words"),
    [
        (8, "tight", "a pulse of 8.00 ms works in every corner"),  # it is the shortest
        (10, "pass", "a pulse of 10.0 ms works in every corner"),
        (4, "fail", "a pulse of 4.00 ms does not work: commanded at 0 s, rod arrives after 12.0 ms"),
    ],
)
def test_a_width_that_is_asked_for_is_judged_by_itself(asked: int, verdict: str, words: str) -> None:
    answer = answer_of(row("fpppppp", "fffpppp", asked=asked * MS), 0.1)
    assert (answer.verdict, answer.value) == (verdict, asked * MS)
    assert words in answer.sentence
    assert "the shortest pulse that works in every corner is 8.00 ms" in answer.sentence


def test_from_the_latest_travel_time_on_nothing_changes_unless_a_blow_does() -> None:
    assert row("pppp", "pppp").settled == 9 * MS
    assert row("pppp", "fffff").settled is None  # the longest pulse does not move it to its stop
    found = row("ppppp", "ppppp")
    harder = (*found.points["supply low"][:-1], point(10.0, flies=9 * MS, energy=0.6 * MS))
    longer = (*found.points["supply low"], point(12.0, flies=9 * MS, energy=0.6 * MS))
    same = (*found.points["supply high"], point(12.0, flies=5 * MS))
    assert StrokeRow(0, "row 0", "rod", 2 * MS, {"low": harder}, 12 * MS, None, None, None).settled == 9 * MS
    assert StrokeRow(0, "r", "rod", 2 * MS, {"high": same, "low": longer}, 12 * MS, None, None, None).settled is None


def test_a_row_of_the_table_holds_the_worst_of_all_corners_and_no_number_where_one_is_missing() -> None:
    table = StrokeStudy((row("fpp", "ffp"),)).table
    first, second, third = table.rows
    assert [c.name for c in table.columns][2:5] == ["latest arrival", "softest blow", "hardest blow"]
    assert first[2:5] == (None, None, None)
    assert second[2:5] == (None, 0.0, 0.5 * MS)  # in one corner there is no blow at all
    assert third[2:5] == (pytest.approx(9.1 * MS), 0.5 * MS, 0.5 * MS)
    assert [r[-1] for r in table.rows] == ["fail", "fail", "pass"]
