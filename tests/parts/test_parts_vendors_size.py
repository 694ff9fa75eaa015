"""Model files that are meant to take for ever or to fill the memory: each is refused after a bounded amount of work.

No test here measures a time: what these files would take without a bound is minutes to years, so that a lost bound shows as a
test that does not end. The memory is measured.
"""

from __future__ import annotations

import tracemalloc
from pathlib import Path

import pytest

from boardsim.parts.elements import Resistor
from boardsim.parts.vendor.cards import read_library
from boardsim.parts.vendor.flatten import Flat, flatten
from boardsim.parts.vendor.text import ModelTextError, read_statements

MOST_MEMORY = 64 << 20  # [byte], thirty times the most that is read of a model


def part(*lines: str) -> str:
    return "\n".join((".subckt s a b", *lines, ".ends", ""))


def doubling(steps: int, body: str) -> str:
    """Functions of which each calls the one before twice."""
    return f".func f0(x) {{x+{body}}}\n" + "".join(
        f".func f{i}(x) {{f{i - 1}(x)+f{i - 1}(x)}}\n" for i in range(1, steps + 1)
    )


def tree(levels: int, branches: int, leaf: str) -> str:
    """Subcircuits of which each calls the next several times."""
    calls = [
        part(*(f"x{j} a b s{d + 1}" for j in range(branches))).replace(".subckt s ", f".subckt s{d} ")
        for d in range(levels)
    ]
    return "".join(calls) + part(leaf).replace(".subckt s ", f".subckt s{levels} ") + part("x1 a b s0")


def understood(folder: Path, text: str) -> Flat:
    (folder / "m.lib").write_text(text, encoding="utf-8")
    library = read_library(read_statements(folder / "m.lib", folder))
    found = library.subcircuits["s"]
    return flatten(library, found, "p", {pin: f"deck_{pin}" for pin in found.pins}, 25.0)


VALUES = "\n".join(["+ " + "value " * 600] * 8)
BLANKS = "\n".join(["+" + " " * 4000 + "c"] * 7)
CASES: dict[str, tuple[str, str]] = {
    "deep brackets": (part(f"r1 a b {{{'(' * 1500}1{')' * 1500}}}"), "nests more than 30 levels deep"),
    "deep signs": (part(f"r1 a b {{{'-' * 1500}1}}"), "nests more than 30 levels deep"),
    "deep choices": (part(f"r1 a b {{{'1>0?' * 500}1{':1' * 500}}}"), "nests more than 30 levels deep"),
    "a long chain of sums": (part(f"b1 a b i={{{'+'.join(['v(a)'] * 700)}}}"), "a law of more than 120 levels"),
    "parameters that wait for each other within brackets": (
        ".param p48=1\n"
        + "".join(f".param p{i}={{{'(' * 13}p{i + 1}{')' * 13}}}\n" for i in range(48))
        + part("r1 a b {p0}"),
        "counted through the functions and parameters",
    ),
    "parameters that wait for each other within signs": (
        ".param p48=1\n" + "".join(f".param p{i}={{{'-' * 28}p{i + 1}}}\n" for i in range(48)) + part("r1 a b {p0}"),
        "counted through the functions and parameters",
    ),
    "parameters that square": (
        ".param p0=10\n" + "".join(f".param p{i}={{p{i - 1}*p{i - 1}}}\n" for i in range(1, 40)) + part("r1 a b {p39}"),
        "not finite",
    ),
    "a thousand parameters in a row": (
        ".param p0=1\n" + "".join(f".param p{i}={{p{i - 1}+1}}\n" for i in range(1, 1000)) + part("r1 a b {p999}"),
        "too many others",
    ),
    "functions that double": (doubling(40, "v(a)") + part("b1 a b i=f40(v(b))"), "grows without bound"),
    "many expressions just below the bound": (
        doubling(11, "1") + part(*(f"r{i} a b {{f11(1)}}" for i in range(1900))),
        "of this model have more than 50000 parts",
    ),
    "many laws just below the bound": (
        part(*(f"b{i} a b i={'+'.join(['v(a)**16'] * 25)}" for i in range(1900))),
        "laws of more than 200000 characters together",
    ),
    "a tower of powers": (part(f"b1 a b i={{{'(' * 8}v(a){'**16)' * 8}}}"), "longer than a deck takes"),
    "ten million elements by calls": (tree(6, 10, "r1 a b 1"), "more than 2000 elements"),
    "a million million calls of nothing": (tree(6, 100, "* nothing"), "more than 5000 lines"),
    "a hundred thousand elements": (part(*(f"r{i} a b 1k" for i in range(100_000))), "is larger than 1 MiB"),
    "elements up to the file's size": (
        part(*(f"r{i} a b 1" for i in range(25_000))),
        "more than 20000 statements",
    ),
    "a subcircuit that calls itself": (part("x1 a b s"), "nest more than 8 levels deep"),
    "two that call each other, often": (
        part(*(f"x{i} a b t" for i in range(500))) + ".subckt t a b\nx1 a b s\n.ends\n",
        "nest more than 8 levels deep",
    ),
    "parameters in a circle": (".param a={b}\n.param b={a}\n" + part("r1 a b {a}"), "hangs on itself"),
    "functions in a circle": (
        ".func f(x) {g(x)}\n.func g(x) {f(x)}\n" + part("r1 a b {f(1)}"),
        "counted through the functions and parameters",
    ),
    "a huge number": (part("r1 a b 1e999"), "larger than any number"),
    "a number of many digits": (part(f"r1 a b {'9' * 4000}"), "larger than any number"),
    "a huge power": (part("r1 a b {10**400}"), "cannot be worked out"),
    "a huge exponential": (part("r1 a b {exp(1e9)}"), "cannot be worked out"),
    "a line of ten million characters": ("* " + "x" * 10_000_000, "is larger than 1 MiB"),
    "a line of a million characters": (part("r1 a b " + "1" * 1_000_000), "is longer than the 4096"),
    "a statement of many lines": (part("r1 a b 1", *(["+ " + "1" * 4000] * 20)), "more than 32768 characters"),
    "lines of nothing": ("*\n" * 500_000, "more than 100000 lines"),
    "lines of nothing, ended as of old": ("*\r" * 500_000, "more than 100000 lines"),
    "ten thousand models to choose from": (
        "".join(f".model m{i} d(is=1e-14)\n" for i in range(10_000)) + part("d1 a b nothing"),
        "(10000 in all)",
    ),
    "words that nearly are a law": (
        part(*(f"e{i} a b\n{VALUES} {{" for i in range(30))),
        "is not translated|words after its name|not understood",
    ),
    "blanks that could be anywhere": (
        part(*(f"e{i} a b\n{BLANKS} x" for i in range(30))),
        "words after its name",
    ),
}  # fmt: skip


