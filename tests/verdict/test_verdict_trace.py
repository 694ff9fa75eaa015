"""Scope traces as CSV: what oscilloscopes write, and every mistake in one clear message."""

from __future__ import annotations

import re
from pathlib import Path

import numpy as np
import pytest

from boardsim.errors import InputError
from boardsim.verdict.trace import Columns, read_trace

T = np.arange(40) * 1e-4


def written(folder: Path, text: str, encoding: str = "utf-8") -> Path:
    path = folder / "trace.csv"
    path.write_bytes(text.encode(encoding))
    return path


def lines(*columns: np.ndarray, form: str = "{:.6f}", between: str = ",") -> str:
    return "".join(between.join(form.format(v) for v in row) + "\n" for row in zip(*columns, strict=True))


def test_titles_with_units_are_read_in_si_units(tmp_path: Path) -> None:
    text = "Time (ms),CH1 [mA],CH2 [V]\n" + lines(T * 1e3, T * 5e6, T * 1e4)
    trace = read_trace(written(tmp_path, text), Columns("time", "ch1", "CH2"))
    assert trace.current is not None
    assert trace.voltage is not None
    np.testing.assert_allclose(trace.t, T)
    np.testing.assert_allclose(trace.current, T * 5e3)
    np.testing.assert_allclose(trace.voltage, T * 1e4)
    assert trace.assumed == ()


def test_a_preamble_a_line_of_units_semicolons_and_decimal_commas(tmp_path: Path) -> None:
    body = lines(T, T * 1e3, T * 10, between=";").replace(".", ",")
    text = f"\ufeffModel;AB12\nRecord length;40\n\nSource;CH1;CH2\nSecond;Volt;mV\n{body}"
    trace = read_trace(
        written(tmp_path, text, "utf-16"), Columns("source", voltage="CH1", current="CH2", current_scale="100 mV/A")
    )
    assert trace.current is not None
    np.testing.assert_allclose(trace.current, T * 10 / 1e3 / 0.1)  # 100 mV for each ampere
    np.testing.assert_allclose(trace.waves["voltage"], T * 1e3)


def test_quoted_decimal_commas_tabs_and_columns_by_number(tmp_path: Path) -> None:
    quoted = "".join(f'"{a:.4f}";"{b:.4f}"\n'.replace(".", ",") for a, b in zip(T, T * 100, strict=True))
    trace = read_trace(written(tmp_path, quoted.replace(";", ",")), Columns("1", "2", current_scale="0.1 ohm"))
    np.testing.assert_allclose(trace.waves["current"], T * 1000)
    assert len(trace.assumed) == 2  # neither column names a unit
    tabs = read_trace(written(tmp_path, "t\ti\n" + lines(T, T, between="\t")), Columns("t", "i"))
    np.testing.assert_allclose(tabs.waves["current"], T)


def test_a_micro_sign_of_an_old_oscilloscope_and_a_probe_turned_round(tmp_path: Path) -> None:
    text = "time [µs],drop [V]\n" + lines(T * 1e6, T * 100)
    columns = Columns("time", voltage="drop", voltage_scale=-10)
    trace = read_trace(written(tmp_path, text, "latin-1"), columns)
    np.testing.assert_allclose(trace.t, T)
    np.testing.assert_allclose(trace.waves["voltage"], -T * 1000)


GOOD = "time [s],current [A]\n" + lines(T, T)


@pytest.mark.parametrize(
    ("text", "columns", "said"),
    [
        ("", Columns("time", "current"), "is empty"),
        ("some words\nand more\n", Columns("time", "current"), "no line of two or more numbers"),
        (GOOD, Columns("time"), "--current COLUMN, or --voltage COLUMN"),
        (GOOD, Columns("time", "curent"), 'no column "curent" for --current.*mean "current.*there are: time'),
        (GOOD, Columns("time", "9"), 'no column "9"'),
        (GOOD, Columns("time", "time"), "name one column"),
        (GOOD, Columns("time", "current", current_scale="100 mV/A"), "in A already; leave --current-scale out"),
        (GOOD.replace("[A]", "[V]"), Columns("time", "current"), "trace.csv:1: --current: its column is in V; say what"),
        (GOOD.replace("[A]", "[degC]"), Columns("time", "current"), "--current: .*degC.*does not measure"),
        (GOOD, Columns("time", "current", current_scale="big"), "--current-scale: 'big'"),
        (GOOD, Columns("time", None, "current", current_scale="1 V/A"), "--voltage"),
        (GOOD, Columns("time", "current", current_scale="0 V/A"), "other than 0"),
        (GOOD.replace("0.000500", "nan"), Columns("time", "current"), r"trace.csv:7: time: 'nan' is no number"),
        (GOOD + "0.004100,\n", Columns("time", "current"), "trace.csv:42: current: is empty"),
        (GOOD + "0.004100,later\n", Columns("time", "current"), "trace.csv:42: current: 'later' is no number"),
        (GOOD.replace("0.000700,", "0.000500,"), Columns("time", "current"), "trace.csv:9: time does not rise"),
        (GOOD[:250], Columns("time", "current"), r"has \d+ points; it takes at least 20"),
    ],
)  # fmt: skip
def test_every_mistake_ends_in_one_message(tmp_path: Path, text: str, columns: Columns, said: str) -> None:
    with pytest.raises(InputError) as caught:
        read_trace(written(tmp_path, text), columns)
    assert re.search(said, str(caught.value)), str(caught.value)


def test_a_trace_that_is_not_there_and_one_that_is_no_text(tmp_path: Path) -> None:
    with pytest.raises(InputError, match="cannot be read"):
        read_trace(tmp_path / "none.csv", Columns("time", "current"))
    (tmp_path / "picture.csv").write_bytes(b"\x89PNG\0\0\r\n1,2\n")
    with pytest.raises(InputError, match="is no text"):
        read_trace(tmp_path / "picture.csv", Columns("time", "current"))
