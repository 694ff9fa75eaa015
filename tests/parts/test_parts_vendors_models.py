"""Vendors' models in the place of ours: hostile files leave no trace, honest ones run, dishonest ones fail their proofs."""

from __future__ import annotations

import math
import sys
from pathlib import Path

import pytest

from boardsim import cli
from boardsim.board.corners import nominal_only
from boardsim.board.reader import library_part, read_board
from boardsim.board.shelves import read_shelves
from boardsim.engine.run import Engine
from boardsim.errors import InputError, NoConvergence
from boardsim.firing.pattern import read_pattern
from boardsim.parts.base import NOMINAL, Part
from boardsim.scenarios.fire import fire_pattern
from boardsim.scenarios.part_proofs import proof_text, prove

NETLISTS = Path(__file__).parents[2] / "netlists" / "fruit-sorter"
BOARD = (NETLISTS / "board.toml").read_text(encoding="utf-8")
PATTERN = (NETLISTS / "patterns" / "rush.toml").read_text(encoding="utf-8")
PINS = "{ drain = 'd', gate = 'g', source = 's' }"
RECORD = f"""[parts.mine]
kind = "n-mosfet"
breakdown = "60 V"
gate_rating = "16 V"
pulse_current = "20 A"
threshold = "1.7 V"
on_resistance = [{{ value = "55 mohm +/- 30 %", gate = "4.5 V" }}, {{ value = "45 mohm +/- 30 %", gate = "10 V" }}]
input_capacitance = "560 pF"
output_capacitance = "95 pF"
reverse_capacitance = "35 pF"
gate_drain_charge = "3 nC"
charge_voltage = "30 V"
model = {{ file = "mine.lib", subcircuit = "mine", pins = {PINS} }}

[limits]"""
USES_MINE = BOARD.replace('part = "n-logic-60v"', 'part = "mine"').replace("[limits]", RECORD)
GOOD = """* written for this test
.param ron = 40.4795m
.subckt MINE d g s PARAMS: scale=1
M1 d g s s core
.model core VDMOS(nchan VTO=2.01373 KP={27.6993*scale} RD={ron} RG=2 RB=5m CGS=525p CGDMAX=576.34p CGDMIN=17.6512p A=0.5
+ CJO=351.568p VJ=0.75 M=0.5 IS=1e-12 N=1.1 TT=50n BV=60.6 IBV=250u KSUBTHRES=0.1 TNOM=25 MU=-1.5 TEXP0=1.5)
.ends MINE
"""


def put(folder: Path, model: str | bytes, board: str = USES_MINE) -> Path:
    path = folder / "board.toml"
    path.write_text(board, encoding="utf-8")
    (folder / "pattern.toml").write_text(PATTERN, encoding="utf-8")
    (folder / "mine.lib").write_bytes(model if isinstance(model, bytes) else model.encode())
    return path


def inside(line: str) -> str:
    return GOOD.replace(".ends MINE", f"{line}\n.ends MINE")


