"""findings.json keeps its contract."""

import json
import math
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from jsonschema import Draft202012Validator
from made_up_results import finding, result

from boardsim.report.json_report import SCHEMA, SCHEMA_FILE, result_to_dict, write_findings


@pytest.fixture(scope="module")
def validator() -> Draft202012Validator:
    schema = json.loads(SCHEMA_FILE.read_text("utf-8"))
    Draft202012Validator.check_schema(schema)
    assert schema["title"] == SCHEMA
    return Draft202012Validator(schema)


def read_strictly(path: Path) -> Any:
    def refuse(word: str) -> None:
        raise AssertionError(f"{word} is not JSON")

    return json.loads(path.read_text("utf-8"), parse_constant=refuse)


def test_a_mixed_result_follows_the_schema(validator: Draft202012Validator, tmp_path: Path) -> None:
    write_findings(result(), tmp_path / "findings.json")
    validator.validate(read_strictly(tmp_path / "findings.json"))


def test_an_engine_that_delivered_nothing_follows_the_schema(validator: Draft202012Validator, tmp_path: Path) -> None:
    write_findings(result((), audit=(), traces=None, timings=(), firing=()), tmp_path / "findings.json")
    read = read_strictly(tmp_path / "findings.json")
    validator.validate(read)
    assert (read["verdict"], read["audit"]["passed"]) == ("unproven", False)


def test_numbers_that_are_not_finite_become_null(validator: Draft202012Validator, tmp_path: Path) -> None:
    broken = finding("unproven", 3, value=math.nan, margin=-math.inf, at=math.nan)
    write_findings(result((broken,)), tmp_path / "findings.json")
    read = read_strictly(tmp_path / "findings.json")
    validator.validate(read)
    assert [read["findings"][0][key] for key in ("value", "margin", "at")] == [None, None, None]


def test_numpy_numbers_are_written_as_numbers(validator: Draft202012Validator, tmp_path: Path) -> None:
    write_findings(
        result((finding(channel=np.int64(5), value=np.float64(1.25)),)),  # type: ignore[arg-type]
        tmp_path / "findings.json",
    )
    read = read_strictly(tmp_path / "findings.json")
    validator.validate(read)
    assert (read["findings"][0]["channel"], read["findings"][0]["value"]) == (5, 1.25)


def test_the_worst_finding_stands_first_and_passes_last() -> None:
    verdicts = [f["verdict"] for f in result_to_dict(result())["findings"]]
    assert list(dict.fromkeys(verdicts)) == ["fail", "limit-missing", "tight", "pass"]
    failing = [f["margin"] for f in result_to_dict(result())["findings"] if f["verdict"] == "fail"]
    assert failing == sorted(failing)


def test_every_finding_is_kept_with_its_numbers() -> None:
    rail = next(f for f in result_to_dict(result())["findings"] if f["check"] == "rail-sag")
    assert (rail["value"], rail["limit"], rail["unit"], rail["lasting"], rail["channel"]) == (
        19.8,
        19.0,
        "V",
        0.0031,
        None,
    )
    assert len(result_to_dict(result())["findings"]) == 50


@pytest.mark.parametrize(
    ("change", "place"),
    [
        ({"verdict": "ok"}, "verdict"),
        ({"schema": "boardsim-findings/2"}, "schema"),
        ({"extra": 1}, "extra"),
        ({"findings": [{"check": "overcurrent"}]}, "channel"),
    ],
)
def test_the_schema_refuses_what_breaks_the_contract(
    validator: Draft202012Validator, change: dict[str, Any], place: str
) -> None:
    errors = list(validator.iter_errors({**result_to_dict(result()), **change}))
    assert errors
    assert any(place in str(error) for error in errors)


def test_the_schema_refuses_a_pass_without_a_limit(validator: Draft202012Validator) -> None:
    written = result_to_dict(result((finding("pass"),)))
    written["findings"][0]["limit"] = None
    assert not validator.is_valid(written)
