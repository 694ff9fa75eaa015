"""What scenarios other than a plain pattern find beyond findings: rows for a table, and what their picture is drawn from."""

from __future__ import annotations

from collections.abc import Mapping
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
    """So many channels turned on at once, each reading in its worst choice of channels and its worst corner.

    Attributes
    ----------
    on : int
        How many.
    channels : tuple of int
        Those that draw most; choices with a lighter one among them were tried as well.
    who : str
        The same in the board's own words.
    lowest_rail : float or None
        Of the coil rail at the board; like all readings None unless every run came to an end. [V]
    coil_current, pull_in : float or None
        At the end of the pulse, of the coil that comes closest to not pulling in, and its pull-in current; the lowest
        current, and None, where no pull-in current was given. [A]
    supply_peak : float or None
        Highest current out of the supply. [A]
    at_ceiling : float or None
        How long the supply was at its current ceiling, 0 if never; None if no ceiling was given. [s]
    verdict : Verdict
    proven : bool
        Whether the audit holds in every run; if not, the readings are not to be relied on.
    broken : str
        The sentence of the worst finding that fails, or why nothing is proven; empty where the number passes.
    """

    on: int
    channels: tuple[int, ...]
    who: str
    lowest_rail: float | None
    coil_current: float | None
    pull_in: float | None
    supply_peak: float | None
    at_ceiling: float | None
    verdict: Verdict
    proven: bool = True
    broken: str = ""


@dataclass(frozen=True)
class Volley:
    """How many channels the board can fire at once.

    Attributes
    ----------
    steps : tuple of VolleyStep
        From one channel to all; not every number where there are very many.
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
    """

    steps: tuple[VolleyStep, ...]
    most: int
    wanted: int | None
    width: float
    rail_limit: float | None
    rail_lasting: float | None
    ceiling: float | None

    @property
    def table(self) -> Table:
        """One row per number of channels; without readings where they are not proven."""
        columns = (
            Column("on at once"),
            Column("lowest rail", "V"),
            Column("coil current at the end", "A"),
            Column("pull-in", "A"),
            Column("highest supply current", "A"),
            Column("at the ceiling for", "s"),
            Column("verdict"),
        )
        return Table(columns, tuple(map(_volley_row, self.steps)))


def _volley_row(s: VolleyStep) -> tuple[Cell, ...]:
    # What is not proven does not stand beside numbers that are, where nothing would mark it.
    readings = (s.lowest_rail, s.coil_current, s.pull_in, s.supply_peak, s.at_ceiling) if s.proven else (None,) * 5
    return (s.on, *readings, s.verdict)


@dataclass(frozen=True)
class ReleaseRow:
    """One channel turned off with one clamp, each reading in its worst corner; None where none could be taken.

    Attributes
    ----------
    clamp : str
        The clamp in words, such as "diode-zener: fast-2a, 24v-5w".
    own : bool
        Whether it is the board's own.
    channel : int
    label, coil : str
        Of the channel, and of its coil.
    peak : float or None
        Highest voltage at the switch from the turn-off on. [V]
    peak_limit : float or None
        What the switch is rated for, after derating; None if that was not given. [V]
    clamp_energy, switch_energy : float or None
        That the clamp, and the switch, take from the turn-off on. [J]
    pulls_in : float or None
        From turn-on until the coil current reaches the pull-in current; None if that was not given, or is not
        reached in some corner. [s]
    let_go : float or None
        From turn-off until the coil current stays below the release current; None if that was not given, or the
        current has not fallen that far in some corner. [s]
    pull_in, release : float or None
        The currents of the coil that these times are taken at. [A]
    verdict : Verdict
    why : str
        The sentence that decides a verdict other than pass or tight; empty for those.
    corner : str
        In which the release takes longest.
    v_switch, i_coil : Envelope or None
        Around the turn-off, in that corner; times count from the turn-off.
    """

    clamp: str
    own: bool
    channel: int
    label: str
    coil: str
    peak: float | None
    peak_limit: float | None
    clamp_energy: float | None
    switch_energy: float | None
    pulls_in: float | None
    let_go: float | None
    pull_in: float | None
    release: float | None
    verdict: Verdict
    why: str = ""
    corner: str = ""
    v_switch: Envelope | None = None
    i_coil: Envelope | None = None

    @property
    def refire(self) -> float | None:
        """Shortest time from one start to the next that holds in every corner. [s]

        Notes
        -----
        The longest time to pull in plus the longest time to let go. Both are the worst of all corners, of whichever
        each: firmware that times its pulses does not know in which corner it is. The time to let go is that from a
        settled current, which a pulse that ends at pull-in has not reached: the interval errs on the safe side. It is
        one of currents: the travel of what the coil moves comes on top.
        """
        return None if self.pulls_in is None or self.let_go is None else self.pulls_in + self.let_go