HOSTILE: dict[str, tuple[str | bytes, str]] = {
    "control": (f"{GOOD}.control\nshell touch trace\n.endc\n", "mine.lib:8: '.control' is not allowed"),
    "capitals": (f"{GOOD}  .CONTROL\nshell touch trace\n.ENDC\n", "'.control' is not allowed"),
    "inside": (inside(".control\nshell touch trace\n.endc"), "'.control' is not allowed"),
    "continued": (f"{GOOD}.con\n+trol\nshell touch trace\n.endc\n", "'.con' is not allowed"),
    "if": (f"{GOOD}.if (1)\n.control\nshell touch trace\n.endc\n.endif\n", "'.if' is not allowed"),
    "shell": (f"{GOOD}shell touch trace\n", "'shell touch trace' is not allowed"),
    "star hash": (f"*# shell touch trace\n{GOOD}", "mine.lib:1: begins with *#"),
    "star hash inside": (inside(" \t*#shell touch trace"), "begins with *#"),
    "end": (f"{GOOD}.end\n.control\nshell touch trace\n.endc\n", "'.end' is not allowed"),
    "exec": (f'{GOOD}.exec "touch trace"\n', "holds text in quotes"),
    "back quote": (inside("b9 d s i=`touch trace`"), "holds '`'"),
    "escape": (GOOD.encode() + b"\x1b[2J", "control character 0x1b"),
    "nul": (GOOD.encode() + b"\x00", "control character 0x00"),
    "utf-16": (GOOD.encode("utf-16"), "control character 0x00"),
    "wide blank": (f"{GOOD}\u00a0.control\nshell touch trace\n", "holds U+00A0"),
    "next line": (f"{GOOD}* a\u2028.control\nshell touch trace\n", "'shell touch trace' is not allowed"),
    "out of the folder": (f"{GOOD}.include ../../etc/x\n", "not there|outside the folder"),
    "absolute": (f"{GOOD}.lib '/etc/passwd'\n", 'holds "\'"'),
    "absolute, quoted": (f'{GOOD}.include "/etc/passwd"\n', "includes '/etc/passwd'"),
    "link": (f"{GOOD}.include link.lib\n", "outside the folder"),
    "itself": (f"{GOOD}.include mine.lib\n", "includes itself"),
    "section": (f"{GOOD}.lib other.lib tt\n", "sections of a library"),
    "options": (f"{GOOD}.options reltol=1\n", "would change the whole board's run"),
    "tran": (f"{GOOD}.tran 1n 1\n", "'.tran' is not allowed"),
    "save": (f"{GOOD}.save all\n", "'.save' is not allowed"),
    "meas": (f"{GOOD}.meas tran x max v(1)\n", "'.meas' is not allowed"),
    "csparam": (f"{GOOD}.csparam x=1\n", "'.csparam' is not allowed"),
    "code model": (inside("a1 d s fs"), "can read and write files"),
    "code model's vector": (inside("a1 [d s] fs"), "holds '['"),
    "file source": (inside('v9 d s file="trace"'), "holds text in quotes"),
    "table of a file": (inside("e9 d s value={table(file, 1, 2, 3)}"), '"file" is no parameter'),
    "encrypted": (f"$CDNENCSTART\n{GOOD}", "is encrypted"),
    "long line": (f"* {'x' * 2_000_000}\n", "is larger than 1 MiB"),
    "long statement": (f"{GOOD}r1 {'x' * 5000}\n", "a line of 5003 characters"),
    "unknown parameter": (GOOD.replace("TT=50n", "TTT=50n"), 'parameter "TTT" is not known to ngspice for VDMOS'),
    "unknown letter": (GOOD.replace("M1 d", "J1 d"), "junction FETs are not translated"),
    "other name": (GOOD.replace("MINE", "OTHER"), 'has no .subckt "mine"; it has: other'),
    "other pins": (GOOD.replace(" d g s PARAMS", " 1 g s PARAMS"), 'there is no pin "d"; .subckt "mine" has the pins 1, g, s'),
    "more pins": (GOOD.replace(" d g s PARAMS", " d g s tj PARAMS"), "tj would not be connected"),
}  # fmt: skip


@pytest.mark.parametrize("what", HOSTILE)
@pytest.mark.parametrize("command", ["fire", "deck"])
def test_a_hostile_model_is_refused_by_the_command_and_leaves_no_trace(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str], what: str, command: str
) -> None:
    model, text = HOSTILE[what]
    home = tmp_path / "home"
    home.mkdir()
    put(home, model)
    (tmp_path / "secret.lib").write_text("x", encoding="utf-8")
    (home / "link.lib").symlink_to(tmp_path / "secret.lib")
    before = sorted(tmp_path.rglob("*"))
    monkeypatch.chdir(home)
    options = ["--out", "results"] if command == "fire" else ["--to", "rush.cir"]
    monkeypatch.setattr(sys, "argv", ["boardsim", command, "board.toml", "pattern.toml", *options])
    with pytest.raises(SystemExit) as caught:
        cli.main()
    printed = capsys.readouterr()
    assert caught.value.code == 2
    assert printed.out == ""
    assert "Traceback" not in printed.err
    said = " ".join(printed.err.split())
    assert any(t in said for t in text.split("|")), said
    assert sorted(tmp_path.rglob("*")) == before


@pytest.mark.parametrize(
    ("old", "new", "text"),
    [
        ("drain = 'd', ", "", "drain missing"),
        ("drain = 'd'", "drane = 'd'", '"drane" is no terminal (did you mean "drain"?)'),
        ("source = 's'", "source = 'd'", "two terminals have the same pin"),
        ('"mine.lib"', '"../mine.lib"', "lies outside the folder"),
        ('"mine.lib"', '"/mine.lib"', "has to be relative"),
        ('"mine.lib"', '"none.lib"', "is not there"),
        ('subcircuit = "mine", ', "", 'give "subcircuit" or "model"'),
    ],
)  # fmt: skip
def test_a_wrong_table_is_refused_with_what_the_subcircuit_has(tmp_path: Path, old: str, new: str, text: str) -> None:
    path = put(tmp_path, GOOD, USES_MINE.replace(old, new))
    with pytest.raises(InputError) as caught:
        read_board(path)
    assert text in str(caught.value)


