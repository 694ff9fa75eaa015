"""The runs of a volley: in every corner the choices of so many channels that can be worst there.

Waveforms of one number of channels are put together as soon as they are there, so that memory stays bounded.
"""

from __future__ import annotations

import threading
from collections.abc import Callable, Iterable, Iterator, Mapping, Sequence
from dataclasses import dataclass, field, replace
from pathlib import Path

from boardsim.board.bridges import forwards
from boardsim.board.corners import corners, nominal_only, slow_rail
from boardsim.board.ranges import write_labels
from boardsim.board.reader import Board
from boardsim.circuit.assemble import assemble, windows
from boardsim.firing.pattern import Pattern, Pulse
from boardsim.firing.schedule import Firing, fire
from boardsim.parts.base import Assumption, Corner
from boardsim.scenarios.all_corners import by_corner, dips, worst
from boardsim.scenarios.audited import CornerResult, run_corner
from boardsim.scenarios.crew import Crew
from boardsim.scenarios.volley_choices import Choice, Results, alike, weights_of, worst_choices
from boardsim.scenarios.volley_triggers import Trigger, decisive, trigger_of
from boardsim.verdict.bench import Bench
from boardsim.verdict.closeups import wants_closeup
from boardsim.verdict.findings import Finding, overall, severity
from boardsim.verdict.readings import Readings
from boardsim.verdict.studies import VolleyStep
from boardsim.verdict.switching import judge_switching

START = 1e-3  # [s], when all pulses of a volley are commanded; until then the board is at rest
Run = tuple[Choice, Corner]
_OVERHEAD = 12  # channels whose simulation takes as long as starting the engine, measured on the fruit sorter


@dataclass(frozen=True)
class Tried:
    """So many channels at once, tried in every choice and corner that can be worst.

    Attributes
    ----------
    step : VolleyStep
    findings : tuple of Finding
        The worst of each question over choices and corners.
    results : tuple of CornerResult
        Without their waveforms.
    trigger : Trigger or None
        Of the worst finding; None if no run came to an end.
    pictured : mapping of key to Trigger
        Of every finding that gets a close-up, as far as a run of its channels came to an end.
    """

    step: VolleyStep
    findings: tuple[Finding, ...]
    results: tuple[CornerResult, ...]
    trigger: Trigger | None
    pictured: Mapping[tuple[str, str, str, str], Trigger]

    @property
    def passes(self) -> bool:
        """Whether nothing is broken and all of it is proven."""
        return self.step.verdict not in ("fail", "unproven")


