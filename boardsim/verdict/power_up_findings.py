"""What flows before the first enabled frame, held against what matters: findings, what they hang on, what to try."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np

from boardsim.board.bridges import forwards
from boardsim.board.reader import Board, Channel
from boardsim.circuit.boot import Boot
from boardsim.parts.base import Corner
from boardsim.quantities import in_units
from boardsim.verdict.chain_findings import where_limits_hold
from boardsim.verdict.findings import Finding, verdict_of
from boardsim.verdict.power_up import BootReading, harmless, settled

CHECK = "uncommanded"


def judge_boot(board: Board, boot: Boot, found: BootReading, corner: Corner, nominal: tuple[str, ...]) -> list[Finding]:
    """Every channel's current before the first enabled frame against what counts, and the end of clear against the frame."""
    judged = _judge_channel if boot.reset is None else _judge_reset
    findings = [judged(board, boot, c, found, corner, nominal) for c in forwards(board)]
    if found.cleared_until is not None and boot.reset is None:
        findings += where_limits_hold(board, [_judge_clear(board, boot, found, nominal)])
    return findings


def quantity_of(boot: Boot) -> str:
    """What is read of a boot."""
    return f"{'current before the first frame' if boot.reset is None else 'time fed after a reset'}, {boot.name}"


def _judge_channel(
    board: Board, boot: Boot, c: Channel, found: BootReading, corner: Corner, nominal: tuple[str, ...]
) -> Finding:
    mine = found.channels[c.number]
    limit = harmless(board, c, corner)
    margin = (limit - mine.peak) / limit
    lasts = mine.last > limit
    given = c.coil.harmless
    share = f"{board.power_up.harmless.typ:.0%} of {c.coil_name}'s "
    share += f"{c.coil.harmless_name}{'' if given is not None else ', taken as 10 % of its settled one'}"
    what = "before the first enabled frame it carries"
    said = f"{c.label}: {what} up to {in_units(mine.peak, 'A')} ({boot.name}); {in_units(limit, 'A')} count ({share})"
    if margin < 0:
        said = f"{c.label}: {what} {in_units(mine.peak, 'A')} at {in_units(mine.at, 's', 4)} ({boot.name}), and its coil takes "
        said += f"{in_units(mine.energy, 'J')}; {in_units(limit, 'A')} count ({share}); "
        said += _only_the_frame(boot) if lasts else "it ends by itself"
        said += f"; try: {_remedy(board, c, after_reset=False)}"
    return Finding(
        CHECK,
        quantity_of(boot),
        c.coil_name,
        c.number,
        c.label,
        mine.peak,
        limit,
        "A",
        margin,
        mine.at,
        "destroy" if lasts else "misbehave",
        verdict_of(margin, board.limits.guard_band.typ),
        said,
        found.corner,
        str(given.origin if given is not None else board.power_up.harmless.origin),
        nominal_only=nominal,
        assumed=tuple(_hangs_on(board, c)),
        scale=settled(board, c, corner),
        probes=("i_coil",),
    )


def _only_the_frame(boot: Boot) -> str:
    return (
        f"only the first enabled frame at {in_units(boot.until, 's', 4)} ends it, and a controller that is being "
        "programmed or held in reset sends none"
    )


def _judge_reset(
    board: Board, boot: Boot, c: Channel, found: BootReading, corner: Corner, nominal: tuple[str, ...]
) -> Finding:
    """How long a channel that was on is still fed after a reset, against the time that a reset may take."""
    assert boot.reset is not None
    mine, allowed = found.channels[c.number], board.power_up.reset_off
    lasts = not np.isfinite(mine.fed)
    value = boot.until - boot.reset if lasts else mine.fed
    margin = (allowed.min - value) / allowed.min
    taken = f"for {in_units(value, 's')} more and takes {in_units(mine.energy, 'J')}"
    said = f"{c.label}: after a reset at {in_units(boot.reset, 's', 4)} its coil is fed {taken} ({boot.name}); "
    said += f"{in_units(allowed.min, 's')} are allowed (reset_off{', assumed' if allowed.assumed() else ''})"
    if margin < 0:
        said += (
            f"; {_only_the_frame(boot) if lasts else 'it ends by itself'}; try: {_remedy(board, c, after_reset=True)}"
        )
    return Finding(
        CHECK,
        quantity_of(boot),
        c.coil_name,
        c.number,
        c.label,
        value,
        allowed.min,
        "s",
        margin,
        boot.reset + value,
        "destroy" if lasts else "misbehave",
        verdict_of(margin, board.limits.guard_band.typ),
        said,
        found.corner,
        str(allowed.origin),
        nominal_only=nominal,
        assumed=tuple(_reset_hangs_on(board, lasts)),
        probes=("i_coil",),
    )


