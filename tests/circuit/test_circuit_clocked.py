"""Registers flip-flop by flip-flop against the bit model, and against what the datasheet says of clear and output enable."""

from __future__ import annotations

import random
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from boardsim.board.reader import Board, library_part, read_board
from boardsim.circuit.assemble import Detail, assemble, windows
from boardsim.circuit.build import Builder
from boardsim.circuit.deck import Settings
from boardsim.circuit.serial import as_points, serial_lines
from boardsim.engine.run import Engine
from boardsim.errors import InputError
from boardsim.firing.pattern import Pattern, Pulse
from boardsim.firing.registers import bits_on_the_wire, frame_time
from boardsim.firing.schedule import Firing, fire
from boardsim.parts.base import NOMINAL
from boardsim.parts.clocked import Contents, Leaning, Nets, comparator, flip_flops, held, output_pin
from boardsim.parts.elements import GROUND, Drive, Element, Resistor

FINE = Settings("gear", 1e-4, 20e-6)

BOARD = """\
name = "bean planter"
supply = {{ voltage = "24 V", resistance = "20 mohm", current_ceiling = "20 A" }}
cable = {{ gauge = "18 AWG", length = "1 m", spacing = "2 mm" }}
bulk = {{ capacitance = "2200 uF", esr = "50 mohm", esl = "20 nH", rated = "35 V" }}
logic = {{ voltage = "5 V" }}
[chain]
register = "74HC595"
count = 2
clock = "{clock}"
bit_order = "{order}"
first_out = "{first}"
[coils.drum]
resistance = "24 ohm"
inductance = "2 mH"
[channels."0-9"]
label = "drum {{n}}"
outputs = "3-12"
bits = "{bits}"
coil = "drum"
switch = {{ part = "n-logic-60v", gate = "100 ohm", pulldown = "10 kohm" }}
clamp = {{ kind = "diode", diode = "fast-2a" }}
"""


def board(folder: Path, clock: str = "4 MHz", order: str = "msb", first: str = "far", bits: str = "3-12") -> Board:
    (folder / "board.toml").write_text(BOARD.format(clock=clock, order=order, first=first, bits=bits))
    return read_board(folder / "board.toml")


def random_firing(of: Board, seed: int) -> Firing:
    """Pulses at times that have nothing to do with each other, so that frames queue, and some are sent back to back."""
    dice = random.Random(seed)
    pulses = [Pulse(c.number, dice.uniform(5e-6, 60e-6), dice.uniform(10e-6, 60e-6)) for c in of.channels]
    pattern = Pattern(of.path, "random", 150e-6, tuple(sorted(pulses, key=lambda p: p.start)))
    return replace(fire(of, pattern), duration=150e-6)


def crossings(of: Board, firing: Firing, detail: Detail, folder: Path) -> dict[int, list[tuple[float, bool]]]:
    """When each channel's pin crosses half the logic rail, and which way: the waveforms alone tell."""
    (window,) = windows(of, firing)
    deck = assemble(of, firing, NOMINAL, window, detail)
    pins = {c.number: f"v(c{c.number}_q)" for c in of.channels}
    deck = replace(deck, vectors=(*deck.vectors, *pins.values()))
    with Engine(folder) as engine, engine.run(deck, FINE) as waves:
        rows = np.concatenate(list(waves.blocks()))
    found: dict[int, list[tuple[float, bool]]] = {}
    for number, name in pins.items():
        t, v = rows[:, 0], rows[:, waves.names.index(name)] - 2.5
        steps = np.flatnonzero((v[:-1] < 0) != (v[1:] < 0))
        found[number] = [
            (float(t[k] - v[k] * (t[k + 1] - t[k]) / (v[k + 1] - v[k])), bool(v[k + 1] > 0)) for k in steps
        ]
    return found


@pytest.mark.engine
@pytest.mark.parametrize(
    ("seed", "wiring"),
    [
        (1, {}),
        (2, {"order": "lsb"}),
        (3, {"first": "near"}),
        (4, {"order": "lsb", "first": "near", "bits": "0-9"}),
        (5, {"clock": "10 MHz"}),
    ],
)
def test_flip_flops_and_bits_give_the_same_output_edges_on_random_frames(
    tmp_path: Path, seed: int, wiring: dict[str, str]
) -> None:
    of = board(tmp_path, **wiring)
    firing = random_firing(of, seed)
    assert len(firing.sent) == firing.frames > 5
    clocked = crossings(of, firing, "clocked", tmp_path / "kept")
    known = crossings(of, firing, "edges", tmp_path / "kept")
    for number, edges in known.items():
        assert [up for _, up in clocked[number]] == [up for _, up in edges], number
        # 3 ns: the lines take 2 ns for an edge, and event-driven devices go by whole nanoseconds.
        assert [t for t, _ in clocked[number]] == pytest.approx([t for t, _ in edges], abs=3e-9), number


def test_the_lines_carry_the_bits_of_every_frame_at_its_clock_edges(tmp_path: Path) -> None:
    """By definition of a serial transfer: the data line read at each rising edge of the clock is the bits sent."""
    of = board(tmp_path)
    frames = [(1e-6, 0b1010_0000_1111_0001), (1e-6 + frame_time(of.chain), 0b0101)]
    lines = serial_lines(frames, of.chain, 20e-6)
    at = [t for (t, a), (_, b) in zip(lines.clock, lines.clock[1:], strict=False) if b > a]
    data = np.interp(np.array(at) + 1e-9, *zip(*lines.data, strict=True))
    assert [round(float(d)) for d in data] == [b for _, image in frames for b in bits_on_the_wire(image, of.chain)]
    rises = [t for (t, a), (_, b) in zip(lines.latch, lines.latch[1:], strict=False) if b > a]
    assert rises == pytest.approx([start + frame_time(of.chain) for start, _ in frames], abs=2e-9)


