"""Latching coils in board files: what fits together, what is refused, and what is listed."""

from __future__ import annotations

from typing import Any

import pytest
from pydantic import ValidationError

from boardsim.parts.base import NOMINAL
from boardsim.parts.latching import LatchingCoil
from boardsim.parts.rules import LatchRule

GIVEN = {"kind": "latching", "resistance": "24 ohm", "inductance": "12 mH"}


def coil(**fields: Any) -> LatchingCoil:
    return LatchingCoil.model_validate({**GIVEN, **fields})


def refusal(**fields: Any) -> str:
    with pytest.raises(ValidationError) as found:
        coil(**fields)
    return str(found.value)


def test_a_current_cannot_both_flip_it_and_not() -> None:
    text = refusal(flips_at="0.5 A", holds_below="0.6 A")
    assert "holds_below of 600 mA must not be above flips_at of 500 mA" in text
    assert coil(flips_at="0.5 A", holds_below="0.5 A").harmless is not None


@pytest.mark.parametrize(("key", "instead"), [("pull_in", "flips_at and flips_after"), ("release", "holds_below")])
def test_it_neither_pulls_in_nor_lets_go(key: str, instead: str) -> None:
    assert f"give {instead} in the place of {key}" in refusal(**{key: "0.2 A"})


def test_an_unknown_start_is_listed_unless_it_is_said() -> None:
    def listed(**fields: Any) -> list[str]:
        stamp = coil(**fields).stamp("c0", "gate", "a", "b", NOMINAL, None)
        return [a.value for a in stamp.assumptions if a.quantity == "state before the first pulse"]

    assert listed() == ["not known: every pulse has to flip it, whatever came before"]
    assert listed(starts="unknown") == []
    assert listed(starts="forward") == []


def test_what_was_not_given_is_a_limit_without_a_value() -> None:
    stamp = coil().stamp("c0", "gate", "a", "b", NOMINAL, None)
    for rule in stamp.rules:
        if isinstance(rule, LatchRule):
            assert (rule.at.value, rule.after.value, rule.holds.value) == (None, None, None)
