"""How many channels at once: rail and currents against Kirchhoff's laws, and what must hold for any board."""

from __future__ import annotations

import itertools
from pathlib import Path

import pytest
from reference_boards import NO_LOSS, PERFECT_DIODE, PERFECT_SWITCH

from boardsim.board.reader import read_board
from boardsim.scenarios.volley import volley
from boardsim.verdict.studies import Volley

pytestmark = pytest.mark.engine

V, R_SOURCE, R_COIL, R_SWITCH = 24.0, 0.15, 24.0, 0.4
# Annealed copper 0.017241 ohm mm2/m at 20 degC (IEC 60028), 2 m of 1.5 mm2 out and back.
R_CABLE = 0.017241 * 2 * 2 / 1.5
TOP = 5.0
CEILING = f', current_ceiling = "{TOP} A"'
SWITCH = PERFECT_SWITCH.format(breakdown="200 V").replace("1 mohm", f"{R_SWITCH} ohm")


def board_text(ceiling: str = "", outputs: str = "0-8", supply: str = f"{V} V") -> str:
    """Nine tray gates without tolerances: only the nominal corner is run."""
    return f"""
supply = {{ voltage = "{supply}", resistance = "{R_SOURCE} ohm"{ceiling} }}
cable = {{ area = "1.5 mm2", length = "2 m" }}
bulk = {{ capacitance = "4700 uF", esr = "30 mohm", rated = "63 V" }}
logic = {{ voltage = "5 V" }}
[controller]
high_drop = "0.8 V"
low_output = "0.6 V"

[chain]
register = "74HC595"
count = 2
clock = "4 MHz"
[coils.gate]
resistance = "{R_COIL} ohm"
inductance = "10 mH"
pull_in = "0.4 A"
{NO_LOSS}
{SWITCH}{PERFECT_DIODE}
[channels."0-8"]
coil = "gate"
outputs = "{outputs}"
switch = {{ part = "perfect", gate = "10 ohm" }}
clamp = {{ kind = "diode", diode = "perfect-diode" }}
[limits]
most_on = 4
brown_out = {{ voltage = "18 V", lasting = "1 ms" }}
"""


def run(folder: Path, text: str) -> Volley:
    """With the width that the program takes by itself: it claims that all has settled by its end."""
    (folder / "board.toml").write_text(text, encoding="utf-8")
    study = volley(read_board(folder / "board.toml"), folder / "kept").study
    assert isinstance(study, Volley)
    return study


@pytest.fixture(scope="module")
def free(tmp_path_factory: pytest.TempPathFactory) -> Volley:
    """Without a ceiling."""
    return run(tmp_path_factory.mktemp("free"), board_text())


@pytest.fixture(scope="module")
def limited(tmp_path_factory: pytest.TempPathFactory) -> Volley:
    """With a ceiling of 5 A."""
    return run(tmp_path_factory.mktemp("limited"), board_text(CEILING))


# 0.5 %: by the end of a settled pulse 0.25 % of the change is left, the audit lets a pair of runs differ by a little, and
# the supply's internal load and the bend of its characteristic take some mA.
CLOSE = 5e-3


def test_settled_rail_and_currents_are_those_of_the_divider(free: Volley) -> None:
    """Ohm and Kirchhoff: n branches of coil and switch, side by side, behind source and cable."""
    steps = {s.on: s for s in free.steps}
    for n in (1, 4, 9):
        branch = R_COIL + R_SWITCH
        total = V / (R_SOURCE + R_CABLE + branch / n)
        rail = V - total * (R_SOURCE + R_CABLE)
        assert steps[n].lowest_rail == pytest.approx(rail, rel=CLOSE)
        assert V - (steps[n].lowest_rail or 0.0) == pytest.approx(V - rail, rel=CLOSE)  # the sag by itself as well
        assert steps[n].coil_current == pytest.approx(rail / branch, rel=CLOSE)
        assert steps[n].supply_peak == pytest.approx(total, rel=CLOSE)
        assert steps[n].at_ceiling is None


