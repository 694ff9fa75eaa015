"""The P-MOSFET: magnitudes in files, the mirror image of an N-MOSFET in circuits."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np
import pytest
from pydantic import ValidationError

from boardsim.board.reader import library_part
from boardsim.circuit.build import Builder
from boardsim.engine.run import Engine
from boardsim.engine.waves import Waves
from boardsim.parts.elements import Drive, Inductor, PowerMosfet, Resistor
from boardsim.parts.library import records
from boardsim.parts.mosfet import Mosfet, NMosfet
from boardsim.parts.p_mosfet import PMosfet

FIELDS = {k: v for k, v in records()["AO3401A"].items() if k not in ("source", "sources", "kind")}


def test_the_same_figures_make_the_same_parameters_in_both_polarities() -> None:
    n, p = NMosfet.model_validate(FIELDS), PMosfet.model_validate(FIELDS)
    for t in (248.15, 298.15, 398.15):
        own, mirrored = n.card("m", n.at_temperature(30.0, t)), p.card("m", p.at_temperature(30.0, t))
        assert (mirrored.flags, own.flags) == (("pchan",), ())
        assert mirrored.parameters == {**own.parameters, "VTO": -own.parameters["VTO"]}


@pytest.mark.parametrize(
    ("key", "value"),
    [
        ("breakdown", "-30 V"),
        ("threshold", " -0.9 V"),
        ("continuous_current", "\N{MINUS SIGN}4 A"),
        ("on_resistance", [{"value": "41 mohm", "gate": "-10 V"}]),
        ("switching", {**FIELDS["switching"], "supply": "-15 V"}),
    ],
)
def test_a_minus_sign_of_the_sheet_is_refused_and_the_message_says_why(key: str, value: object) -> None:
    with pytest.raises(ValidationError, match=rf"{key}.* given as magnitudes: leave out the minus sign"):
        PMosfet.model_validate(FIELDS | {key: value})


def test_drifts_keep_their_sign_and_temperatures_may_be_below_zero() -> None:
    cold = [*FIELDS["on_resistance"][:3], {"value": "33 mohm", "gate": "10 V", "at": "-40 degC"}]
    part = PMosfet.model_validate(FIELDS | {"threshold_drift": "-3 mV/K", "on_resistance": cold})
    assert part.drift_of_threshold.typ == pytest.approx(-3e-3)


def test_a_p_mosfet_is_no_n_mosfet_where_one_is_asked_for() -> None:
    assert not isinstance(library_part("AO3401A"), NMosfet)
    assert isinstance(library_part("AO3401A"), Mosfet)


@pytest.mark.engine
def test_the_mirrored_device_is_exactly_the_mirror_image(tmp_path: Path) -> None:
    """Both in one circuit, switching a coil without a clamp: channel, charges, body diode and breakdown all take part.

    Exact but for Newton's last step: both halves see the same numbers with opposite signs. 1e-6 of the largest value.
    """
    n = NMosfet.model_validate(FIELDS)
    p = PMosfet.model_validate(FIELDS)
    builder = Builder()
    for part, name, sign in ((n, "n", 1.0), (p, "p", -1.0)):
        pulse = tuple((t, sign * v) for t, v in ((0, 0), (1e-6, 0), (1.01e-6, 6), (9e-6, 6), (9.01e-6, 0), (30e-6, 0)))
        builder.add((
            Drive(f"{name}_rail", f"{name}_rail", "0", ((0.0, sign * 12.0), (30e-6, sign * 12.0))),
            Resistor(f"{name}_r", f"{name}_rail", f"{name}_w", 2.0),
            Inductor(f"{name}_l", f"{name}_w", f"{name}_d", 20e-6),
            Drive(f"{name}_p", f"{name}_p", "0", pulse),
            Resistor(f"{name}_g", f"{name}_p", f"{name}_g", 10.0),
            PowerMosfet(name, f"{name}_d", f"{name}_g", "0", part.card("m", part.parameters(30.0))),
        ))  # fmt: skip
    lines = [builder.netlist().rstrip(), ".options method=gear reltol=1e-5", ".tran 10n 30u 0 20n", ".end"]
    text = "\n".join(lines) + "\n"
    with Engine(tmp_path / "kept", time_limit=60.0) as engine, engine.run_text(text, 30e-6) as waves:
        found = columns(waves)
    assert found["v(n_d)"].max() > 30.0  # breakdown
    assert found["v(n_d)"].min() < 0.05  # on
    for quantity in ("v({}_d)", "v({}_g)", "i({}_l)"):
        one, other = (found[quantity.format(name).replace("i(", "i(l")] for name in "np")
        assert abs(one + other).max() <= 1e-6 * abs(one).max()


def columns(waves: Waves) -> dict[str, Any]:
    blocks = list(waves.blocks())
    names = [f"i({n.removesuffix('#branch')})" if n.endswith("#branch") else n for n in waves.names]
    rows = np.concatenate(blocks)
    return {name: rows[:, k] for k, name in enumerate(names)}


def test_the_proofs_are_the_mirror_images_of_those_of_the_n_channel_part() -> None:
    own, mirrored = NMosfet.model_validate(FIELDS).proofs(), PMosfet.model_validate(FIELDS).proofs()
    assert [p.quantity for p in mirrored] == [p.quantity for p in own]
    for a, b in zip(own, mirrored, strict=True):
        assert (a.printed, a.tolerance, a.duration) == (b.printed, b.tolerance, b.duration)
        drives = [(x, y) for x, y in zip(a.elements, b.elements, strict=True) if isinstance(x, Drive)]
        for x, y in drives:
            assert isinstance(y, Drive)
            assert [(t, -v) for t, v in x.points] == list(y.points)