def test_a_change_at_the_very_start_is_moved_into_the_run() -> None:
    assert as_points([(0.0, True), (1e-6, False)], 2e-6, 2e-9)[:3] == pytest.approx(
        np.array([(0.0, 0.0), (1e-12, 0.0), (2e-9 + 1e-12, 1.0)])
    )


def test_a_pattern_too_long_for_flip_flops_is_refused_with_what_is_possible(tmp_path: Path) -> None:
    of = board(tmp_path)
    firing = random_firing(of, 1)
    long = replace(firing, sent=firing.sent * 400)
    (window,) = windows(of, long)
    with pytest.raises(InputError, match="at most 312 can be followed"):
        assemble(of, long, NOMINAL, window, "clocked")


RAIL_HELD = ((0.0, 5.0), (10e-3, 5.0))
REGISTER = library_part("74HC595")


def run(folder: Path, elements: tuple[Element, ...], save: str, duration: float = 10e-3) -> dict[str, np.ndarray]:
    """A circuit by itself; the waveforms by the names that they are saved under."""
    builder = Builder()
    builder.add(elements)
    text = f"{builder.netlist()}.options method=gear reltol=1e-4 xtrtol=7 noacct noinit\n.save {save}\n.tran 1u {duration} 0 20u\n.end\n"
    with Engine(folder) as engine, engine.run_text(text, duration) as waves:
        rows = np.concatenate(list(waves.blocks()))
    return dict(zip(waves.names, rows.T, strict=True))


def chain_of_one(
    rail: tuple[tuple[float, float], ...],
    latch: list[tuple[float, bool]],
    clear: list[tuple[float, bool]],
    start: Contents,
) -> tuple[Element, ...]:
    """One register whose clock never moves, with a latch line of its own."""
    names = {"line_latch": latch, "cleared": clear}
    lines: list[Element] = [
        Drive(n, n, GROUND, tuple((t, 5 * v) for t, v in as_points(changes, 10e-3, 2e-9)))
        for n, changes in names.items()
    ]
    still: list[Element] = [Drive(n, n, GROUND, ((0.0, 0.0), (1.0, 0.0))) for n in ("line_data", "line_clock")]
    nets = Nets("rail", "line_data", "line_clock", "line_latch", "lost", "clear_now")
    return (
        Drive("rail", "rail", GROUND, rail),
        *lines,
        *still,
        *comparator("lost", "rail", repr(REGISTER.keeps_from), inverted=True),
        *comparator("clear_now", "cleared", "2.5"),
        *flip_flops(REGISTER, 1, nets, start),
    )


@pytest.mark.engine
def test_clear_empties_the_shift_stage_and_leaves_the_storage_stage_alone(tmp_path: Path) -> None:
    """NXP 74HC595 rev. 6, table 3: with MR low Qn does not change; a latch edge then loads the empty shift register."""
    circuit = chain_of_one(RAIL_HELD, [(5e-3, True)], [(1e-3, True), (2e-3, False)], Contents(0xFF, 0xFF))
    found = run(tmp_path, circuit, "v(held0) v(held7)")
    for name in ("held0", "held7"):
        at = np.interp([0.5e-3, 4.9e-3, 5.1e-3], found["time"], found[f"v({name})"])
        assert at == pytest.approx([1.0, 1.0, 0.0], abs=1e-6)


@pytest.mark.engine
@pytest.mark.parametrize(("lowest", "kept"), [(2.5, True), (1.5, False)])
def test_contents_are_lost_below_the_lowest_supply_and_kept_above(tmp_path: Path, lowest: float, kept: bool) -> None:
    """The storage stage holds zeros from its first latch on; below 2 V (NXP 74HC595 rev. 6, recommended) nothing is promised."""
    dip = ((0.0, 5.0), (5e-3, 5.0), (5.1e-3, lowest), (5.5e-3, lowest), (5.6e-3, 5.0), (10e-3, 5.0))
    circuit = chain_of_one(dip, [(3e-3, True)], [(1e-3, True), (2e-3, False)], Contents(0xFF, 0xFF))
    found = run(tmp_path, circuit, "v(held3)")
    wave = found["v(held3)"]
    assert np.interp([4e-3, 9e-3], found["time"], wave) == pytest.approx([0.0, 0.0 if kept else 1.0], abs=1e-6)


@pytest.mark.engine
def test_an_output_follows_its_rail_through_its_resistance_and_lets_go_when_not_enabled(tmp_path: Path) -> None:
    """Ohm's law: V_CC x 10 kohm / (10 kohm + R_out) while enabled, the pull-down's 0 V with 10 uA x 10 kohm at most when not."""
    rail = ((0.0, 5.0), (2e-3, 5.0), (3e-3, 4.0), (10e-3, 4.0))
    leaning = Leaning(True, REGISTER.off_leakage.typ, "V(rail)")
    circuit: tuple[Element, ...] = (
        Drive("rail", "rail", GROUND, rail),
        Drive("one", held(0), GROUND, ((0.0, 1.0), (1.0, 1.0))),
        Drive("on", "on", GROUND, ((0.0, 1.0), (5e-3, 1.0), (5.001e-3, 0.0), (1.0, 0.0))),
        *output_pin(REGISTER, "q", "pin", 0, "rail", "on", leaning),
        Resistor("load", "pin", GROUND, 10e3),
    )
    found = run(tmp_path, circuit, "v(pin)")
    share = 10e3 / (10e3 + REGISTER.output_resistance.typ)
    at = np.interp([1e-3, 4e-3, 8e-3], found["time"], found["v(pin)"])
    assert at == pytest.approx([5 * share, 4 * share, 10e-6 * 10e3], rel=1e-3)
