"""What a motion refuses, and what follows from its numbers by hand."""

from __future__ import annotations

import math

import pytest
from pydantic import ValidationError

from boardsim.parts.base import NOMINAL
from boardsim.parts.motion import Motion

GIVEN = {"travel": "5 mm", "mass": "20 g", "spring_preload": "1 N"}


@pytest.mark.parametrize(
    ("more", "said"),
    [
        ({"restitution": "1 %"}, "restitution must be between 2 % and 95 %"),
        ({"restitution": "99 %"}, "restitution must be between 2 % and 95 %"),
        ({"spring_preload": "0 N"}, "nothing brings it back"),
        ({"friction": "1.2 N"}, "nothing brings it back"),
        ({"moves": "down", "mass": "200 g"}, "nothing brings it back"),
        ({"impact": "5 mJ"}, "is none; write it such as '2 to 12 mJ'"),
        ({"contact": "100 ms"}, "would give way by"),
        ({"contact": "1 ns"}, "an impact lasts 1.00 us at least"),
        ({"mass": "0 g"}, "mass"),
        ({"travel": "-5 mm"}, "travel"),
    ],
)
def test_what_cannot_move_and_come_back_is_refused(more: dict[str, str], said: str) -> None:
    with pytest.raises(ValidationError, match=said):
        Motion.model_validate({**GIVEN, **more})


@pytest.mark.parametrize(("moves", "rest"), [("sideways", 1.0), ("up", 1.196133), ("down", 0.803867)])
def test_gravity_holds_it_at_its_rest_or_pulls_it_away(moves: str, rest: float) -> None:
    # m g of 20 g is 0.196133 N.
    assert Motion.model_validate({**GIVEN, "moves": moves}).rest_force == pytest.approx(rest, rel=1e-6)


def test_it_is_given_twice_the_time_of_a_free_flight_to_come_back() -> None:
    motion = Motion.model_validate({**GIVEN, "friction": "0.2 N"})
    assert motion.return_time == pytest.approx(2 * math.sqrt(2 * 20e-3 * 5e-3 / 0.8))


def test_a_stop_pushes_and_never_pulls_nor_harder_than_its_onset_allows() -> None:
    motion = Motion.model_validate({**GIVEN, "contact": "100 us"})
    stiff = 20e-3 * (math.pi / 100e-6) ** 2
    assert motion.pushed_back(2.5e-3, 1.0) == 0.0
    assert motion.pushed_back(5.001e-3, 0.0) == pytest.approx(-stiff * 1e-6, rel=1e-6)
    assert motion.pushed_back(-1e-6, 0.0) == pytest.approx(stiff * 1e-6)
    assert motion.pushed_back(5.001e-3, 1.0) == pytest.approx(-2.5 * stiff * 1e-6, rel=1e-6)
    assert motion.pushed_back(5.001e-3, -1.0) == 0.0
    assert motion.pushed_back(-1e-6, 1.0) == 0.0


def test_what_it_stores_is_motion_spring_and_gravity() -> None:
    import numpy as np

    motion = Motion.model_validate({**GIVEN, "spring_rate": "200 N/m", "moves": "up"})
    held = motion.stored(np.array([0.0, 5e-3]), np.array([0.0, 2.0]), NOMINAL)
    # 20 g at 2 m/s are 40 mJ; 1 N and m g over 5 mm, and 200 N/m: 5 + 0.980665 + 2.5 mJ.
    assert held == pytest.approx([0.0, 48.480665e-3])