def _reset_hangs_on(board: Board, lasts: bool) -> Iterator[str]:
    """Assumed numbers that the time after a reset hangs on: how the rails came is long past."""
    table, chain = board.power_up, board.chain
    if table.reset_off.assumed():
        yield "time that a reset may take"
    if chain.output_enable is None:
        yield "output enable tied low"
    if lasts and table.first_frame.assumed():
        yield "time of the first frame"
    register = chain.register_
    if chain.output_enable is not None and not register.open_drain and register.off_leakage.assumed():
        yield "leakage of outputs that are not enabled"


def _hangs_on(board: Board, c: Channel) -> Iterator[str]:
    """Assumed numbers that the current before the first frame, and what of it counts, hang on."""
    table = board.power_up
    for name, field in (("rails' order", table.coils_at), ("rails' rise", table.coils_rise)):
        if field.assumed():
            yield name
    if table.first_frame.assumed():
        yield "time of the first frame"
    if table.harmless.assumed():
        yield "current that does not matter"
    if c.coil.harmless is None:
        yield c.coil.harmless_name
    if board.chain.output_enable is None:
        yield "output enable tied low"


def _remedy(board: Board, c: Channel, after_reset: bool) -> str:
    """What usually keeps a channel off until the first frame."""
    line = board.chain.output_enable
    if line is None or line.rests == "low" or line.rests is None:
        return "hold output enable high with a pull_up, and let the firmware pull it low after its first frame"
    if line.capacitance is not None:
        behind = "rises slowly once its pin lets go" if after_reset else "lags behind the logic rail"
        return f"a smaller capacitor or pull-up at output enable: it {behind}"
    if not c.held_off:
        return "a pull-down at its gate, which floats while the outputs are not enabled"
    if c.switch.in_the_chain:
        return "a smaller pull-up at output enable"
    if after_reset:
        return "a smaller pull-down at its gate, or a longer reset_off in [power_up] where that does no harm"
    return "a smaller pull-down at its gate, and the coil rail after the logic rail"


def _judge_clear(board: Board, boot: Boot, found: BootReading, nominal: tuple[str, ...]) -> Finding:
    """Clear must have ended before anything is shifted in: what comes earlier is lost."""
    assert found.cleared_until is not None
    first = boot.frames[0][0]
    until = found.cleared_until
    never = not np.isfinite(until)
    value = boot.duration if never else until
    margin = (first - value) / first
    ends = in_units(value, "s", 4)
    when = f"not surely high within the run, which ends at {ends}" if never else f"surely high from {ends} on"
    said = f"chain: clear is {when}; "
    said += f"the first register frame starts at {in_units(first, 's', 4)}"
    said += "; what is shifted in before is lost; try: a smaller resistor or capacitor at clear" if margin < 0 else ""
    return Finding(
        "clear",
        "clear, low at least until" if never else "end of clear before the first frame",
        "chain",
        None,
        "chain",
        value,
        first,
        "s",
        margin,
        None if never else value,
        "misbehave",
        verdict_of(margin, board.limits.guard_band.typ),
        said,
        found.corner,
        str(board.power_up.first_frame.origin),
        nominal_only=nominal,
        assumed=("time of the first frame",) if board.power_up.first_frame.assumed() else (),
    )
