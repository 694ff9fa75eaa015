"""The assembled netlist, and the map from its saved waveforms to quantities of parts."""

from __future__ import annotations

import textwrap
from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Literal

from boardsim.parts.base import Assumption, Corner
from boardsim.parts.elements import Port, Signal
from boardsim.parts.rules import Rule
from boardsim.parts.temperature import in_celsius

_BEYOND = 1e-9  # [s] that a run goes on after its window, so that the window's last instant lies inside
MANY_BRIDGES = 8  # from which on pivots are worth a thought; with few, and switches of a milliohm, smaller ones do harm
MODEL_TEMPERATURE = 25.0  # [degC], of models that do not say another; windings carry their own temperature


@dataclass(frozen=True)
class Settings:
    """How finely the engine integrates.

    Notes
    -----
    `abstol` is 1 uA, not ngspice's 1 pA: with many switches on one rail the noise of Newton's method on tiny
    capacitive currents otherwise holds the step at picoseconds for ever.
    """

    method: Literal["trap", "gear"]
    reltol: float
    max_step: float
    abstol: float = 1e-6

    def __str__(self) -> str:
        return f"{self.method}, reltol {self.reltol:g}, step up to {self.max_step * 1e6:g} us"


@dataclass(frozen=True)
class Window:
    """A stretch of time with the channels that matter in it. [s]"""

    start: float
    stop: float
    channels: tuple[int, ...]


@dataclass(frozen=True)
class PlacedRule:
    """A rule of a part at its place on the board; `channel` is the place of a line where it is one's (`Deck.lines`)."""

    rule: Rule
    channel: int | None
    part: str
    label: str


@dataclass(frozen=True)
class Deck:
    """One window of a board in one corner.

    Attributes
    ----------
    netlist : str
        Elements and models.
    vectors : tuple of str
        What is saved, in order: "v(node)", "i(element)".
    signals : mapping of (channel or None, quantity) to Signal
    assumed : mapping of channel (None: supply, cable and bulk capacitor) to names of what was assumed there
    measures : tuple of str
        .meas lines, for who runs the deck by hand; the engine leaves them out.
    rest : mapping of node to voltage
        The supply's, at which a run has to begin. [V]
    digital : bool
        Whether registers are in it as flip-flops.
    clocked : tuple of (start, stop)
        Stretches in which the edges of clocked lines set the points, however finely the rest is integrated. [s]
    lines : mapping of place to tuple of int
        Places that are no channels but rows and columns of a matrix, and the channels along each.
    bridges : int
        Coils in it that lie between two legs.
    """

    netlist: str
    window: Window
    corner: Corner
    vectors: tuple[str, ...]
    signals: Mapping[tuple[int | None, str], Signal]
    units: Mapping[tuple[int | None, str], str]
    ports: tuple[tuple[int | None, str, Port], ...]
    rules: tuple[PlacedRule, ...]
    assumptions: tuple[Assumption, ...]
    assumed: Mapping[int | None, tuple[str, ...]]
    measures: tuple[str, ...]
    rest: Mapping[str, float]
    digital: bool = False
    clocked: tuple[tuple[float, float], ...] = ()
    lines: Mapping[int, tuple[int, ...]] = field(default_factory=dict)
    bridges: int = 0

    def text(self, settings: Settings, measures: bool = True) -> str:
        """The whole deck as plain ngspice runs it."""
        duration = self.window.stop - self.window.start
        lines = [
            self.netlist.rstrip(),
            f"* corner: {self.corner.name}; {settings}",
            f".options method={settings.method} reltol={settings.reltol:g} abstol={settings.abstol:g}",
            f".options temp={in_celsius(self.corner.junction):g} tnom={MODEL_TEMPERATURE:g} noacct noinit",
            # With event-driven devices ngspice 39 takes the strictest tolerance of truncation; back to the usual one.
            *([".options xtrtol=7"] if self.digital else ()),
            # Of many resting legs, each milliohms to ground or to the rail, the largest pivots come first, and their elimination fills the
            # matrix: a step then costs up to five times as much. Pivots down to a tenth of the usual share keep it sparse.
            *([".options pivrel=1e-4"] if self.bridges >= MANY_BRIDGES else ()),
            f".save {' '.join(self.vectors)}",
            *(self.measures if measures else ()),
            f".tran {min(settings.max_step, duration / 50):.9g} {duration + _BEYOND:.15g} 0 {settings.max_step:.9g}",
            ".end",
        ]
        return "\n".join(_folded(line) for text in lines for line in text.splitlines() if line.strip()) + "\n"


def _folded(line: str) -> str:
    """Long lines continue with a plus sign."""
    if len(line) <= 120:
        return line
    return "\n+ ".join(textwrap.wrap(line, 118, break_long_words=False, break_on_hyphens=False))
