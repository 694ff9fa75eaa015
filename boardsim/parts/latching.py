"""A latching coil: a permanent magnet holds its state without current, and a pulse of the right sign flips it."""

from __future__ import annotations

from dataclasses import replace
from typing import Annotated, Any, ClassVar, Literal

from pydantic import Field, model_validator

from boardsim.errors import QuantityError
from boardsim.parts.base import Assumption, Corner, Stamp, Surroundings
from boardsim.parts.coil import Coil
from boardsim.parts.rules import IdleRule, LatchRule, Limit, PullInRule, ReleaseRule, Rule
from boardsim.quantities import CURRENT, POSITIVE_TIME, Quantity

_SIGNS = {"forward": 1, "back": -1, "unknown": 0}
_INSTEAD = {"pull_in": "flips_at and flips_after", "release": "holds_below"}
ITS_OWN_NUMBERS = "a latching coil is held by its magnet, without current"


class LatchingCoil(Coil):
    """A coil that flips a state which a permanent magnet holds.

    Notes
    -----
    Electrically a coil of fixed inductance. Its state is +1 or -1. It becomes +1 once i >= I_f has lasted for t_f without a
    break, and -1 once -i >= I_f has; |i| < I_h never changes it; what lies between, or is shorter, may or may not flip it, and so
    counts as a failure to flip where a flip is commanded and as a flip where none is. I_f (`flips_at`) and t_f (`flips_after`) are
    what a sheet guarantees to flip it, I_h (`holds_below`) what it guarantees not to. This is how sheets of latching (polarized,
    bistable) relays and solenoids specify them: operate (set, reset) voltage and least pulse width; common practice. Left out:
    that the magnet weakens when hot and the threshold with it (give the figures that hold over the temperatures of the board), and
    the voltage that the moving armature induces. A stronger current the other way than the magnet stands is not judged.
    """

    role: ClassVar[str] = "coil"
    harmless_name: ClassVar[str] = "current that never flips it"
    kind: Literal["latching"] = "latching"  # type: ignore[assignment]  # a kind of its own
    flips_at: Annotated[Quantity, CURRENT] | None = Field(
        None, description="current at which it is sure to flip, in either direction"
    )
    flips_after: Annotated[Quantity, POSITIVE_TIME] | None = Field(
        None, description="how long the current has to stay at flips_at or above, until it has flipped"
    )
    holds_below: Annotated[Quantity, CURRENT] | None = Field(
        None, description="current below which it never flips, however long that lasts"
    )
    starts: Literal["forward", "back", "unknown"] = Field(
        "unknown",
        description="state before the first pulse: where a forward or a reverse pulse sends it; if unknown, every pulse has to flip it",
    )

    @model_validator(mode="before")
    @classmethod
    def _has_numbers_of_its_own(cls, value: Any) -> Any:
        if isinstance(value, dict):
            for key, instead in _INSTEAD.items():
                if key in value:
                    raise QuantityError(f"{ITS_OWN_NUMBERS}: give {instead} in the place of {key}")
        return value

    @model_validator(mode="after")
    def _holds_below_what_flips_it(self) -> LatchingCoil:
        if self.flips_at is not None and self.holds_below is not None and self.holds_below.max > self.flips_at.min:
            raise QuantityError(
                f"holds_below of {self.holds_below} must not be above flips_at of {self.flips_at}: no current both flips it and does not"
            )
        return self

    def taken_at_ends(self) -> tuple[Quantity, ...]:
        """What flips it at its upper end, what never does at its lower one."""
        return tuple(q for q in (self.flips_at, self.flips_after, self.holds_below) if q is not None)

    @property
    def harmless(self) -> Quantity | None:
        """What never flips it. [A]"""
        return self.holds_below

    def stamp(self, name: str, label: str, a: str, b: str, corner: Corner, around: Surroundings | None) -> Stamp:
        """A coil's, held against what flips it and what does not: it has no current at which it pulls in or lets go."""
        plain = super().stamp(name, label, a, b, corner, around)
        holds = Limit.of(
            self.holds_below,
            self.harmless_name,
            "A",
            None,
            self.holds_below.min if self.holds_below else None,
        )
        kept: list[Rule] = []
        for rule in plain.rules:
            if isinstance(rule, IdleRule):
                kept.append(replace(rule, limit=holds))
            elif not isinstance(rule, PullInRule | ReleaseRule):
                kept.append(rule)
        return replace(plain, rules=(*kept, *self._flips(holds)))

    def _flips(self, holds: Limit) -> tuple[LatchRule, ...]:
        at = Limit.of(self.flips_at, "current that flips it", "A", None, self.flips_at.max if self.flips_at else None)
        after = Limit.of(
            self.flips_after, "time to flip", "s", None, self.flips_after.max if self.flips_after else None
        )
        starts = _SIGNS[self.starts]
        return (
            LatchRule("flip", "i_coil", at, after, holds, starts),
            LatchRule("stray-flip", "i_coil", at, after, holds, starts),
        )

    def more_assumed(self, label: str) -> tuple[Assumption, ...]:
        """What is taken of its state before the first pulse."""
        if "starts" in self.model_fields_set:
            return ()
        text = "not known: every pulse has to flip it, whatever came before"
        why = "starts is not given; the machine may have been moved by hand"
        return (Assumption(f"coil {label}", "state before the first pulse", text, why),)