@dataclass
class Runs:
    """Runs volleys of a board and judges what the hardware stands; the firmware's own rules do not count.

    Attributes
    ----------
    board : Board
    width : float
        Of the pulse. [s]
    keep : Path
        Where deck and log of a failed run are kept.
    strict : bool
        Whether a missing limit counts as broken.
    crew : Crew
    progress : callable or None
        Told the share of the work done, from any thread.
    """

    board: Board
    width: float
    keep: Path
    strict: bool
    crew: Crew
    progress: Callable[[float], None] | None = None
    tried: dict[int, Tried] = field(default_factory=dict)
    assumptions: dict[Assumption, None] = field(default_factory=dict)

    def __post_init__(self) -> None:
        limits = self.board.limits.model_copy(update={"most_on": None, "most_current": None})
        self.hardware = replace(self.board, limits=limits, exclusive=())
        self.corners = corners(self.board, self.width)
        self.longest = slow_rail(self.board)
        self.only = nominal_only(self.board)
        self.builds = alike(self.board)
        self.weights: dict[str, list[list[float]]] = {}  # of every build, by the name of the corner
        self.duration = self.firing((forwards(self.board)[0].number,)).duration
        self._shares: dict[object, float] = {}
        self._expected = self._handed = 0.0
        self._told = 0.0
        self._lock = threading.Lock()

    def firing(self, channels: Choice) -> Firing:
        """What the registers make of these channels' pulses; the whole chain is followed."""
        pulses = tuple(Pulse(c, START, self.width) for c in channels)
        return fire(self.hardware, Pattern(self.board.path, "volley", None, pulses))

    def weigh(self, counts: Iterable[int]) -> None:
        """Try one channel alone, of each build, and learn which draw most; `counts` are to be tried after that."""
        self._expected = len(self.corners) * sum(map(_cost, counts))
        alone = [build[:1] for build in self.builds]
        ((_, results),) = self._all([(1, [(choice, corner) for corner in self.corners for choice in alone])])
        for corner in self.corners:
            here = [one for one in results if one[1].corner == corner]
            self.weights[corner.name] = [weights_of(build[0], here) for build in self.builds]
        first = dict(zip(alone, self.weights[self.corners[0].name], strict=True))
        self._finish([(1, sorted(results, key=lambda one: -first[one[0]][0]))])

    def run(self, counts: Iterable[int]) -> None:
        """Try these numbers of channels at once, those not yet tried; `weigh` comes first."""
        wanted = sorted({*counts} - {*self.tried}, reverse=True)
        self._finish(self._all([(n, self._worst(n)) for n in wanted]))

    def deck(self, trigger: Trigger | None) -> str:
        """The deck of the run that decided, with the settings that were used; empty if there was none."""
        if trigger is None:
            return ""
        board, firing = self.reduced(trigger.channels), self.firing(trigger.channels)
        (window,) = windows(board, firing)
        return assemble(board, firing, trigger.corner, window).text(trigger.settings)

    def reduced(self, channels: Choice) -> Board:
        """The board with these channels, and the other halves of full bridges, only: the others are off and draw nothing."""
        kept = tuple(c for c in self.board.channels if c.number in channels or c.opposite in channels)
        return replace(self.hardware, channels=kept)

    # ------------------------------------------------------------------------------------------------ runs

    def _worst(self, n: int) -> list[Run]:
        """Of every corner the choices that can be worst in it."""
        return [
            (choice, corner)
            for corner in self.corners
            for choice in worst_choices(n, self.builds, self.weights[corner.name])
        ]

    def _all(self, wanted: Iterable[tuple[int, Sequence[Run]]], named: str = "run") -> Iterator[tuple[int, Results]]:
        """Make runs, as many at a time as the crew can, and give out each number's results in turn."""
        handed = [
            (
                n,
                [
                    (choice, self.crew.pool.submit(self._one, choice, corner, f"at-once-{n}-{named}{i}"))
                    for i, (choice, corner) in enumerate(several, 1)
                ],
            )
            for n, several in wanted
        ]
        self._handed += sum(_cost(n) * len(futures) for n, futures in handed)
        try:
            while handed:
                # Taken out of the list, so that the readings of what was put together are let go.
                n, futures = handed.pop(0)
                yield n, [(choice, future.result()) for choice, future in futures]
        finally:
            for future in (future for _, futures in handed for _, future in futures):
                future.cancel()

    def _one(self, choice: Choice, corner: Corner, folder: str) -> CornerResult:
        bench = Bench(self.hardware, corner.name, self.only, repeated=True)
        cost = _cost(len(choice))
        return run_corner(
            self.reduced(choice),
            self.firing(choice),
            corner,
            bench,
            self.keep / folder,
            lambda share: self._report((choice, corner.name), cost * share),
            time_limit=self.crew.time_limit,
            cancel=self.crew.cancel,
            pictured=False,
        )

    def _report(self, run: object, share: float) -> None:
        if self.progress is None:
            return
        with self._lock:
            self._shares[run] = max(self._shares.get(run, 0.0), share)
            self._told = max(self._told, min(0.99, sum(self._shares.values()) / max(self._expected, self._handed)))
            self.progress(self._told)

    # ------------------------------------------------------------------------------------------------ judgement

    def _finish(self, found: Iterable[tuple[int, Results]]) -> None:
        """Put together what was found; where a passing rail dips, with the corner in which it is low for longest."""
        dipping: list[tuple[int, Results]] = []
        for n, results in found:
            self.tried[n] = self._put_together(n, results)
            low = any(dips(self.board, r) for _, r in results)
            # What is broken stays broken, and a larger capacitance keeps the rail higher: only a pass is in doubt.
            if self.longest is not None and low and self.tried[n].step.verdict != "fail":
                dipping.append((n, results))
        if dipping and self.longest is not None:
            # It differs from another corner in the bulk alone, and all corners' choices are run in it.
            again = self._all(
                [(n, [(c, self.longest) for c in dict.fromkeys(c for c, _ in results)]) for n, results in dipping],
                "slow-run",
            )
            for (n, results), (_, more) in zip(dipping, again, strict=True):
                self.tried[n] = self._put_together(n, [*results, *more])

    def _put_together(self, n: int, results: Results) -> Tried:
        choices = tuple(dict.fromkeys(choice for choice, _ in results))
        switching = {c: _of_hardware(judge_switching(self.hardware, self.firing(c))) for c in choices}
        findings = worst([*by_corner(r for _, r in results), *switching.values()])
        if not any(r.trial for _, r in results):
            findings = [f for f in findings if f.verdict == "fail"]  # what is left was never put to a circuit
        for _, r in results:
            if r.trial is not None:
                self.assumptions.update(dict.fromkeys(r.trial.deck.assumptions))
        return Tried(
            self._step(n, choices[0], results, findings),
            tuple(findings),
            tuple(replace(r, trial=None) for _, r in results),
            decisive(findings, results),
            {f.key: t for f in findings if wants_closeup(f) and (t := trigger_of(f, results, switching)) is not None},
        )

    def _step(self, n: int, channels: Choice, results: Results, findings: Sequence[Finding]) -> VolleyStep:
        seen = [(choice, r.trial.readings) for choice, r in results if r.trial is not None]
        if len(seen) < len(results):
            seen = []  # the worst is not known without all of them
        readings = [r for _, r in seen]
        coil, pull_in = self._nearest(seen)
        limited = self.board.supply.current_ceiling is not None
        proven = all(r.audit.proven for _, r in results)
        verdict = overall(findings, proven, self.strict)
        return VolleyStep(
            n,
            channels,
            write_labels([self.board.channel(c).label for c in channels]),
            min((r.low[None, "v_rail"][0] for r in readings), default=None),
            coil,
            pull_in,
            max((r.high[None, "i_supply"][0] for r in readings), default=None),
            max((r.ceiling[0] for r in readings), default=None) if limited else None,
            verdict,
            proven,
            _why(findings, results, self.strict) if verdict in ("fail", "unproven") else "",
        )

    def _nearest(self, seen: Sequence[tuple[Choice, Readings]]) -> tuple[float | None, float | None]:
        """Current at the end of the pulse and pull-in current of the coil that comes closest to not pulling in. [A]

        The lowest current where no pull-in current was given.
        """
        found: list[tuple[tuple[bool, float], float, float | None]] = []
        for choice, readings in seen:
            for c in choice:
                limit = self.board.channel(c).coil.pull_in
                bound = None if limit is None else limit.max
                for value in map(float, readings.pull_in[c][1] if c in readings.pull_in else ()):
                    found.append(((bound is None, value / bound if bound else value), value, bound))
        return min(found, key=lambda one: one[0])[1:] if found else (None, None)


def _of_hardware(findings: Iterable[Finding]) -> list[Finding]:
    """Without what the firmware is told to keep: how many channels it turns on is what is asked here."""
    return [f for f in findings if f.quantity != "channels on at once"]


def _cost(n: int) -> float:
    """How long a run of n channels takes, in channels."""
    return _OVERHEAD + n


def _why(findings: Sequence[Finding], results: Results, strict: bool) -> str:
    """The worst that is broken, or what is not proven; without a hint, which was not asked for."""
    broken = [f for f in findings if f.verdict == "fail" or (strict and f.verdict == "limit-missing")]
    if broken:
        return min(broken, key=severity).sentence.partition("; try:")[0]
    for _, r in results:
        if r.failure is not None and not r.audit.proven:
            return f"nothing is shown, since ngspice came to nothing ({r.corner.name})"
        failed = next((e for e in reversed(r.audit.entries) if not e.passed), None)
        if not r.audit.proven:
            return f"nothing is shown, since the audit failed ({failed or r.corner.name})"
    return "nothing is shown"