def test_at_its_ceiling_the_supply_shares_its_current_out(limited: Volley) -> None:
    """Kirchhoff: I_ceiling = n v / (R_coil + R_switch) once the bulk capacitor has given what it had."""
    branch = R_COIL + R_SWITCH
    for step in limited.steps:
        asked = V / (R_SOURCE + R_CABLE + branch / step.on)
        if asked < 0.97 * TOP:
            assert step.at_ceiling == 0.0
        elif asked > 1.03 * TOP:
            # R/n x C is ten times L/R and more: nothing rings, and the lowest rail is the settled one.
            assert step.lowest_rail == pytest.approx(TOP * branch / step.on, rel=CLOSE)
            assert step.coil_current == pytest.approx(TOP / step.on, rel=CLOSE)
            assert step.supply_peak == pytest.approx(TOP, rel=CLOSE)
            assert step.at_ceiling is not None
            assert step.at_ceiling > 0.5 * limited.width
            assert step.verdict == "fail"
    # By hand: 5 draw 4.76 A, 6 would draw 5.67 A.
    assert limited.most == 5


def test_more_channels_never_raise_the_rail_nor_the_coil_current(free: Volley, limited: Volley) -> None:
    for study in (free, limited):
        for fewer, more in itertools.pairwise(study.steps):
            # 1e-3: two runs with steps of their own; one more channel moves the rail by a percent and more.
            assert (more.lowest_rail or 0.0) < (fewer.lowest_rail or 0.0) * (1 + 1e-3)
            assert (more.coil_current or 0.0) < (fewer.coil_current or 0.0) * (1 + 1e-3)


def test_identical_channels_on_other_outputs_give_the_same_table(tmp_path: Path, limited: Volley) -> None:
    plain, moved = limited, run(tmp_path, board_text(CEILING, "15,3,9,1,12,0,7,5,2"))
    assert (plain.most, plain.width, plain.wanted) == (moved.most, moved.width, moved.wanted)
    for a, b in zip(plain.table.rows, moved.table.rows, strict=True):
        assert (a[0], a[-1]) == (b[0], b[-1])
        # 1e-3: the same equations, at other steps.
        assert [c for c in a[1:-1] if c is not None] == pytest.approx([c for c in b[1:-1] if c is not None], rel=1e-3)


def test_a_higher_supply_never_lowers_the_rail(tmp_path: Path, free: Volley) -> None:
    low, high = run(tmp_path, board_text(supply="22 V")).steps, free.steps
    assert all((a.lowest_rail or 0.0) < (b.lowest_rail or 0.0) for a, b in zip(low, high, strict=True))


STIFF = """
ambient = "5 to 45 degC"
supply = { voltage = "24 V +/- 5 %", resistance = "5 mohm", current_ceiling = "90 A" }
cable = { gauge = "10 AWG", length = "1.8 m" }
bulk = { capacitance = "22000 uF +/- 20 %", esr = "40 mohm", esl = "20 nH", rated = "35 V" }
logic = { voltage = "5 V +/- 5 %" }
[controller]
high_drop = "0.8 V"
low_output = "0.6 V"

[chain]
register = "74HC595"
count = 2
clock = "4 MHz"
[coils.ejector]
resistance = "16 ohm +/- 10 %"
at = "20 degC"
inductance = "12 mH +/- 20 %"
pull_in = "0.8 A"
release = "0.2 A"
rise = "40 K"
[channels."0-11"]
coil = "ejector"
switch = { part = "n-logic-60v", gate = "100 ohm", pulldown = "10 kohm" }
clamp = { kind = "diode-zener", to = "rail", diode = "fast-2a", zener = "24v-5w" }
[limits]
most_on = 6
brown_out = { voltage = "17 V", lasting = "1 ms" }
"""


def test_a_stiff_supply_feeds_any_number_from_the_voltage_that_it_has(tmp_path: Path) -> None:
    """Every run must start from the right operating point: the engine's search for it once left a stiff supply's rail
    volts too high, without any message, with some numbers of channels."""
    (tmp_path / "board.toml").write_text(STIFF, encoding="utf-8")
    study = volley(read_board(tmp_path / "board.toml"), tmp_path / "kept", width=20e-3).study
    assert isinstance(study, Volley)
    # Supply low, windings hot: copper after IEC 60028 (0.00393 / K), 16 ohm + 10 % at 85 degC; 53 mohm of switch at 4.7 V
    # of gate; 5 mohm of source and 12.96 mohm of 3.6 m of 10 AWG (5.26 mm2) at 45 degC.
    branch = 17.6 * (1 + 0.00393 * 65) + 0.053
    source = 5e-3 + 3.6 * 0.017241 / 5.261 * (1 + 0.00393 * 25)
    for step in study.steps:
        current = 22.8 / (source + branch / step.on) / step.on
        assert step.proven
        assert step.coil_current == pytest.approx(current, rel=CLOSE)