def test_no_corner_varies_what_a_vendors_model_holds_and_the_report_says_so(tmp_path: Path) -> None:
    """The record gives its on-resistance with a tolerance, which our own model would be run at both ends of."""
    board = read_board(put(tmp_path, GOOD))
    assert {"breakdown voltage", "on-resistance", "threshold"} <= set(nominal_only(board))
    stamp = board.channels[0].switch.stamp("x", "p", "l", NOMINAL)
    assert any(a.quantity == "vendor's model" and "mine of mine.lib" in a.value for a in stamp.assumptions)
    assert not [a for a in stamp.assumptions if a.quantity in ("gate resistance", "threshold current")]


def test_a_deck_holds_numbers_and_our_own_names_and_none_of_the_vendors_text(tmp_path: Path) -> None:
    part: Part = read_board(put(tmp_path, GOOD)).channels[0].switch.part
    text = proof_text(part.proofs()[0], 1e-6, 1e-3, 1e-9)
    assert "core" not in text.lower()
    assert "subckt" not in text
    assert "* with a vendor's model read from mine.lib" in text


@pytest.mark.engine
def test_our_own_model_written_as_a_subcircuit_reads_as_ours_does(tmp_path: Path) -> None:
    """The same equations with the same numbers, by way of a text: on-resistances and threshold of both agree."""
    ours, theirs = library_part("n-logic-60v"), read_board(put(tmp_path, GOOD)).channels[0].switch.part
    with Engine(tmp_path / "kept") as engine:
        for mine, other in zip(ours.proofs()[:3], theirs.proofs()[:3], strict=True):
            a, b = prove("a", "n-mosfet", mine, engine), prove("b", "n-mosfet", other, engine)
            assert a.value is not None
            assert b.value is not None
            assert a.verdict == b.verdict == "pass"
            assert b.value == pytest.approx(a.value, rel=2e-3 if "threshold" in mine.quantity else 0.02)


@pytest.mark.engine
def test_a_model_that_is_not_of_the_datasheets_part_fails_its_proof(tmp_path: Path) -> None:
    wrong = GOOD.replace("ron = 40.4795m", "ron = 80m")
    part: Part = read_board(put(tmp_path, wrong)).channels[0].switch.part
    with Engine(tmp_path / "kept") as engine:
        assert prove("mine", "n-mosfet", part.proofs()[0], engine).verdict == "fail"


DIODE = """[mine]
kind = "diode"
forward = [{ voltage = "0.8 V", current = "1 A" }]
model = { file = "d.lib", subcircuit = "dd", pins = { anode = "1", cathode = "2" } }
source = "made up for this test"
"""


SHOCKLEY = 1.5 * 8.617333e-5 * 298.15 * math.log(1 / 1e-9 + 1)  # [V] at 1 A: N k T / q ln(I / I_S + 1), k / q of CODATA


@pytest.mark.engine
@pytest.mark.parametrize(
    ("lines", "volts"),
    [
        ("D1 1 3 dm\nR1 3 2 50m\n.model dm D(IS=1n N=1.5 TNOM=25)", SHOCKLEY + 0.05),
        ("B1 1 3 I={1.5*V(1,3)*uramp(V(1,3))}\nRp 1 3 1MEG\nRs 3 2 {0.1/2}", math.sqrt(1 / 1.5) + 0.05),
        (
            "G1 1 3 VALUE={if(V(1,3)>0, 2*V(1,3)**3, 0)}\nRp 1 3 1MEG\nX1 3 2 rr PARAMS: r=50m\n.ends\n.subckt rr a b r=1\nR1 a b {r}",
            0.5 ** (1 / 3) + 0.05,
        ),
    ],
    ids=["junction", "law", "power"],
)
def test_a_diodes_subcircuit_obeys_its_own_equation(tmp_path: Path, lines: str, volts: float) -> None:
    """The voltage at 1 A solved by hand: Shockley's equation, 1.5 V^2 = 1 and 2 V^3 = 1, each with 50 mohm in series."""
    (tmp_path / "parts.toml").write_text(DIODE, encoding="utf-8")
    (tmp_path / "d.lib").write_text(f".subckt dd 1 2\n{lines}\n.ends\n", encoding="utf-8")
    part = read_shelves([tmp_path])["mine"].part("mine")
    assert part is not None
    with Engine(tmp_path / "kept") as engine:
        line = prove("mine", "diode", part.proofs()[0], engine)
    assert line.value == pytest.approx(volts, rel=1e-3)


PLAIN = """[npn-mine]
kind = "npn"
breakdown = "45 V"
gain = [{ current = "100 mA", least = 60, typical = 200 }]
saturation = [{ current = "500 mA", base = "50 mA", voltage = "0.3 V" }]
base_emitter = [{ current = "500 mA", base = "50 mA", voltage = "0.9 V" }]
model = { file = "plain.lib", model = "QMINE" }
source = "made up for this test"

[zener-mine]
kind = "zener"
voltage = "20 V"
test_current = "50 mA"
impedance = "2 ohm"
model = { file = "plain.lib", model = "dmine" }
source = "made up for this test"
"""
MODELS = ".model qmine npn(is=1e-14 bf=200 tnom=25)\n.model DMINE D(IS=1e-14 BV=19.9 IBV=50m RS=2 TNOM=25)\n"


