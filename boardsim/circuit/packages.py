"""What a package has once for all its channels: quantities and rules of its own, told apart from other packages'."""

from __future__ import annotations

from dataclasses import replace

from boardsim.parts.base import Stamp
from boardsim.parts.rules import EnergyRule, HeatRule, LeastRule, MeanRule, PeakRule, PulseRule, Rule, SumRule


def of_sum(rule: SumRule, package: str) -> tuple[str, SumRule]:
    """The quantity that a package's channels add up to, by a name of the package's own, and the rule that judges it."""
    if isinstance(rule, PeakRule):
        quantity = f"{rule.quantity}, {package}"
        return quantity, replace(rule, quantity=quantity)
    (name,) = rule.quantities
    quantity = f"{name}, {package}"
    return quantity, replace(rule, quantities=(quantity,))


def of_package(stamp: Stamp, package: str) -> Stamp:
    """A stamp whose quantities carry the package's name: those of the whole board are told apart by it.

    Raises
    ------
    TypeError
        If one of its rules can only be judged on a channel.
    """

    def named(quantity: str) -> str:
        return f"{quantity}, {package}"

    def rule_of(rule: Rule) -> Rule:
        match rule:
            case PeakRule() | LeastRule():
                return replace(rule, quantity=named(rule.quantity))
            case MeanRule() | PulseRule():
                return replace(rule, quantities=tuple(named(q) for q in rule.quantities))
            case EnergyRule():
                return replace(rule, quantities=(named(rule.quantities[0]), named(rule.quantities[1])))
            case HeatRule():
                growing = None if rule.growing is None else (named(rule.growing[0]), named(rule.growing[1]))
                return replace(rule, powers=tuple((named(v), named(i)) for v, i in rule.powers), growing=growing)
            case _:
                raise TypeError(f"{type(rule).__name__} is judged on channels, not on a package")

    if stamp.totals or stamp.joins:
        raise TypeError("what a package has once is a sum already, and belongs to no channel")
    return replace(
        stamp,
        probes=tuple(replace(p, quantity=named(p.quantity)) for p in stamp.probes),
        ports=tuple(
            replace(
                p,
                part=f"{p.part} of {package}",
                pairs=tuple((named(v), named(i)) for v, i in p.pairs),
                store=None if p.store is None else (named(p.store[0]), p.store[1]),
            )
            for p in stamp.ports
        ),
        rules=tuple(rule_of(r) for r in stamp.rules),
    )
