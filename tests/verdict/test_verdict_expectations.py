"""Expected verdicts and accepted failures: what counts, what does not, and from which day."""

from __future__ import annotations

import datetime

import pytest
from made_up_results import finding, result

from boardsim.verdict.expectations import Expectation, KnownFailure, accept, compare

TODAY = datetime.date(2026, 12, 1)
RAIL = {"check": "rail-sag", "part": "coil rail", "label": "board"}


def known(check: str = "overcurrent", until: str = "2026-12-31", **more: object) -> KnownFailure:
    return KnownFailure(check, "seed slot 3 is replaced in spring", datetime.date.fromisoformat(until), **more)  # type: ignore[arg-type]


def test_an_accepted_failure_stays_in_view_and_does_not_count() -> None:
    accepted = accept(result((finding("fail", 3), finding("pass", 4))), [known()], TODAY)
    first = accepted.findings[0]
    assert (first.verdict, first.excused, accepted.verdict) == ("fail", True, "pass")
    assert first.accepted is not None
    assert first.accepted.reason == "seed slot 3 is replaced in spring"


@pytest.mark.parametrize(("until", "verdict"), [("2026-12-01", "pass"), ("2026-11-30", "fail")])
def test_the_last_day_still_counts_and_the_next_no_more(until: str, verdict: str) -> None:
    accepted = accept(result((finding("fail", 3), finding("pass", 4))), [known(until=until)], TODAY)
    assert accepted.verdict == verdict


def test_an_expired_acceptance_says_so_in_the_sentence() -> None:
    (only,) = accept(result((finding("fail", 3),)), [known(until="2026-11-30")], TODAY).findings
    assert only.sentence.endswith("was accepted until 2026-11-30 (seed slot 3 is replaced in spring)")


def test_of_two_acceptances_the_later_one_holds() -> None:
    both = [known(until="2026-11-30"), known(until="2027-11-30", channels=(3,))]
    assert accept(result((finding("fail", 3),)), both, TODAY).verdict == "pass"


@pytest.mark.parametrize(
    "narrow",
    [{"channels": (4,)}, {"part": "other"}, {"quantity": "other"}],
)
def test_an_acceptance_covers_nothing_beyond_what_it_names(narrow: dict[str, object]) -> None:
    accepted = accept(result((finding("fail", 3),)), [known(**narrow)], TODAY)
    assert accepted.verdict == "fail"
    assert any("does not occur any more" in note for note in accepted.notes)


def test_what_never_broke_is_not_accepted_but_noted() -> None:
    accepted = accept(result((finding("tight", 3),)), [known()], TODAY)
    assert accepted.findings[0].accepted is None
    assert accepted.notes == (
        "accepted failure of overcurrent (seed slot 3 is replaced in spring) does not occur any more: "
        "take it out of the scenario file",
    )


def test_a_misspelt_check_gets_the_nearest_one() -> None:
    (note,) = accept(result((finding("fail", 3),)), [known("overcurent")], TODAY).notes
    assert note.endswith('(did you mean "overcurrent"?)')
    _, surprises = compare(result((finding("fail", 0),)), Expectation("fail", ("ovrcurrent",)))
    assert 'does not (did you mean "overcurrent"?)' in surprises[0]


def test_a_missing_limit_can_be_accepted_where_it_counts_as_broken() -> None:
    missing = result((finding("limit-missing", 3), finding("pass", 4)), strict=True)
    strict = accept(type(missing)(**{**vars(missing), "strict": True}), [known()], TODAY)
    assert strict.verdict == "pass"


def test_an_acceptance_does_not_cover_an_audit_that_failed() -> None:
    accepted = accept(result((finding("fail", 3),), proven=False), [known()], TODAY)
    assert accepted.verdict == "unproven"


def test_an_unproven_finding_cannot_be_accepted() -> None:
    accepted = accept(result((finding("unproven", 3),)), [known()], TODAY)
    assert (accepted.findings[0].accepted, accepted.verdict) == (None, "unproven")


@pytest.mark.parametrize(
    ("expectation", "verdicts", "status", "said"),
    [
        (Expectation(), ("pass",), 0, ""),
        (Expectation(), ("tight",), 0, ""),
        (Expectation(), ("limit-missing",), 0, ""),
        (Expectation(), ("fail",), 1, ""),
        (Expectation(), ("unproven",), 3, ""),
        (Expectation("pass"), ("tight",), 1, 'came out "tight", expected "pass" at worst'),
        (Expectation("pass"), ("pass",), 0, ""),
        (Expectation("tight"), ("pass",), 0, ""),
        (Expectation("tight"), ("limit-missing",), 1, 'came out "limit-missing", expected "tight" at worst'),
        (Expectation("limit-missing"), ("tight",), 0, ""),
        (Expectation("limit-missing"), ("fail",), 1, ""),
        (Expectation("fail"), ("fail",), 0, ""),
        (Expectation("fail"), ("pass",), 1, "was expected to break a limit, and breaks none"),
        (Expectation("fail", ("overcurrent",)), ("fail",), 0, ""),
    ],
)
def test_status_and_surprise(expectation: Expectation, verdicts: tuple[str, ...], status: int, said: str) -> None:
    found = result(tuple(finding(v, n) for n, v in enumerate(verdicts)))  # type: ignore[arg-type]
    assert compare(found, expectation) == (status, (said,) if said else ())


def test_an_expected_failure_that_does_not_come_is_a_surprise() -> None:
    found = result((finding("tight", 0), finding("pass", None, **RAIL)))
    status, surprises = compare(found, Expectation("fail", ("rail-sag",)))
    assert (status, surprises) == (1, ("was expected to break rail-sag, and does not",))


def test_a_check_that_breaks_beside_the_expected_one_is_a_surprise() -> None:
    found = result((finding("fail", 0), finding("fail", None, **RAIL)))
    status, surprises = compare(found, Expectation("fail", ("rail-sag",)))
    assert (status, surprises) == (1, ("breaks overcurrent as well, which was not expected",))


def test_what_is_accepted_is_neither_expected_nor_a_surprise() -> None:
    found = accept(result((finding("fail", 0), finding("fail", None, **RAIL))), [known()], TODAY)
    assert compare(found, Expectation("fail", ("rail-sag",))) == (0, ())


def test_an_expected_failure_without_an_audit_that_holds_is_unproven() -> None:
    status, _ = compare(result((finding("fail", 0),), proven=False), Expectation("fail", ("overcurrent",)))
    assert status == 3


def test_an_expected_failure_that_nothing_proves_is_never_all_right() -> None:
    status, surprises = compare(result((finding("unproven", 0),)), Expectation("fail"))
    assert status != 0
    assert surprises
