"""The commands: parse, call one function, print. Every error of the user's ends here, in a message and a status."""

from __future__ import annotations

import contextlib
import os
import signal
import sys
from collections.abc import Callable, Iterator
from pathlib import Path
from typing import TYPE_CHECKING, Annotated, Any

import typer

from boardsim.errors import BoardsimError, InputError

if TYPE_CHECKING:
    from rich.console import Console

    from boardsim.scenarios.crew import Crew
    from boardsim.verdict.findings import Result

# Whatever needs numpy, pydantic or matplotlib is imported inside the command that uses it: `--help` must be quick.

app = typer.Typer(
    name="boardsim",
    no_args_is_help=True,
    add_completion=False,
    pretty_exceptions_enable=False,
    context_settings={"help_option_names": ["-h", "--help"]},
    help="Checks boards that fire many coils through shift registers: a firing pattern against the limits of every part.",
)

EXIT_STOPPED = 130  # by the shell's convention for an interrupted command


def _version(wanted: bool) -> None:
    if wanted:
        from importlib.metadata import version

        typer.echo(f"boardsim {version('boardsim')}")
        raise typer.Exit


@app.callback()
def _top(
    version: Annotated[
        bool, typer.Option("--version", help="print the version", callback=_version, is_eager=True)
    ] = False,
) -> None:
    pass


BoardFile = Annotated[
    Path, typer.Argument(metavar="BOARD", help="board file, such as netlists/fruit-sorter/board.toml")
]
PatternFile = Annotated[
    Path,
    typer.Argument(metavar="PATTERN", help="pattern file, such as netlists/fruit-sorter/patterns/steady.toml"),
]


@app.command(
    epilog="Example: boardsim fire netlists/fruit-sorter/board.toml netlists/fruit-sorter/patterns/rush.toml --out out/rush"
)
def fire(
    board: BoardFile,
    pattern: PatternFile,
    out: Annotated[
        Path | None,
        typer.Option(metavar="DIR", help="folder for the results; out/BOARD-PATTERN if not given"),
    ] = None,
    strict: Annotated[bool, typer.Option("--strict", help="count a limit that was not given as broken")] = False,
    time_limit: Annotated[float, typer.Option(metavar="SECONDS", min=1.0, help="for each run of the engine")] = 900.0,
) -> None:
    """Simulate a firing pattern on a board and judge it against every limit.

    Exit status: 0 pass, 1 a limit is broken, 2 wrong input, 3 unproven.
    """
    from boardsim.board.reader import read_board
    from boardsim.firing.pattern import read_pattern
    from boardsim.report.folder import make_ready
    from boardsim.report.wording import plain_path
    from boardsim.scenarios.fire import fire_pattern

    the_board = read_board(board)
    the_pattern = read_pattern(pattern, the_board)
    folder = out or Path("out") / f"{plain_path(the_board.name)}-{plain_path(the_pattern.name)}"
    make_ready(folder)
    with _working(f"{the_board.name}, {the_pattern.name}", time_limit) as (crew, progress):
        result = fire_pattern(the_board, the_pattern, folder, strict, crew, progress)
    _present(result, folder)


@app.command(
    epilog="Example: boardsim deck netlists/fruit-sorter/board.toml netlists/fruit-sorter/patterns/rush.toml --to rush.cir && ngspice -b rush.cir"
)
def deck(
    board: BoardFile,
    pattern: PatternFile,
    to: Annotated[
        Path | None, typer.Option(metavar="FILE", help="where to write it; standard output if not given")
    ] = None,
    corner: Annotated[
        int,
        typer.Option(
            metavar="N",
            min=1,
            help="which of the worst corners of the tolerances, counted from 1; the first if not given",
        ),
    ] = 1,
) -> None:
    """Write the assembled ngspice deck of a pattern; plain `ngspice -b` runs it and prints its readings."""
    from boardsim.board.reader import read_board
    from boardsim.firing.pattern import read_pattern
    from boardsim.report.files import write_text
    from boardsim.scenarios.decks import write_deck

    the_board = read_board(board)
    names, text = write_deck(the_board, read_pattern(pattern, the_board), corner)
    if text is None:
        listed = "; ".join(f"{i} {name}" for i, name in enumerate(names, 1))
        raise InputError(f"--corner {corner}: this board has {len(names)}: {listed}")
    if to is None:
        sys.stdout.write(text)
    else:
        write_text(to, text)
        typer.echo(f"corner {corner}, {names[corner - 1]}: {to}", err=True)