def test_a_sum_of_many_numbers_is_worked_out_and_nests_in_nothing(tmp_path: Path) -> None:
    """Terms in a row are no brackets: 1,500 of them are a number, and so are 40 parameters that each wait for the next."""
    found = understood(tmp_path, part(f"r1 a b {{{'+'.join(['1'] * 1500)}}}"))
    assert [e.ohms for e in found.elements if isinstance(e, Resistor)] == [1500.0]
    waiting = ".param p40=1\n" + "".join(f".param p{i}={{p{i + 1}+1-0.5*1}}\n" for i in range(40))
    found = understood(tmp_path, waiting + part("r1 a b {p0}"))
    assert [e.ohms for e in found.elements if isinstance(e, Resistor)] == [21.0]


@pytest.mark.parametrize("what", CASES)
def test_a_file_without_bounds_is_refused_in_bounded_memory(tmp_path: Path, what: str) -> None:
    text, said = CASES[what]
    tracemalloc.start()
    try:
        with pytest.raises(ModelTextError, match=r"m\.lib") as caught:
            understood(tmp_path, text)
        peak = tracemalloc.get_traced_memory()[1]
    finally:
        tracemalloc.stop()
    assert any(t in str(caught.value) for t in said.split("|")), str(caught.value)
    assert len(str(caught.value)) < 1000
    assert peak < MOST_MEMORY


@pytest.mark.parametrize(
    ("files", "content", "times", "said"),
    [
        (40, "* nothing\n", 1, "more than 32 files"),
        (4, "* " + "x" * 4000 + "\n", 250, "more than 2 MiB"),
        (4, ".param\n", 15_000, "more than 20000 statements"),
        (3, "*\n", 40_000, "more than 100000 lines"),
    ],
    ids=["files", "bytes", "statements", "lines"],
)
def test_many_files_together_are_bounded_as_one_is(
    tmp_path: Path, files: int, content: str, times: int, said: str
) -> None:
    """Each of them is below what one file may have."""
    for i in range(files):
        (tmp_path / f"n{i}.lib").write_text(content * times, encoding="utf-8")
    (tmp_path / "m.lib").write_text("".join(f".include n{i}.lib\n" for i in range(files)), encoding="utf-8")
    with pytest.raises(ModelTextError) as caught:
        read_statements(tmp_path / "m.lib", tmp_path)
    assert said in str(caught.value)


def test_parameters_that_double_are_numbers_and_cost_nothing(tmp_path: Path) -> None:
    """2^39 kilohm by forty parameters: each is worked out once, however often it is named."""
    text = ".param p0=1k\n" + "".join(f".param p{i}={{p{i - 1}+p{i - 1}}}\n" for i in range(1, 40))
    found = understood(tmp_path, text + part("r1 a b {p39}"))
    assert [e.ohms for e in found.elements] == [1e3 * 2**39]  # type: ignore[union-attr]
