"""Which scenarios are run: those of the files at and below some paths, each with a folder of its own."""

from __future__ import annotations

import datetime
import itertools
import os
from collections.abc import Sequence
from dataclasses import dataclass, replace
from pathlib import Path

from boardsim.errors import InputError, Problem
from boardsim.report.wording import plain_path
from boardsim.scenarios.plan import Scenario, find_files, read_scenarios


@dataclass(frozen=True)
class Chosen:
    """What is to be run.

    Attributes
    ----------
    scenarios : tuple of Scenario
    folders : tuple of Path
        One each, relative to the folder of all; also their names in reports.
    problems : tuple of Problem
        Mistakes in files that keep further scenarios from being run.
    today : datetime.date
        The day by which acceptances are judged.
    """

    scenarios: tuple[Scenario, ...]
    folders: tuple[Path, ...]
    problems: tuple[Problem, ...]
    today: datetime.date


def choose(
    paths: Sequence[Path], only: str | None, strict: bool, day: str | None, libraries: Sequence[Path] = ()
) -> Chosen:
    """Read the scenarios at and below paths.

    Parameters
    ----------
    paths : sequence of Path
        Scenario files, or folders with such in or below them.
    only : str or None
        Part of the names of those wanted.
    strict : bool
        Whether a missing limit counts as broken in all of them.
    day : str or None
        The day by which acceptances are judged, such as "2027-01-31"; today if None.
    libraries : sequence of Path
        The user's folders of parts.

    Raises
    ------
    InputError
        If the call is wrong. Where every file is wrong nothing is left to run, and `problems` says why.
    """
    try:
        today = datetime.date.fromisoformat(day) if day is not None else datetime.date.today()
    except ValueError:
        raise InputError(f'--on "{day}": this is no day; write it such as 2027-01-31') from None
    scenarios: list[Scenario] = []
    problems: dict[Problem, None] = {}
    for path in find_files(paths):
        try:
            found, mistakes = read_scenarios(path, libraries)
        except InputError as err:
            found, mistakes = (), err.problems
        scenarios += found
        problems.update(dict.fromkeys(mistakes))
    folders = folders_of(scenarios)
    wanted = [
        i for i, folder in enumerate(folders) if only is None or only in folder.as_posix() or only in scenarios[i].name
    ]
    if only is not None and not wanted and problems:
        raise InputError(problems)  # what is meant may be among those that could not be read
    if only is not None and not wanted:
        names = ", ".join(f.as_posix() for f in folders) or "none"
        raise InputError(f'--only "{only}": no scenario has this in its name; there are: {names}')
    chosen = tuple(replace(scenarios[i], strict=strict or scenarios[i].strict) for i in wanted)
    return Chosen(chosen, tuple(folders[i] for i in wanted), tuple(problems), today)


def folders_of(scenarios: Sequence[Scenario]) -> list[Path]:
    """A folder for each scenario, relative to the folder of all: as the scenario files lie to each other."""
    homes = [s.path.parent.resolve() for s in scenarios]
    common = Path(os.path.commonpath(homes)) if homes else Path()
    plain = []
    for home, s in zip(homes, scenarios, strict=True):
        inside = home.relative_to(common)
        plain.append((Path(common.name) if inside == Path() else inside) / plain_path(s.name))
    folders: list[Path] = []
    for i, folder in enumerate(plain):
        # What others are called by right is not given away to the second of one name.
        taken = {*folders, *plain[:i], *plain[i + 1 :]} if folder in folders else set(folders)
        numbered = (folder.with_name(f"{folder.name}-{n}") for n in itertools.count(2))
        folders.append(next(f for f in itertools.chain([folder], numbered) if f not in taken))
    return folders
