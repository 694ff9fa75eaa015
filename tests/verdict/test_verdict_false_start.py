"""A run that does not begin at rest is refused: its every reading would be wrong and look right."""

from __future__ import annotations

from types import SimpleNamespace

import pytest

from boardsim.errors import NoConvergence
from boardsim.verdict.readings import _refuse_false_start

DECK = SimpleNamespace(rest={"supply_in": 22.8})


@pytest.mark.parametrize(
    ("rail", "drawn"),
    [(24.0, 0.0), (32.0, 1e-9), (16.0, 1e-9), (23.1, 5.0), (0.0, 0.0)],
    ids=["above", "at the peak of a ringing", "below with nothing on", "above with coils on", "not there"],
)
def test_a_rail_that_the_supply_cannot_have_made_is_refused(rail: float, drawn: float) -> None:
    with pytest.raises(NoConvergence, match="began with a rail of"):
        _refuse_false_start(rail, drawn, DECK)  # type: ignore[arg-type]


@pytest.mark.parametrize(("rail", "drawn"), [(22.8, 0.0), (22.80009, 2e-10), (22.7, 1e-5), (15.0, 8.0)])
def test_a_rail_at_rest_or_below_what_coils_draw_is_taken(rail: float, drawn: float) -> None:
    _refuse_false_start(rail, drawn, DECK)  # type: ignore[arg-type]
