"""Can the chain of registers work at all? Levels, set-up and hold at every link, the highest clock, frame time and lateness."""

from __future__ import annotations

import time

from boardsim.board.corners import not_varied
from boardsim.board.reader import Board
from boardsim.firing.registers import frame_time
from boardsim.quantities import in_units
from boardsim.verdict.chain import judge_chain
from boardsim.verdict.chain_findings import where_limits_hold
from boardsim.verdict.chain_levels import judge_floating
from boardsim.verdict.chain_study import chain_study, judge_lateness
from boardsim.verdict.chain_times import controller_of
from boardsim.verdict.findings import Result, Timing, overall, severity

NAME = "chain"
_LINES = 3  # of the controller: data, clock and latch, however many registers there are


def check_chain(board: Board, strict: bool = False) -> Result:
    """Judge the chain of a board from printed levels and times, at the worst voltages of its logic rail.

    Parameters
    ----------
    board : Board
    strict : bool
        Whether a missing limit counts as broken.

    Returns
    -------
    Result
        With a `ChainStudy` as its study. Nothing is simulated, so that there is no audit.
    """
    began = time.perf_counter()
    others = where_limits_hold(board, [judge_lateness(board), *judge_floating(board)])
    findings = sorted([*judge_chain(board), *others], key=severity)
    study = chain_study(board, findings)
    return Result(
        board.name,
        NAME,
        frame_time(board.chain),
        overall(findings, True, strict),
        tuple(findings),
        tuple(dict.fromkeys((*board.assumptions, *not_varied(board)))),
        (),
        _sentences(board),
        None,
        "",
        (Timing("links", time.perf_counter() - began),),
        strict=strict,
        study=study,
        simulated=False,
    )


def _sentences(board: Board) -> tuple[str, ...]:
    chain, controller = board.chain, controller_of(board)
    shifting = chain.outputs / chain.clock.typ
    lines = [
        f"{chain.count} x {chain.register_.title or 'register'} make {chain.outputs} outputs from {_LINES} lines of the controller",
        f"a register frame takes {in_units(frame_time(chain), 's')}: {chain.outputs} bits at {in_units(chain.clock.typ, 'Hz')} "
        f"in {in_units(shifting, 's')}, and {in_units(chain.latch_time.typ, 's')} to the latch",
        f"frames follow on each other after {in_units(frame_time(chain) + controller.frame_gap.typ, 's')} at the earliest",
    ]
    return tuple(lines)
