"""Vendors' model files as untrusted text: what is refused, what is understood, and that nothing of a text reaches a deck."""

from __future__ import annotations

import contextlib
import math
import re
import shutil
import subprocess
from pathlib import Path

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from boardsim.errors import QuantityError
from boardsim.parts.vendor.cards import read_library
from boardsim.parts.vendor.expressions import Scope, number_of, parse, read_number, resolved, written
from boardsim.parts.vendor.flatten import flatten
from boardsim.parts.vendor.text import ModelTextError, Place, read_statements

HERE = Place("x.lib", 1)
NOTHING = Scope(lambda name: {"p": 3.0}.get(name), {})


def value(text: str) -> float:
    return number_of(parse(text, HERE), NOTHING, HERE)


def law(text: str) -> str:
    return written(resolved(parse(text, HERE), NOTHING, HERE), lambda n: f"n_{n}", lambda s: f"Vx_{s}", HERE)


@pytest.mark.parametrize(
    ("text", "number"),
    [
        ("4.7k", 4.7e3), ("10pF", 1e-11), ("2MEG", 2e6), ("1m", 1e-3), ("1f", 1e-15), ("5mA", 5e-3), ("25V", 25.0),
        ("1e-14", 1e-14), (".5", 0.5), ("-3u", -3e-6), ("1mil", 25.4e-6),
    ],
)  # fmt: skip
def test_numbers_are_read_as_spice_writes_them(text: str, number: float) -> None:
    """Scale factors of SPICE 2G6's user guide."""
    assert read_number(text.lower(), HERE) == pytest.approx(number)


@pytest.mark.engine
def test_what_is_taken_as_a_number_is_what_ngspice_reads(tmp_path: Path) -> None:
    """Every scale letter before every unit: ngspice -b prints what each comes to as a source's voltage, and what is refused is none."""
    program = shutil.which("ngspice")
    assert program is not None, "the program ngspice itself is missing (Debian: apt-get install ngspice)"
    scales = ("", "t", "g", "meg", "k", "mil", "m", "u", "n", "p", "f")
    units = (
        "",
        "v",
        "volts",
        "a",
        "amp",
        "f",
        "farad",
        "h",
        "henry",
        "ohm",
        "ohms",
        "s",
        "sec",
        "hz",
        "c",
        "degc",
        "w",
    )
    taken = dict[str, float]()
    for text in (f"2{scale}{unit}" for scale in scales for unit in units):
        with contextlib.suppress(ModelTextError):
            taken[text] = read_number(text, HERE)
    refused = {f"2{s}{u}" for s in scales for u in units} - taken.keys()
    assert refused == {"2a", "2amp", "2farad"}
    names = {f"n{i}": text for i, text in enumerate(taken)}
    deck = ["numbers", *(f"v{n} {n} 0 {text}" for n, text in names.items()), ".control", "set numdgt=12", "op"]
    deck += [*(f"print {n}" for n in names), "quit", ".endc", ".end", ""]
    (tmp_path / "numbers.cir").write_text("\n".join(deck), encoding="utf-8")
    done = subprocess.run(
        [program, "-b", "numbers.cir"], cwd=tmp_path, capture_output=True, text=True, timeout=60, check=False,
    )  # fmt: skip
    found = dict(re.findall(r"^(n\d+) = (\S+)$", done.stdout, re.MULTILINE))
    assert found.keys() == names.keys()
    assert {names[n]: float(v) for n, v in found.items()} == pytest.approx(taken, rel=1e-9, abs=0.0)


@pytest.mark.parametrize(
    "text", ["5a", "5amp", "10farad", "10farads", "4k7", "1x", "1e", "--1", "", "1e999", "0x10", "k"]
)
def test_numbers_that_programs_read_differently_are_refused(text: str) -> None:
    with pytest.raises(ModelTextError):
        read_number(text, HERE)


@pytest.mark.parametrize(
    ("text", "number"),
    [
        ("1+2*3", 7), ("{(1+2)*3}", 9), ("2**3", 8), ("2*-p", -6), ("8/4/2", 1), ("5-2-1", 2), ("if(p>2, 1, 0)", 1),
        ("p<2 ? 1 : p<4 ? 2 : 3", 2), ("log(exp(2))", 2), ("pwr(-2, 3)", 8), ("pwrs(-2, 3)", -8),
        ("limit(9, 0, 5)", 5), ("table(1.5, 1, 10, 2, 20)", 15), ("table(9, 1, 10, 2, 20)", 20), ("sgn(-3)", -1),
        ("!(1>2) && 2>1 ? 4 : 5", 4), ("uramp(-1)+stp(2)", 1), ("-(2**2)", -4), ("max(1,2)+min(1,2)", 3), ("pi", math.pi),
    ],
)  # fmt: skip
def test_expressions_come_to_what_arithmetic_says(text: str, number: float) -> None:
    assert value(text) == pytest.approx(number)


