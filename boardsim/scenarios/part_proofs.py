"""Each part's model against its own datasheet: the test circuits are run finer and finer until two runs agree."""

from __future__ import annotations

import threading
from collections.abc import Callable, Sequence
from pathlib import Path

from boardsim.board.shelves import read_shelves
from boardsim.circuit.build import Builder
from boardsim.circuit.deck import MODEL_TEMPERATURE
from boardsim.engine.run import Engine
from boardsim.errors import InputError, NoConvergence
from boardsim.parts.base import Part
from boardsim.parts.proof import Proof
from boardsim.parts.temperature import in_celsius
from boardsim.report.wording import plain_path
from boardsim.scenarios.crew import Crew
from boardsim.scenarios.parts import find_part
from boardsim.verdict.proving import AGREEMENT, PartProofs, ProofLine, judge_proof, read_proof, vectors_of

# Longest steps of a proof's runs as shares of its duration, each with its tolerance of integration [1] and its smallest
# current of interest [A]; two that follow each other must agree, so the ladder goes on until they do.
_RUNGS = (
    (1 / 400, 1e-4, 1e-9),
    (1 / 1000, 3e-5, 3e-10),
    (1 / 2500, 1e-5, 1e-10),
    (1 / 8000, 3e-6, 3e-11),
    (1 / 25000, 1e-6, 1e-11),
)
_MORE_POINTS = 1.5  # the finer run must have at least so many times the points, or it is no second opinion
_COARSER = (
    1.0,
    100.0,
)  # times the smallest current: where a circuit does not converge with the first, the second is tried


def parts_to_prove(
    names: Sequence[str], everything: bool, libraries: Sequence[Path] = ()
) -> tuple[tuple[str, Part], ...]:
    """The parts that are to be proven.

    Parameters
    ----------
    names : sequence of str
    everything : bool
        All parts of the library and of the user's folders, by kind and name.

    Raises
    ------
    InputError
        If nothing or both is named, or a part is not known.
    """
    if everything == bool(names):
        raise InputError("name parts to prove, or --all for every part of the library (not both)")
    if everything:
        shelves = read_shelves(libraries)
        names = sorted(shelves, key=lambda name: (shelves[name].kind, name))
    return tuple((name, find_part(name, libraries)[1]) for name in dict.fromkeys(names))


def prove_parts(
    parts: Sequence[tuple[str, Part]], keep: Path, crew: Crew, progress: Callable[[float], None] | None = None
) -> tuple[PartProofs, ...]:
    """Run every proof of some parts, as many parts at a time as the crew can.

    Parameters
    ----------
    parts : sequence of (name, Part)
    keep : Path
        Where deck and log of a circuit that fails are kept, in a folder per part.
    crew : Crew
    progress : callable
        Told the share of the work done, from any thread.

    Raises
    ------
    EngineMissing, EngineStopped, EngineCrash, EngineTimeout, DeckRejected
        If the engine does not work.
    """
    lock, done = threading.Lock(), [0]
    total = sum(len(part.proofs()) for _, part in parts)

    def tell() -> None:
        if progress is not None:
            with lock:
                done[0] += 1
                progress(done[0] / total)

    def one(named: tuple[str, Part]) -> PartProofs:
        name, part = named
        lines: list[ProofLine] = []
        ran = ""
        if proofs := part.proofs():
            with Engine(keep / plain_path(name), crew.time_limit, crew.cancel) as engine:
                for proof in proofs:
                    lines.append(prove(name, part.kind, proof, engine))
                    tell()
                ran = engine.name
        return PartProofs(name, part.kind, tuple(lines), ran)

    return tuple(crew.pool.map(one, parts))


def prove(name: str, kind: str, proof: Proof, engine: Engine) -> ProofLine:
    """Run one proof finer and finer until two runs agree, and judge it.

    Raises
    ------
    EngineMissing, EngineStopped, EngineCrash, EngineTimeout, DeckRejected
        If the engine does not work; a circuit that does not converge is unproven.
    """
    readings: list[float | None] = []
    points: list[int] = []
    for share, reltol, abstol in _RUNGS:
        try:
            value, count = _run(proof, (share * proof.duration, reltol, abstol), engine)
        except NoConvergence as err:
            return ProofLine(name, kind, proof, None, tuple(points), "unproven", f"{err}")
        if points and count < _MORE_POINTS * points[-1]:
            continue  # the engine's own steps were as fine before: no second opinion yet
        readings.append(value)
        points.append(count)
        if len(readings) > 1 and _agree(*readings[-2:]):
            break
    engine.discard_kept()
    return judge_proof(name, kind, proof, readings[-2:], points[-2:])


def _agree(first: float | None, second: float | None) -> bool:
    return first is not None and second is not None and abs(second - first) <= AGREEMENT * abs(second)


def _run(proof: Proof, rung: tuple[float, float, float], engine: Engine) -> tuple[float | None, int]:
    """The reading of one run, and how many points it had."""
    max_step, reltol, abstol = rung
    for times in _COARSER:
        try:
            text = proof_text(proof, max_step, reltol, times * abstol)
            with engine.run_text(text, proof.duration) as waves:
                return read_proof(proof.reading, waves), waves.points
        except NoConvergence:
            if times == _COARSER[-1]:
                raise
    raise AssertionError("no tolerance to try")


def proof_text(proof: Proof, max_step: float, reltol: float, abstol: float) -> str:
    """The deck of a proof's test circuit, as plain ngspice runs it.

    Parameters
    ----------
    proof : Proof
    max_step : float
        Longest step. [s]
    reltol : float
        Of the integration. [1]
    abstol : float
        Smallest current of interest. [A]

    Notes
    -----
    Gear's method, since the trapezoidal rule gives wrong charges at steep edges without a message. The circuit is at the proof's temperature.
    """
    builder = Builder()
    builder.add(proof.elements)
    lines = [
        builder.netlist().rstrip(),
        f"* {proof.quantity}",
        f".options method=gear reltol={reltol:g} abstol={abstol:g}",
        f".options temp={in_celsius(proof.temperature):g} tnom={MODEL_TEMPERATURE:g} noacct noinit",
        f".save {' '.join(vectors_of(proof.reading))}",
        f".tran {max_step:.9g} {proof.duration:.15g} 0 {max_step:.9g}",
        ".end",
    ]
    return "\n".join(lines) + "\n"
