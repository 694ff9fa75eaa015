"""A stage that serves inside another, such as a level shifter: the same circuit and rules under other names."""

from __future__ import annotations

from dataclasses import fields, replace

from boardsim.parts.base import Stamp
from boardsim.parts.elements import Port
from boardsim.parts.rules import BreakdownRule, Rule

_OWN = "switch"  # what a stage calls itself


def nested(stamp: Stamp, who: str, suffix: str) -> Stamp:
    """The stamp of a switch that is a part of another switch.

    Parameters
    ----------
    stamp : Stamp
    who : str
        What it is there, such as "level shifter".
    suffix : str
        Of its quantities, so that they stand beside those of the switch around it.

    Returns
    -------
    Stamp
        The same elements; probes, ports, rules and assumptions under their new names.
    """
    assert not stamp.totals  # of packages, which nothing nested has
    return replace(
        stamp,
        probes=tuple(replace(p, quantity=p.quantity + suffix) for p in stamp.probes),
        ports=tuple(_port(p, who, suffix) for p in stamp.ports),
        rules=tuple(_rule(r, who, suffix) for r in stamp.rules),
        assumptions=tuple(replace(a, part=who if a.part == _OWN else a.part) for a in stamp.assumptions),
    )


def _port(port: Port, who: str, suffix: str) -> Port:
    store = None if port.store is None else (port.store[0] + suffix, port.store[1])
    pairs = tuple((v + suffix, i + suffix) for v, i in port.pairs)
    return replace(port, part=who if port.part == _OWN else f"{who} {port.part}", pairs=pairs, store=store)


def _rule(rule: Rule, who: str, suffix: str) -> Rule:
    changes: dict[str, object] = {}
    for field in fields(rule):
        value = getattr(rule, field.name)
        match field.name:
            case "quantity" | "voltage" | "current":
                changes[field.name] = value + suffix
            case "quantities":
                changes[field.name] = tuple(name + suffix for name in value)
            case "growing" if value is not None:
                changes[field.name] = tuple(name + suffix for name in value)
            case "powers":
                changes[field.name] = tuple((v + suffix, i + suffix) for v, i in value)
            case "what" | "advice":
                changes[field.name] = value.replace(_OWN, who)
    if isinstance(rule, BreakdownRule):
        changes["of"] = f" of the {who}"
    return replace(rule, **changes)  # type: ignore[arg-type]  # by the names of its own fields
