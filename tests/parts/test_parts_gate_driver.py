"""A gate driver's record: what of its numbers cannot be meant together."""

from __future__ import annotations

import pytest
from pydantic import ValidationError

from boardsim.parts.gate_driver import GateDriver


def driver(**given: str) -> GateDriver:
    return GateDriver.model_validate({"supply": "12 V", "dead_time": "1 us", **given})


def test_an_edge_longer_than_the_delay_is_refused() -> None:
    assert driver(edge="40 ns", delay="40 ns").edge.typ == pytest.approx(40e-9)
    with pytest.raises(ValidationError, match="longer than the delay"):
        driver(edge="100 ns", delay="60 ns")


def test_a_driver_by_name_is_asked_for_its_numbers() -> None:
    with pytest.raises(
        ValidationError, match=r"no records by name, and 'HB-2' is one; .* dead_time = .*it can also have: delay"
    ):
        GateDriver.model_validate("HB-2")
