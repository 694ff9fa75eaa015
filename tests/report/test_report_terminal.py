"""What is printed can be read, says everything that matters, and ends with the verdict."""

import io
from pathlib import Path
from typing import Literal

import pytest
from made_up_results import COLD, HOT, finding, result
from rich.cells import cell_len
from rich.console import Console

from boardsim.parts.base import Assumption
from boardsim.report.terminal import MOST_SENTENCES, print_result, study_table
from boardsim.report.wording import grouped, moment, percent, value_and_limit
from boardsim.verdict.findings import CAUTIONS, AuditEntry, CornerAudit, Result, Verdict
from boardsim.verdict.studies import Column, Table


def printed(judged: Result, width: int = 100, picture: Path | None = Path("out/rush/overview.png")) -> str:
    file = io.StringIO()
    print_result(judged, Console(file=file, width=width), picture, Path("out/rush"))
    return file.getvalue()


def unwrapped(text: str) -> str:
    return " ".join(text.split())


@pytest.mark.parametrize("width", [50, 80, 100, 160])
def test_nothing_is_cut_off_and_nothing_is_wider_than_the_terminal(width: int) -> None:
    text = printed(result(), width)
    assert "…" not in text
    assert "\x1b" not in text
    *lines, last = text.rstrip("\n").split("\n")
    assert max(cell_len(line) for line in lines) <= width
    for number in ("3.43 A", "2.00 A", "-72 %", "19.8 V", "4.2 %", "35.20 ms"):
        assert any(number in line for line in lines), f"{number} is broken over lines"
    assert last.startswith("verdict: fail")


def test_equal_channels_share_a_row_that_shows_the_worst() -> None:
    text = printed(result())
    assert text.count("peak current of the") == 1
    assert "lane 23, and 23 more" in text  # lane 23 carries the most of the made-up lanes
    assert "lane 0, and 23 more" in text


def test_failures_come_first_and_passes_last() -> None:
    rows = [line.split()[0] for line in printed(result()).splitlines()[4:] if line[:1].strip()]
    assert rows[:6] == ["fail", "destroy", "limit-missing", "tight", "pass", "fail"]


def test_the_last_line_names_verdict_counts_picture_and_folder() -> None:
    last = printed(result(), 60).rstrip("\n").split("\n")[-1]
    assert last == (
        "verdict: fail - of 50 findings 24 fail, 1 limit-missing, 1 tight, 24 pass. "
        "Picture out/rush/overview.png; all files in out/rush"
    )
    assert printed(result(), picture=None).rstrip().endswith("All files in out/rush")


@pytest.mark.parametrize("verdict", ["fail", "tight", "unproven", "limit-missing"])
def test_whatever_does_not_pass_is_said_in_a_sentence(verdict: Verdict) -> None:
    found = finding(verdict, 7, sentence="Needle 7 does something that matters.")
    assert "Needle 7 does something that matters." in printed(result((found, finding("pass", 3))))


def test_a_pass_needs_no_sentence() -> None:
    assert "carries" not in printed(result((finding("pass"),)))


def test_of_very_many_sentences_the_rest_is_counted() -> None:
    many = tuple(
        finding("fail", n, part=f"diode {n:02}", sentence=f"Seed slot {n:02} burns.") for n in range(MOST_SENTENCES + 5)
    )
    text = printed(result(many))
    assert text.count("burns.") == MOST_SENTENCES
    assert "and 5 more in findings.json" in text


def test_equal_assumptions_are_listed_once_with_their_number() -> None:
    text = unwrapped(printed(result()))
    assert text.count("core loss 12.0 kohm") == 1
    assert "coil lane 0, and 23 more: core loss 12.0 kohm (solid core, from memory)" in text
    assert "supply: resistance 20.0 mohm (enclosed switching supply, from memory)" in text


def test_assumptions_that_differ_in_value_stay_apart() -> None:
    assumed = (
        Assumption("coil a", "core loss", "12 kohm", "x"),
        Assumption("coil b", "core loss", "9 kohm", "x"),
    )
    text = printed(result(assumptions=assumed))
    assert "12 kohm" in text
    assert "9 kohm" in text


def test_an_audit_that_holds_takes_one_line() -> None:
    text = unwrapped(printed(result()))
    assert f"passivity and refinement hold in 2 corners: {COLD}; {HOT}" in text


def test_a_failed_audit_says_in_which_corner_what_was_beyond_its_bound() -> None:
    text = unwrapped(printed(result((finding("pass"),), proven=False)))
    assert f"failed: refinement ({HOT}; step 2 us): coil rail 4.2 %, beyond 1 %" in text
    assert f"hold in 1 corner: {COLD}" in text
    assert "verdict: unproven - the audit did not hold" in text