@dataclass(frozen=True)
class Release:
    """What turning a channel off does, row by row: builds of channels, or clamps side by side."""

    rows: tuple[ReleaseRow, ...]

    @property
    def table(self) -> Table:
        """One row per clamp or build: peak at the switch and its rating, energies from the turn-off on, times."""
        columns = (
            Column("clamp"),
            Column("channel"),
            Column("peak", "V"),
            Column("rated", "V"),
            Column("into clamp", "J"),
            Column("into switch", "J"),
            Column("lets go in", "s"),
            Column("re-fire", "s"),
            Column("verdict"),
        )
        compared = not all(r.own for r in self.rows)
        rows = tuple(
            (
                r.clamp + (" (the board's)" if r.own and compared else ""),
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


@dataclass(frozen=True)
class LinkView:
    """One link over time, at the logic rail where it has the least room; 0 is the controller's clock (or latch) edge.

    Attributes
    ----------
    name, edge, signal : str
        Of the link, of the edge that takes, and of what it takes.
    seen : (float, float)
        When that edge is seen at the earliest and at the latest. [s]
    settled : float
        From when on what is taken has surely arrived. [s]
    leaves : float or None
        From when on it may change again; None where that does not matter. [s]
    before, after : float
        Set-up and hold: how long it has to be there before and after the edge. [s]
    edges : tuple of (float, bool)
        Other edges of the clock, and whether they rise. [s]
    volts : float
        [V]
    """

    name: str
    edge: str
    signal: str
    seen: tuple[float, float]
    settled: float
    leaves: float | None
    before: float
    after: float
    edges: tuple[tuple[float, bool], ...]
    volts: float

    @property
    def early(self) -> float:
        """What is left of the time before the edge; negative where it does not suffice. [s]"""
        return self.seen[0] - self.before - self.settled

    @property
    def late(self) -> float | None:
        """What is left of the time after the edge. [s]"""
        return None if self.leaves is None else self.leaves - self.seen[1] - self.after


@dataclass(frozen=True)
class ChainRow:
    """One link in numbers: levels given and needed [V], times needed and there [s]; None where one is not known."""

    link: str
    high: float | None = None
    high_needed: float | None = None
    low: float | None = None
    low_needed: float | None = None
    setup_needed: float | None = None
    setup: float | None = None
    hold_needed: float | None = None
    hold: float | None = None


@dataclass(frozen=True)
class ChainStudy:
    """Whether the chain can work, link by link.

    Attributes
    ----------
    rows : tuple of ChainRow
    views : tuple of LinkView
        What the picture shows; empty where times are not known.
    """

    rows: tuple[ChainRow, ...]
    views: tuple[LinkView, ...]

    @property
    def table(self) -> Table:
        """One row per sort of link."""
        names = (("high level", "V"), ("needs", "V"), ("low level", "V"), ("allows", "V"))
        times = (("set-up needs", "s"), ("there", "s"), ("hold needs", "s"), ("there", "s"))
        columns = (Column("link"), *(Column(*one) for one in (*names, *times)))
        rows = tuple(
            (r.link, r.high, r.high_needed, r.low, r.low_needed, r.setup_needed, r.setup, r.hold_needed, r.hold)
            for r in self.rows
        )
        return Table(columns, rows)


@dataclass(frozen=True)
class BootRow:
    """One way in which the board comes up, each reading in its worst corner.

    Attributes
    ----------
    name : str
        What the registers hold.
    contents : str
        The storage stage, output 0 on the right, in hexadecimal.
    current : float or None
        Highest uncommanded current of any coil; after a reset of those that are still fed when they have to be off, else 0;
        None where no run came to an end. [A]
    label : str
        Whose.
    count : int
        Channels whose current counts.
    energy : float or None
        That all coils together took at their terminals, from switch-on or the reset to the first enabled frame. [J]
    stays : bool
        Whether only the first frame ends it.
    verdict : Verdict
    """

    name: str
    contents: str
    current: float | None
    label: str
    count: int
    energy: float | None
    stays: bool
    verdict: Verdict


@dataclass(frozen=True)
class PowerUp:
    """What a board does before its first enabled frame.

    Attributes
    ----------
    rows : tuple of BootRow
    shown : int
        The row that is the worst, which the picture shows.
    corner : str
        In which it is.
    since, until : float
        Between the two nothing may flow. [s]
    frame : float
        Start of the first register frame. [s]
    limit : float
        The smallest current of a coil that counts. [A]
    waves : mapping of quantity to Envelope
        "v_rail", "v_logic", "v_enable" and "v_clear" where these are lines of their own [V], "enabled" [1], "i_total" [A].
    reset : float or None
        When the reset is; None at switch-on. [s]
    disabled : str
        What outputs that are not enabled are, of these registers.
    """

    rows: tuple[BootRow, ...]
    shown: int
    corner: str
    since: float
    until: float
    frame: float
    limit: float
    waves: Mapping[str, Envelope]
    reset: float | None = None
    disabled: str = "high impedance"

    @property
    def table(self) -> Table:
        """One row per way to come up."""
        columns = (
            Column("registers hold"),
            Column("storage"),
            Column("highest current", "A"),
            Column("of"),
            Column("coils on"),
            Column("energy", "J"),
            Column("ended by"),
            Column("verdict"),
        )
        return Table(columns, tuple(_boot_row(row) for row in self.rows))


def _boot_row(row: BootRow) -> tuple[Cell, ...]:
    ended = "the first frame" if row.stays else "itself" if row.count else "-"
    return (row.name, row.contents, row.current, row.label, row.count, row.energy, ended, row.verdict)
