"""The engine's border: whatever goes wrong behind it comes out as one of the project's errors."""

from __future__ import annotations

import itertools
import os
import sys
from pathlib import Path

import numpy as np
import pytest

from boardsim.engine.library import fatal_lines
from boardsim.engine.run import Engine
from boardsim.engine.waves import read_waves
from boardsim.errors import DeckRejected, EngineCrash, EngineError, EngineMissing, EngineTimeout, NoConvergence

RC = """.title rc
Vin a 0 PWL(0 0 1u 1)
R1 a b 1k
C1 b 0 1u
.save v(b) i(vin)
.tran 10u 10m 0 10u
.end
"""


@pytest.mark.engine
def test_a_run_gives_waveforms_and_leaves_nothing_behind(tmp_path: Path) -> None:
    with Engine(tmp_path / "keep") as engine:
        folder = engine.folder
        with engine.run_text(RC, 10e-3) as waves:
            t, v, _ = np.concatenate([b[1:] if i else b for i, b in enumerate(waves.blocks())]).T
            assert waves.names == ("time", "v(b)", "i(vin)")
        assert v[-1] == pytest.approx(1 - np.exp(-10), rel=1e-3)
        assert t[-1] == pytest.approx(10e-3)
    assert not folder.exists()
    assert not (tmp_path / "keep").exists()


@pytest.mark.engine
def test_blocks_of_any_size_join_without_gap(tmp_path: Path) -> None:
    with Engine(tmp_path) as engine, engine.run_text(RC, 10e-3) as waves:
        whole = next(iter(waves.blocks(10**6)))
        pieces = list(waves.blocks(7))
        assert all(len(p) <= 8 for p in pieces)
        assert all(np.array_equal(a[-1], b[0]) for a, b in itertools.pairwise(pieces))
        assert np.array_equal(np.concatenate([pieces[0], *(p[1:] for p in pieces[1:])]), whole)


@pytest.mark.engine
def test_a_deck_that_ngspice_refuses_is_kept_and_named_and_the_next_run_works(tmp_path: Path) -> None:
    with Engine(tmp_path) as engine:
        with (
            pytest.raises(DeckRejected, match="kept at") as caught,
            engine.run_text(RC.replace("C1 b 0 1u", "D1 b 0 no_such_model"), 10e-3),
        ):
            pass
        assert caught.value.deck is not None
        assert "no_such_model" in caught.value.deck.read_text()
        assert caught.value.log is not None
        assert caught.value.log.exists()
        with engine.run_text(RC, 10e-3) as waves:
            assert waves.points > 100


@pytest.mark.engine
def test_a_run_that_ends_early_is_no_result(tmp_path: Path) -> None:
    with (
        Engine(tmp_path) as engine,
        pytest.raises(NoConvergence, match=r"stopped at 0\.01 s of 0\.02 s"),
        engine.run_text(RC, 20e-3),
    ):
        pass