@app.command(epilog="Example: boardsim schema > board.schema.json")
def schema(
    what: Annotated[str, typer.Argument(metavar="[board|pattern]", help="which kind of file")] = "board",
) -> None:
    """Print the JSON Schema of board or pattern files, for editors that complete and check TOML."""
    import json

    from boardsim.scenarios.starter import json_schema

    found = json_schema(what)
    if found is None:
        raise InputError(f'"{what}" is not a kind of file; say board or pattern')
    typer.echo(json.dumps(found, indent=2, ensure_ascii=False))


@app.command(
    epilog="Example: boardsim begin my-board && boardsim fire my-board/board.toml my-board/patterns/first.toml"
)
def begin(
    folder: Annotated[Path, typer.Argument(metavar="FOLDER", help="new folder for the board")],
) -> None:
    """Write a commented starter board and a first pattern into a new folder."""
    from boardsim.scenarios.starter import write_starter

    written = write_starter(folder)
    for path in written:
        typer.echo(path)
    typer.echo(f"\nnow try: boardsim fire {written[0]} {written[1]}")


@contextlib.contextmanager
def _working(what: str, time_limit: float) -> Iterator[tuple[Crew, Callable[[float], None]]]:
    """Those who run the engine, and a progress bar; an interrupt ends every run and leaves no result."""
    from boardsim.scenarios.crew import Crew

    try:
        with Crew(time_limit=time_limit) as crew, _progress(what) as progress:
            yield crew, progress
    except KeyboardInterrupt:
        typer.echo("boardsim: stopped; no result was written", err=True)
        raise typer.Exit(EXIT_STOPPED) from None


@contextlib.contextmanager
def _progress(what: str) -> Iterator[Callable[[float], None]]:
    """A progress bar on standard error; nothing where that is no terminal."""
    from rich.console import Console
    from rich.progress import BarColumn, Progress, TextColumn, TimeElapsedColumn

    console = Console(stderr=True)
    columns: tuple[Any, ...] = (
        TextColumn("{task.description}"),
        BarColumn(),
        TextColumn("{task.percentage:>3.0f} %"),
        TimeElapsedColumn(),
    )
    with Progress(*columns, console=console, transient=True, disable=not console.is_terminal) as bar:
        task = bar.add_task(what, total=1.0)
        yield lambda share: bar.update(task, completed=share)


def _present(result: Result, folder: Path) -> None:
    """Write a result's files, print it, and end with its status."""
    from boardsim.report.folder import write_results
    from boardsim.report.terminal import print_result
    from boardsim.verdict.findings import exit_status

    try:
        picture = write_results(result, folder)
    except KeyboardInterrupt:
        typer.echo(f"boardsim: stopped; the results in {folder} are not complete", err=True)
        raise typer.Exit(EXIT_STOPPED) from None
    with _reader_may_leave():
        print_result(result, _console(), picture, folder)
    raise typer.Exit(exit_status(result.verdict))


def _console() -> Console:
    """Standard output, 100 columns wide where it is no terminal."""
    from rich.console import Console

    console = Console(soft_wrap=False)
    return console if console.is_terminal else Console(width=100)


@contextlib.contextmanager
def _reader_may_leave() -> Iterator[None]:
    """Whoever reads the output may stop, as `head` does: the files are written and the verdict stands."""
    try:
        yield
        sys.stdout.flush()
    except BrokenPipeError:
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())


def _stop(*_: object) -> None:
    """Be ended as by an interrupt: engines are stopped and scratch folders removed."""
    for one in (signal.SIGTERM, signal.SIGINT):
        signal.signal(one, signal.SIG_IGN)  # a second one must not interrupt the tidying up
    raise KeyboardInterrupt


def main() -> None:
    """Run a command; an error that a user can cause ends in its message and its exit status, never in a traceback."""
    for one in (signal.SIGTERM, signal.SIGINT):
        signal.signal(one, _stop)
    try:
        app()
    except BoardsimError as err:
        located = isinstance(err, InputError) and err.problems  # begins with file and line, where editors look for them
        typer.echo(str(err) if located else f"boardsim: {err}", err=True)
        sys.exit(err.exit_status)


if __name__ == "__main__":
    main()