def test_without_an_audit_nothing_is_called_proven() -> None:
    text = printed(result((), audit=(), traces=None))
    assert "nothing here is proven" in text
    assert "verdict: unproven - nothing was judged" in text


def entry(criterion: Literal["passivity", "refinement"], run: str, passed: bool = True) -> AuditEntry:
    return AuditEntry(criterion, HOT, run, "coil rail", 0.4 if passed else 3.0, 1.0, "%", passed)


@pytest.mark.parametrize(
    ("entries", "why"),
    [
        ((), "no second run"),
        ((entry("passivity", "coarse"),), "no second run"),
        (
            (entry("passivity", "fine"), entry("refinement", "coarse against fine", passed=False)),
            "coil rail 3 %, beyond 1 %",
        ),
    ],
    ids=["never run", "no repeat", "moved"],
)
def test_an_unproven_corner_says_why(entries: tuple[AuditEntry, ...], why: str) -> None:
    judged = result((finding("pass"),), audit=(CornerAudit(HOT, entries, False),), verdict="unproven")
    assert not judged.proven
    assert why in unwrapped(printed(judged))


def test_missing_limits_that_count_as_broken_are_named_as_the_reason() -> None:
    last = printed(result((finding("limit-missing", 1),), strict=True)).rstrip().split("\n")[-1]
    assert "verdict: fail - 1 limit not given, and a missing limit counts as broken" in last


def test_cautions_and_the_time_spent_are_always_there() -> None:
    text = unwrapped(printed(result()))
    assert all(caution in text for caution in CAUTIONS)
    assert "assemble 100 ms; ngspice 12 s; audit 1.5 s" in text


def test_names_are_shown_as_they_stand_and_cannot_steer_the_terminal() -> None:
    text = printed(result((finding("fail", 1, sentence="[red]Tray[/red] \x1b[2Jgate :gear: fails.", label="[b]7"),)))
    assert "[red]Tray[/red] [2Jgate :gear: fails." in text
    assert "[b]7" in text
    assert "\x1b" not in text


def test_a_value_just_beyond_its_limit_does_not_read_as_equal() -> None:
    assert value_and_limit(finding("fail", value=48.04, limit=48.0, unit="V")) == ("48.04 V", "48.00 V")
    assert value_and_limit(finding("tight", value=48.0, limit=48.0, unit="V")) == ("48.0 V", "48.0 V")


@pytest.mark.parametrize(
    ("share", "text"),
    [
        (-0.27, "-27 %"), (0.042, "4.2 %"), (-0.0004, "-0.04 %"), (0.0, "0 %"), (1.0, "100 %"),
        (-12.3, "-1230 %"), (None, "-"), (float("nan"), "-"), (0.0996, "10 %"), (0.00096, "0.1 %"),
    ],
)  # fmt: skip
def test_margins_keep_their_sign_and_never_read_as_nothing(share: float | None, text: str) -> None:
    assert percent(share) == text


@pytest.mark.parametrize(
    ("seconds", "text"),
    [(1.23456, "1.2346 s"), (0.4123, "412.3 ms"), (0.0124, "12.40 ms"), (4.2e-5, "42.00 us"), (0.0, "0 s")],
)  # fmt: skip
def test_times_are_fine_enough_to_be_found_on_an_oscilloscope(seconds: float, text: str) -> None:
    assert moment(seconds) == text


def test_a_permutation_of_the_findings_prints_the_same() -> None:
    judged = result()
    assert printed(judged) == printed(result(judged.findings[::-1], verdict=judged.verdict))


def test_groups_lose_no_finding() -> None:
    findings = result().findings
    assert sorted(f.key for g in grouped(findings) for f in g.members) == sorted(f.key for f in findings)


STUDY = Table(
    (
        Column("clamp"),
        Column("channel"),
        Column("peak at the switch", "V"),
        Column("lets go in", "s"),
        Column("verdict"),
    ),
    (
        ("diode-zener: fast-2a, 24v-5w (the board's)", "gate 0", 57.3, 606e-6, "tight"),
        ("resistor: 16.0 ohm", "gate 0", 54.3, None, "limit-missing"),
    ),
)


@pytest.mark.parametrize("width", [40, 60, 80, 100, 160])
def test_a_table_of_a_scenario_loses_no_word_and_breaks_no_number(width: int) -> None:
    text = io.StringIO()
    Console(file=text, width=width).print(study_table(STUDY, width))
    lines = text.getvalue().splitlines()
    assert max(map(len, lines)) <= width
    whole = " ".join(" ".join(lines).split())  # text in lines may break between a number and its unit
    for word in (
        "diode-zener:",
        "fast-2a,",
        "resistor:",
        "gate",
        "57.3 V",
        "606 us",
        "54.3 V",
        "tight",
        "limit-missing",
    ):
        assert any(word in line for line in lines) or (width < 80 and word in whole), word
    assert " -" in whole