def test_a_missing_library_says_what_to_install(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setenv("NGSPICE_LIBRARY_PATH", str(tmp_path / "libngspice.so.0"))
    with (
        Engine(tmp_path) as engine,
        pytest.raises(EngineMissing, match="apt-get install ngspice libngspice0"),
        engine.run_text(RC, 10e-3),
    ):
        pass


def worker(body: str) -> tuple[str, ...]:
    """A stand-in for the worker process: greets as the real one does, then does what the test wants."""
    return (sys.executable, "-c", f"import json,os,sys,time\nprint(json.dumps(dict(version=39)), flush=True)\n{body}")


def test_a_crash_is_told_from_an_ending(tmp_path: Path) -> None:
    for body, how in (("os.kill(os.getpid(), 11)", "signal 11"), ("sys.exit(7)", "status 7")):
        with (
            Engine(tmp_path, command=worker(f"sys.stdin.readline()\n{body}")) as engine,
            pytest.raises(EngineCrash, match=how) as caught,
            engine.run_text(RC, 10e-3),
        ):
            pass
        assert caught.value.deck == tmp_path / "failed.cir"
        assert caught.value.deck.read_text() == RC


def test_a_hang_ends_at_the_time_limit(tmp_path: Path) -> None:
    hanging = worker("sys.stdin.readline()\nprint(json.dumps(dict(progress=0.5)), flush=True)\ntime.sleep(600)")
    seen: list[float] = []
    with (
        Engine(tmp_path, time_limit=1.0, command=hanging) as engine,
        pytest.raises(EngineTimeout, match="within 1 s"),
        engine.run_text(RC, 10e-3, seen.append),
    ):
        pass
    assert seen == [0.5]


def test_the_worker_is_gone_with_the_engine(tmp_path: Path) -> None:
    pid_file = tmp_path / "pid"
    body = f"open({str(pid_file)!r}, 'w').write(str(os.getpid()))\nsys.stdin.readline()\ntime.sleep(600)"
    with (
        Engine(tmp_path, time_limit=1.0, command=worker(body)) as engine,
        pytest.raises(EngineTimeout),
        engine.run_text(RC, 10e-3),
    ):
        pass
    with pytest.raises(ProcessLookupError):
        os.kill(int(pid_file.read_text()), 0)


@pytest.mark.parametrize(
    "line",
    [
        "Using SPARSE 1.3 as Direct Linear Solver",  # ngspice 42 and later say this on stderr at every run
        "Using KLU as Direct Linear Solver",
        "Note: No compatibility mode selected!",
        " Reference value :  6.40003e-02",
        "Warning: Further gmin increment",
        "Note: Starting dynamic gmin stepping",
        "Warning: singular matrix:  check nodes c0_d and c0_d",
        "Trying gmin =   1.0000E-03 Warning: singular matrix:  check nodes c and e2#branch",
        "Supplies reduced to   0.1000% Supplies reduced to   0.0000% Warning: singular matrix:  check node b",
    ],
)
def test_talk_on_stderr_is_no_failure(line: str) -> None:
    assert fatal_lines([line]) == []


@pytest.mark.parametrize(
    "line",
    [
        'doAnalyses: TRAN:  Timestep too small; time = 1e-3, timestep = 1e-18: trouble with node "c0_d"',
        "Error on line 12 or its substitute:",
        "run simulation(s) aborted",
        "Trying gmin =   1.0000E-03 Fatal error: singular matrix",
        "Error: singular matrix",
    ],
)
def test_what_means_failure_is_failure(line: str) -> None:
    assert fatal_lines([line]) == [line]


@pytest.mark.engine
def test_a_matrix_that_is_singular_at_a_try_does_not_end_a_run_that_is_found_in_the_end(tmp_path: Path) -> None:
    """A node between two capacitors has no level at rest: every try fails but the last, which starts all sources from 0.

    What the run then must come to is the capacitive divider: 2 V over 1 uF and 3 uF leave 2 V / 4 at the lower one.
    """
    deck = """.title divider
Vin a 0 PWL(0 0 1u 0 2u 2)
C1 a b 1u
C2 b 0 3u
.save v(b)
.tran 1u 100u 0 1u
.end
"""
    with Engine(tmp_path / "keep") as engine, engine.run_text(deck, 100e-6) as waves:
        last = list(waves.blocks())[-1][-1]
        log = (engine.folder / "ngspice.log").read_text()
    assert "Trying gmin" in log
    assert any("singular matrix" in line and line.startswith("Trying gmin") for line in log.splitlines())
    assert last[1] == pytest.approx(0.5, rel=1e-6)


def test_a_cut_off_waveform_file_is_refused(tmp_path: Path) -> None:
    raw = tmp_path / "x.raw"
    head = b"Title: x\nNo. Variables: 2\nNo. Points: 3\nVariables:\n\t0\ttime\ttime\n\t1\tv(a)\tvoltage\nBinary:\n"
    raw.write_bytes(head + np.zeros(6).tobytes())
    assert read_waves(raw).points == 3
    raw.write_bytes(head + np.zeros(5).tobytes())
    with pytest.raises(NoConvergence, match="cut off"):
        read_waves(raw)
    raw.write_bytes(b"nothing of the sort")
    with pytest.raises(EngineError):
        read_waves(raw)