@pytest.mark.parametrize(
    "text",
    [
        "2^3", "-2**2", "2**3**2", "v(a)**0.5", "v(a)**v(b)", "q", "time", "rand(1)", "ddt(v(a))", "1/0", "sqrt(-1)", "ln(0)",
        "file(1)", "if(1, 2, 3)", "1+(2>1)", "(((", "1 2", "", "table(v(a), 2, 1, 1, 2)", "limit(v(a), 5, 1)", "~1",
        "(" * 500 + "1" + ")" * 500, "v(a", "i(a,b)", "system(1)", "abs()", "1<2<3",
    ],
)  # fmt: skip
def test_expressions_that_are_ambiguous_or_unknown_are_refused(text: str) -> None:
    with pytest.raises(ModelTextError, match=r"x\.lib:1"):
        law(text)


def test_a_whole_power_is_a_product_since_ngspices_own_drops_the_sign_of_its_base() -> None:
    assert law("v(a)**3") == "(V(n_a) * V(n_a) * V(n_a))"
    assert law("pwr(v(a), 3)") == "pow(abs(V(n_a)), 3.0)"


def test_an_expression_that_doubles_at_every_step_is_refused_and_not_waited_for() -> None:
    functions = "\n".join(f".func f{i}(x) {{f{i - 1}(x)+f{i - 1}(x)}}" for i in range(1, 40))
    text = f".func f0(x) {{x+v(a)}}\n{functions}\n.subckt s a b\nb1 a b i=f39(v(b))\n.ends\n"
    with pytest.raises(ModelTextError):
        understood(text)


def read(folder: Path, content: bytes | str, name: str = "m.lib") -> object:
    (folder / name).write_bytes(content.encode() if isinstance(content, str) else content)
    return read_library(read_statements(folder / name, folder))


def understood(text: str, celsius: float = 25.0) -> object:
    from boardsim.parts.vendor.text import Statement

    lines = tuple(Statement(Place("x.lib", i), t.lower()) for i, t in enumerate(text.splitlines(), 1))
    library = read_library(lines)
    found = library.subcircuits["s"]
    return flatten(library, found, "p", {pin: f"deck_{pin}" for pin in found.pins}, celsius)


@pytest.mark.parametrize(
    "line",
    [
        "a1 [a b] fs", "k1 l1 l2 0.9", "s1 a b a b sw", "r1 a b -5", "r1 a b", "r1 a b {v(a)}", "c1 a b 1n ic=3", "e1 a b poly(1) a b 0 1",
        "e1 a b laplace {v(a)} {1}", "b1 a b v=table(file)", "d1 a b nothing", "x1 a b nothing", "v1 a b pulse(0 1 0)",
        "v1 a b sin(0 1 1k)", "b1 a b v=i(v9)", "b1 a b v=v(nowhere)", "r1 a b 1 m=2", "d1 a b dm off", "f1 a b v9 2", "x1 a s",
        "d1 a b dx", "d1 a b dbv", "d1 a b dibvl", "m1 a b b b mo", "i1 a b ac 1",
    ],
)  # fmt: skip
def test_lines_that_cannot_be_translated_without_a_change_are_refused(line: str) -> None:
    models = ".model dm d(is=1e-14)\n.model dx d(is=1e-14 foo=3)\n.model dbv d(is=1e-14 bv=5)\n.model dibvl d(is=1e-14 ibvl=1u)\n"
    with pytest.raises(QuantityError, match=r"x\.lib:\d"):
        understood(f"{models}.model mo nmos(level=7 vto=1)\n.subckt s a b\n{line}\n.ends\n")


COLD = """.model rm res(tc1=0.01)
.model rt res(r=2 tc1=0.01 t_measured=25)
.model cm cap(c=1 tc1=0.01)
.subckt s a b
"""


@pytest.mark.parametrize(
    ("line", "value"),
    [
        ("r1 a b 100 tc=0.01", 200.0),
        ("r1 a b 100 tc=0.01,0.0001", 300.0),
        ("r1 a b 100 tc1=0.01 tc2=0.0001", 300.0),
        ("r1 a b rm 100", 200.0),
        ("r1 a b rt 100", 2 * 202.0),
        ("c1 a b 1n tc1=0.01", 2e-9),
        ("c1 a b cm 1n", 2e-9),
        ("l1 a b 1u tc1=-0.002", 0.8e-6),
    ],
)
def test_temperature_coefficients_count_from_27_degc_unless_the_model_says_from_where(line: str, value: float) -> None:
    """R(T) = R (1 + TC1 dT + TC2 dT^2) with dT from SPICE's nominal 27 degC: SPICE 2G6's user guide. At 127 degC dT is 100 K."""
    (found,) = understood(f"{COLD}{line}\n.ends\n", 127.0).elements  # type: ignore[attr-defined]
    assert next(v for v in vars(found).values() if isinstance(v, float)) == pytest.approx(value)


