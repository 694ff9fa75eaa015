"""What scenarios other than a plain pattern find beyond findings: rows for a table, and what their picture is drawn from."""

from __future__ import annotations

from dataclasses import dataclass

from boardsim.verdict.findings import Envelope, Verdict


@dataclass(frozen=True)
class Column:
    """One column of a table: its name, and the unit of its numbers ("" for words and counts)."""

    name: str
    unit: str = ""


Cell = float | int | str | None


@dataclass(frozen=True)
class Table:
    """Rows for people and programs; None stands for a number that was not given or does not apply."""

    columns: tuple[Column, ...]
    rows: tuple[tuple[Cell, ...], ...]


@dataclass(frozen=True)
class VolleyStep:
    """So many channels turned on at once, each reading in its worst corner.

    Attributes
    ----------
    on : int
        How many.
    channels : tuple of int
        Which.
    who : str
        The same in the board's own words.
    lowest_rail : float
        Of the coil rail at the board. [V]
    coil_current : float
        The lowest of all coils at the end of the pulse. [A]
    supply_peak : float
        Highest current out of the supply. [A]
    at_ceiling : float or None
        How long the supply was at its current ceiling, 0 if never; None if no ceiling was given. [s]
    verdict : Verdict
    broken : str
        The sentence of the worst finding that fails; empty if none does.
    """

    on: int
    channels: tuple[int, ...]
    who: str
    lowest_rail: float
    coil_current: float
    supply_peak: float
    at_ceiling: float | None
    verdict: Verdict
    broken: str = ""


@dataclass(frozen=True)
class Volley:
    """How many channels the board can fire at once.

    Attributes
    ----------
    steps : tuple of VolleyStep
        From one channel to all.
    most : int
        The largest number that passes, with every smaller one; 0 if not even one does.
    wanted : int or None
        How many the board's firmware may fire at once, or the caller asks for.
    width : float
        Of the pulse. [s]
    rail_limit, rail_lasting : float or None
        Brown-out level [V] and its least duration [s].
    ceiling : float or None
        Of the supply. [A]
    pull_in : float or None
        Highest pull-in current of the coils. [A]
    """

    steps: tuple[VolleyStep, ...]
    most: int
    wanted: int | None
    width: float
    rail_limit: float | None
    rail_lasting: float | None
    ceiling: float | None
    pull_in: float | None

    @property
    def table(self) -> Table:
        """One row per number of channels."""
        columns = (
            Column("on at once"),
            Column("lowest rail", "V"),
            Column("lowest coil current", "A"),
            Column("highest supply current", "A"),
            Column("at the ceiling for", "s"),
            Column("verdict"),
        )
        rows = tuple((s.on, s.lowest_rail, s.coil_current, s.supply_peak, s.at_ceiling, s.verdict) for s in self.steps)
        return Table(columns, rows)


@dataclass(frozen=True)
class ReleaseRow:
    """One channel turned off with one clamp, each reading in its worst corner.

    Attributes
    ----------
    clamp : str
        The clamp in words, such as "diode-zener: fast-2a, 24v-5w".
    own : bool
        Whether it is the board's own.
    channel : int
    label : str
        Of the channel.
    peak : float
        Highest voltage at the switch. [V]
    peak_limit : float or None
        What the switch is rated for. [V]
    clamp_energy, switch_energy : float
        That the clamp, and the switch, take from turn-off on. [J]
    let_go : float or None
        From turn-off until the coil current stays below the release current; None if that was not given, or the
        current has not fallen that far. [s]
    refire : float or None
        Shortest time from one start to the next: until the coil has pulled in, and `let_go`. [s]
    verdict : Verdict
    broken : str
        The sentence of the worst finding that fails; empty if none does.
    v_switch, i_coil : Envelope or None
        Around the turn-off, in the corner with the longest release; times count from the turn-off.
    """

    clamp: str
    own: bool
    channel: int
    label: str
    peak: float
    peak_limit: float | None
    clamp_energy: float
    switch_energy: float
    let_go: float | None
    refire: float | None
    verdict: Verdict
    broken: str = ""
    v_switch: Envelope | None = None
    i_coil: Envelope | None = None


@dataclass(frozen=True)
class Release:
    """What turning a channel off does, row by row: builds of channels, or clamps side by side.

    Attributes
    ----------
    release_current, pull_in : float or None
        Of the coil, as they are judged. [A]
    """

    rows: tuple[ReleaseRow, ...]
    release_current: float | None
    pull_in: float | None

    @property
    def table(self) -> Table:
        """One row per clamp or build."""
        columns = (
            Column("clamp"),
            Column("channel"),
            Column("peak at the switch", "V"),
            Column("rated", "V"),
            Column("energy in the clamp", "J"),
            Column("energy in the switch", "J"),
            Column("time to let go", "s"),
            Column("re-fire interval", "s"),
            Column("verdict"),
        )
        rows = tuple(
            (
                r.clamp + (" (the board's own)" if r.own else ""),
                r.label,
                r.peak,
                r.peak_limit,
                r.clamp_energy,
                r.switch_energy,
                r.let_go,
                r.refire,
                r.verdict,
            )
            for r in self.rows
        )
        return Table(columns, rows)
