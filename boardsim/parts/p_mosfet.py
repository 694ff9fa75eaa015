"""A P-channel power MOSFET, from its datasheet's figures without their minus signs."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Any, ClassVar, Literal, Self

from pydantic import model_validator

from boardsim.errors import QuantityError
from boardsim.parts.mosfet import Mosfet

_SIGNED = ("threshold_drift", "breakdown_drift", "on_resistance_growth", "at")
"""Keys whose own sign means something: drifts, of the magnitudes, and temperatures."""


class PMosfet(Mosfet):
    """A P-channel part: every number as its magnitude, without the minus sign that data sheets print.

    Notes
    -----
    The mirror image of an N-channel part: the same equations, `Mosfet.parameters`, with every voltage and current of the
    opposite sign. Drifts are those of the magnitudes: a threshold of -2 V whose magnitude falls by 5 mV/K has one of
    -5 mV/K.
    """

    role: ClassVar[str] = "component"
    kind: Literal["p-mosfet"] = "p-mosfet"
    mirrored: ClassVar[bool] = True

    @model_validator(mode="after")
    def _of_ours(self) -> Self:
        if self.model is not None:
            raise QuantityError(
                "a p-mosfet takes no vendor's model: its breakdown would go unchecked; leave model out, ours is shaped by the figures"
            )
        return self

    @model_validator(mode="before")
    @classmethod
    def _magnitudes(cls, value: Any) -> Any:
        for key, text in _numbers(value):
            if text.lstrip().startswith(("-", "\N{MINUS SIGN}")):
                raise QuantityError(
                    f'{key} is "{text}"; figures of a p-mosfet are given as magnitudes: leave out the minus sign that the '
                    "datasheet prints"
                )
        return value


def _numbers(value: Any) -> Iterator[tuple[str, str]]:
    """Keys and texts of a record and of the tables in it that hold magnitudes."""
    if not isinstance(value, dict):
        return
    for key, inner in value.items():
        if key in _SIGNED or key in ("kind", "title", "source", "sources"):
            continue
        if isinstance(inner, str):
            yield str(key), inner
        for table in inner if isinstance(inner, list | tuple) else (inner,):
            yield from ((f"{key}.{k}", text) for k, text in _numbers(table))