@pytest.mark.parametrize(
    "line",
    [
        "r1 a b rm 100 tc=0.01",
        "r1 a b rt 100 tc1=0.01",
        "c1 a b cm 1n tc2=1u",
        "r1 a b 1 tc=1,2,3",
        "r1 a b 1 tc=1 tc1=1",
        "r1 a b 1 tc=-0.02",
    ],
)
def test_temperature_coefficients_that_programs_count_differently_are_refused(line: str) -> None:
    """Beside those of a model; more than two; one twice; and what leaves less than nothing of a part at 127 degC."""
    with pytest.raises(QuantityError, match=r"x\.lib:5"):
        understood(f"{COLD}{line}\n.ends\n", 127.0)


@pytest.mark.parametrize(
    ("text", "said"),
    [
        (".ends\n", "'.ends' ends nothing that was begun"),
        (".subckt s a b\nr1 a b 1\n.ends s\n+ more words\n", ".ends is followed by 's more words'"),
        (".subckt s a b\nr1 a b 1\n.ends t\n", ".ends is followed by 't'"),
    ],
)
def test_an_end_that_is_none_is_told_from_one_with_more_behind_it(tmp_path: Path, text: str, said: str) -> None:
    with pytest.raises(ModelTextError) as caught:
        read(tmp_path, text)
    assert said in str(caught.value)


POWER = "vto=2 kp=20 cgs=500p cgdmin=10p cgdmax=500p cjo=300p is=1e-12"


@pytest.mark.parametrize(
    "card",
    [
        *(f"vdmos({POWER.replace(f'{key}={old}', f'{key}={new}')})" for key, old, new in (
            ("cgs", "500p", "0"), ("cgs", "500p", "-1p"), ("cjo", "300p", "-300p"), ("is", "1e-12", "-1e-12"),
            ("cgdmin", "10p", "-10p"), ("cgdmax", "500p", "-500p"), ("kp", "20", "-20"),
        )),
        *(f"vdmos({POWER} {one})" for one in ("rg=-2", "rd=-10m", "rs=-1m", "rb=-1m", "tt=-50n", "m=-0.5", "vj=-0.75", "a=0",
                                               "lambda=-1", "bv=-60", "ibv=-1u", "theta=-1", "tnom=-300")),
        *(f"d(is=1e-14 {one})" for one in ("rs=-1", "tt=-1n", "cjo=-1p", "vj=0", "m=-0.3", "n=-1", "bv=10 ibv=-1m", "isr=-1")),
        "d(is=-1e-14)",
        *(f"npn(is=1e-14 bf=100 {one})" for one in ("rb=-1", "rc=-1", "cje=-1p", "tf=-1n", "vje=0", "mjc=-0.3", "xcjc=2", "vaf=-50")),
        *(f"nmos(vto=1 {one})" for one in ("kp=-1", "rd=-1", "cgso=-1n", "tox=0", "lambda=-0.1", "l=-1u", "w=0")),
    ],
)  # fmt: skip
def test_a_device_with_less_than_nothing_of_something_is_refused(card: str) -> None:
    """A negative resistance, capacitance or time gives out energy; ngspice takes most of them without a word."""
    kind, _, rest = card.partition("(")
    line = {"d": "d1 a b m", "npn": "q1 a b c m"}.get(kind, "m1 a b c c m")
    good = {"d": "is=1e-14", "npn": "is=1e-14 bf=100", "nmos": "vto=1", "vdmos": POWER}[kind]
    understood(f".subckt s a b c\n.model m {kind}({good})\n{line}\n.ends\n", 25.0)
    with pytest.raises(ModelTextError, match=r"x\.lib:2: .*(allowed|no size)"):
        understood(f".subckt s a b c\n.model m {kind}({rest}\n{line}\n.ends\n", 25.0)


PIECES = st.sampled_from(
    [".subckt s a b", ".ends", ".model m d(is=1e-14)", "r1 a b 1k", "b1 a b i=v(a)*2", ".param x=2", "*# shell touch x", ".control",
     "+ rs=1", "* comment", ".include m.lib", ".endc", "d1 a b m", "shell touch x", "\x00", "x1 a b s", "{", "`id`", "\t.control"]
)  # fmt: skip


@settings(max_examples=300, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(
    st.one_of(
        st.text(max_size=120),
        st.lists(st.one_of(PIECES, st.text(max_size=12)), max_size=10).map("\n".join),
        st.binary(max_size=80),
    )
)
def test_any_text_is_read_or_refused_and_never_holds_a_command_then(tmp_path: Path, text: str | bytes) -> None:
    try:
        read(tmp_path, text.encode("utf-8", "surrogatepass") if isinstance(text, str) else text)
    except QuantityError:
        return
    content = text.decode("latin-1") if isinstance(text, bytes) else text
    for line in content.replace("\r", "\n").split("\n"):
        assert not line.strip().lower().startswith((".control", "shell", "*# shell", ".endc"))


@settings(max_examples=300, deadline=None)
@given(st.text(alphabet="0123456789.+-*/()<>=&|!?:,{} abvipxe", max_size=40))
def test_any_expression_is_written_in_plain_characters_or_refused(text: str) -> None:
    try:
        found = law(text)
    except ModelTextError:
        return
    assert set(found) <= set("0123456789.+-*/()<>=&|!?:, _abcdefghijklmnopqrstuvwxyzV")
