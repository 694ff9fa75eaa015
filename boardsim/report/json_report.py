"""findings.json: everything that a run found, for other programs. `findings.schema.json` is its contract."""

from __future__ import annotations

import json
import math
from pathlib import Path
from typing import Any

from boardsim.report.files import write_text
from boardsim.report.wording import by_severity
from boardsim.verdict.findings import CAUTIONS, AuditEntry, Finding, Result

SCHEMA = "boardsim-findings/1"
SCHEMA_FILE = Path(__file__).with_name("findings.schema.json")


def result_to_dict(result: Result) -> dict[str, Any]:
    """A result as plain values for JSON, findings by severity; numbers that are not finite become None."""
    return {
        "schema": SCHEMA,
        "board": result.board,
        "pattern": result.pattern,
        "duration": _number(result.duration),
        "verdict": result.verdict,
        "findings": [_finding(f) for f in by_severity(result.findings)],
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
    }


def write_findings(result: Result, path: Path) -> None:
    """Write findings.json, whole or not at all.

    Raises
    ------
    InputError
        If the file cannot be written.
    """
    write_text(path, json.dumps(result_to_dict(result), indent=2, allow_nan=False, ensure_ascii=False) + "\n")


def _finding(finding: Finding) -> dict[str, Any]:
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