@pytest.mark.engine
def test_plain_models_need_no_pins_and_are_read_by_the_same_circuits(tmp_path: Path) -> None:
    """A Zener of B_V at I_BV and R_S in series reads B_V + R_S I at that current; a gain of B_F without a knee is B_F."""
    (tmp_path / "parts.toml").write_text(PLAIN, encoding="utf-8")
    (tmp_path / "plain.lib").write_text(MODELS, encoding="utf-8")
    shelves = read_shelves([tmp_path])
    with Engine(tmp_path / "kept") as engine:
        for name, quantity, value in (("zener-mine", "Zener voltage", 20.0), ("npn-mine", "gain", 200.0)):
            part = shelves[name].part(name)
            assert part is not None
            proof = next(p for p in part.proofs() if p.quantity.startswith(quantity))
            assert prove(name, part.kind, proof, engine).value == pytest.approx(value, rel=2e-3)


@pytest.mark.engine
@pytest.mark.slow
@pytest.mark.parametrize(("volts", "verdict"), [("50", "fail"), ("60.6", "pass")])
def test_a_model_that_breaks_down_below_the_rating_is_a_finding_of_every_run(
    tmp_path: Path, volts: str, verdict: str
) -> None:
    board = read_board(put(tmp_path, GOOD.replace("BV=60.6", f"BV={volts}"), USES_MINE))
    (tmp_path / "one.toml").write_text(
        'duration = "20 ms"\n[[pulses]]\nchannels = "0"\nstart = "2 ms"\nwidth = "10 ms"\n', encoding="utf-8"
    )
    result = fire_pattern(board, read_pattern(tmp_path / "one.toml", board), tmp_path / "kept")
    assert {f.verdict for f in result.findings if f.check == "model-breakdown"} == {verdict}


@pytest.mark.engine
def test_a_run_that_a_vendors_model_spoils_is_told_with_the_name_of_its_file(tmp_path: Path) -> None:
    """Two voltages of 0 and 1 V between the same nodes: no circuit with this model in it has a solution."""
    (tmp_path / "parts.toml").write_text(DIODE, encoding="utf-8")
    lines = "V1 1 3 1\nV2 1 4 0\nR1 3 4 0\nD1 4 2 dm\n.model dm D(IS=1n)"
    (tmp_path / "d.lib").write_text(f".subckt dd 1 2\n{lines}\n.ends\n", encoding="utf-8")
    part = read_shelves([tmp_path])["mine"].part("mine")
    assert part is not None
    text = proof_text(part.proofs()[0], 1e-6, 1e-3, 1e-9)
    with (
        Engine(tmp_path / "kept") as engine,
        pytest.raises(NoConvergence, match=r"vendors' models, which can be the cause: d\.lib\).*failed\.cir"),
        engine.run_text(text, 20e-3),
    ):
        pass
    assert "read from d.lib" in (tmp_path / "kept" / "failed.cir").read_text(encoding="utf-8")


@pytest.mark.parametrize(
    ("name", "given", "missing"),
    [
        ("zener-mine", 'voltage = "20 V +/- 5 %"', False),
        ("zener-mine", 'voltage = "20 V"', True),
        ("diode-mine", 'reverse_voltage = "100 V"', False),
        ("diode-mine", "", True),
    ],
)
def test_what_a_model_cannot_be_held_against_is_a_missing_limit_and_no_pass(
    tmp_path: Path, name: str, given: str, missing: bool
) -> None:
    """A Zener of one number has no band, a diode without a rated voltage nothing that it has to stand."""
    diode = '[diode-mine]\nkind = "diode"\nforward = [{ voltage = "0.8 V", current = "1 A" }]\nREVERSE\nmodel = { file = "plain.lib", model = "dmine" }\nsource = "made up for this test"\n'
    text = PLAIN.replace('voltage = "20 V"', given) if name == "zener-mine" else PLAIN
    (tmp_path / "parts.toml").write_text(text + diode.replace("REVERSE", given if name == "diode-mine" else ""))
    (tmp_path / "plain.lib").write_text(MODELS, encoding="utf-8")
    part = read_shelves([tmp_path])[name].part(name)
    assert part is not None
    stamp = part.stamp("x", "clamp part", "a", "b", (), NOMINAL)  # type: ignore[attr-defined]
    rules = [r for r in stamp.rules if r.check == "model-breakdown"]
    assert rules
    assert {r.limit.value is None for r in rules} == {missing}
    assert {r.quantity for r in rules} <= {p.quantity for p in stamp.probes}
