"""findings.json: everything that a run found, for other programs. `findings.schema.json` is its contract."""

from __future__ import annotations

import json
import math
from collections.abc import Mapping
from pathlib import Path
from typing import Any

from boardsim.report.files import write_text
from boardsim.report.wording import by_severity
from boardsim.verdict.findings import CAUTIONS, Acceptance, AuditEntry, Finding, Result
from boardsim.verdict.studies import Table

Key = tuple[str, str, str, str]
SCHEMA = "boardsim-findings/1"
SCHEMA_FILE = Path(__file__).with_name("findings.schema.json")


def result_to_dict(result: Result, pictures: Mapping[Key, str] | None = None) -> dict[str, Any]:
    """A result as plain values for JSON, findings by severity; numbers that are not finite become None.

    Parameters
    ----------
    result : Result
    pictures : mapping
        File name of the close-up of a finding, by the finding's key.
    """
    shown = pictures or {}
    return {
        "schema": SCHEMA,
        "board": result.board,
        "pattern": result.pattern,
        "duration": _number(result.duration),
        "verdict": result.verdict,
        "findings": [_finding(f, shown.get(f.key)) for f in by_severity(result.findings)],
        "assumptions": [
            {"part": a.part, "quantity": a.quantity, "value": a.value, "why": a.why} for a in result.assumptions
        ],
        "engine": result.engine,
        "audit": {
            "passed": result.proven,
            "entries": [_entry(e) for corner in result.audit for e in corner.entries],
        },
        "firing": list(result.firing),
        "corners": [audit.corner for audit in result.audit],
        "timings": [{"stage": t.stage, "seconds": _number(t.seconds)} for t in result.timings],
        "cautions": list(CAUTIONS),
        "notes": list(result.notes),
        "strict": result.strict,
        "table": None if result.study is None else _table(result.study.table),
    }


def write_findings(result: Result, path: Path, pictures: Mapping[Key, str] | None = None) -> None:
    """Write findings.json, whole or not at all; `pictures` as for `result_to_dict`.

    Raises
    ------
    InputError
        If the file cannot be written.
    """
    write_json(path, result_to_dict(result, pictures))


def write_json(path: Path, values: Mapping[str, Any]) -> None:
    """Write plain values as JSON, whole or not at all.

    Raises
    ------
    InputError
        If the file cannot be written.
    """
    write_text(path, json.dumps(values, indent=2, allow_nan=False, ensure_ascii=False) + "\n")


def _finding(finding: Finding, picture: str | None) -> dict[str, Any]:
    return {
        "check": finding.check,
        "channel": None if finding.channel is None else int(finding.channel),
        "label": finding.label,
        "part": finding.part,
        "quantity": finding.quantity,
        "value": _number(finding.value),
        "limit": _number(finding.limit),
        "unit": finding.unit,
        "margin": _number(finding.margin),
        "at": _number(finding.at),
        "lasting": _number(finding.lasting),
        "consequence": finding.consequence,
        "verdict": finding.verdict,
        "sentence": finding.sentence,
        "corner": finding.corner,
        "nominal_only": list(finding.nominal_only),
        "assumed": list(finding.assumed),
        "source": finding.source,
        "channels": [int(c) for c in finding.channels],
        "accepted": _acceptance(finding.accepted),
        "picture": picture,
    }


def _acceptance(accepted: Acceptance | None) -> dict[str, Any] | None:
    if accepted is None:
        return None
    return {"reason": accepted.reason, "until": accepted.until.isoformat(), "expired": accepted.expired}


def _table(table: Table) -> dict[str, Any]:
    return {
        "columns": [{"name": c.name, "unit": c.unit} for c in table.columns],
        "rows": [[cell if isinstance(cell, str) else _number(cell) for cell in row] for row in table.rows],
    }


def _entry(entry: AuditEntry) -> dict[str, Any]:
    return {
        "criterion": entry.criterion,
        "corner": entry.corner,
        "run": entry.run,
        "subject": entry.subject,
        "measured": _number(entry.measured),
        "allowed": _number(entry.allowed),
        "unit": entry.unit,
        "passed": bool(entry.passed),
    }


def _number(value: float | None) -> float | None:
    # float() also takes numpy's numbers, which json refuses
    return float(value) if value is not None and math.isfinite(value) else None
