"""The commands: parse, call one function, print. Every error of the user's ends here, in a message and a status."""

from __future__ import annotations

import contextlib
import os
import signal
import sys
from collections.abc import Callable, Iterator
from pathlib import Path
from typing import TYPE_CHECKING, Annotated, Any, Literal

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
    typer.Argument(
        metavar="PATTERN",
        help="pattern file, such as netlists/fruit-sorter/patterns/steady.toml; a list of events, events.csv; or a TOML"
        " file that names a list or a capture of the bus",
    ),
]
Libraries = Annotated[
    list[Path] | None,
    typer.Option(
        "--library",
        metavar="DIR",
        help="folder with .toml files of your own parts; may be given several times. The folder library beside a board"
        " is found by itself",
    ),
]
Clocked = Annotated[
    bool,
    typer.Option(
        "--clocked", help="run the registers flip-flop by flip-flop, clocked by their lines; short patterns only"
    ),
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
    edges: Annotated[
        Path | None,
        typer.Option(
            metavar="FILE.vcd",
            help="also write the edges of the register outputs, as a value change dump; its folder is made if it is missing",
        ),
    ] = None,
    clocked: Clocked = False,
    strict: Annotated[bool, typer.Option("--strict", help="count a limit that was not given as broken")] = False,
    time_limit: Annotated[float, typer.Option(metavar="SECONDS", min=1.0, help="for each run of the engine")] = 900.0,
    library: Libraries = None,
) -> None:
    """Simulate a firing pattern on a board and judge it against every limit.

    Exit status: 0 pass, 1 a limit is broken, 2 wrong input, 3 unproven.
    """
    from boardsim.board.reader import read_board
    from boardsim.firing.sources import read_source
    from boardsim.report.folder import make_ready
    from boardsim.report.origin import origin_of, write_origin
    from boardsim.report.wording import plain_path
    from boardsim.scenarios.edges import check_place, write_edges
    from boardsim.scenarios.fire import fire_pattern

    the_board = read_board(board, library or ())
    the_pattern = read_source(pattern, the_board)
    if edges is not None:
        check_place(edges, (board, pattern), the_pattern)
    folder = out or Path("out") / f"{plain_path(the_board.name)}-{plain_path(the_pattern.name)}"
    make_ready(folder, (board, pattern, the_pattern.path))
    origin = origin_of(board, pattern, library or (), (the_pattern.path,))
    if edges is not None:
        _say_new_folder(edges)
        write_edges(the_board, the_pattern, edges)
    with _working(f"{the_board.name}, {the_pattern.name}", time_limit) as (crew, progress):
        detail: Literal["edges", "clocked"] = "clocked" if clocked else "edges"
        result = fire_pattern(the_board, the_pattern, folder, strict, crew, progress, detail=detail)
    write_origin(origin, folder)
    _present(result, folder)


@app.command(epilog="Example: boardsim release netlists/fruit-sorter/board.toml --every-clamp --out out/release")
def release(
    board: BoardFile,
    channel: Annotated[
        int | None,
        typer.Option(metavar="N", help="which channel; one of every build of coil, switch and clamp if not given"),
    ] = None,
    every_clamp: Annotated[
        bool,
        typer.Option(
            "--every-clamp", help="try every kind of clamp on the channel (the board's first if none is given)"
        ),
    ] = False,
    out: Annotated[
        Path | None,
        typer.Option(metavar="DIR", help="folder for the results; out/BOARD-release if not given"),
    ] = None,
    strict: Annotated[bool, typer.Option("--strict", help="count a limit that was not given as broken")] = False,
    time_limit: Annotated[float, typer.Option(metavar="SECONDS", min=1.0, help="for each run of the engine")] = 900.0,
    library: Libraries = None,
) -> None:
    """Turn a channel off: peak at its switch, where the coil's energy goes, when it lets go, how soon it can fire again.

    Verdict and exit status are those of the board's own clamp: 0 pass, 1 a limit is broken, 2 wrong input, 3 unproven.
    Other clamps have a verdict of their own in the table.
    """
    from boardsim.board.reader import read_board
    from boardsim.report.folder import make_ready
    from boardsim.report.wording import plain_path
    from boardsim.scenarios.release import chosen_channels, release_channel

    the_board = read_board(board, library or ())
    chosen_channels(the_board, channel, every_clamp)  # a wrong number must not cost an earlier result
    folder = out or Path("out") / f"{plain_path(the_board.name)}-release"
    make_ready(folder, (board,))
    with _working(f"{the_board.name}, release", time_limit) as (crew, progress):
        result = release_channel(the_board, folder, strict, crew, progress, channel, every_clamp)
    _present(result, folder)


@app.command(epilog="Example: boardsim verify netlists --out out/verify")
def verify(
    paths: Annotated[
        list[Path],
        typer.Argument(metavar="PATH...", help="scenarios.toml files, or folders with such files in or below them"),
    ],
    out: Annotated[Path, typer.Option(metavar="DIR", help="folder for the results")] = Path("out/verify"),
    strict: Annotated[
        bool, typer.Option("--strict", help="count a limit that was not given as broken, in every scenario")
    ] = False,
    only: Annotated[str | None, typer.Option(metavar="TEXT", help="only scenarios whose name contains this")] = None,
    day: Annotated[
        str | None,
        typer.Option("--on", metavar="DAY", help="judge accepted failures as of this day, such as 2027-01-31; today"),
    ] = None,
    cores: Annotated[int, typer.Option(metavar="N", min=0, help="runs of the engine at a time; 0 for all cores")] = 0,
    time_limit: Annotated[float, typer.Option(metavar="SECONDS", min=1.0, help="for each run of the engine")] = 900.0,
    library: Libraries = None,
) -> None:
    """Run every scenario declared beside boards, and say which do not come out as expected.

    Exit status: 0 all as expected, 1 a limit is broken that should not be (or holds that should not), 2 wrong input,
    3 unproven.
    """
    from boardsim.report.collection import print_collection, remove_gone, write_collection
    from boardsim.report.folder import make_ready
    from boardsim.scenarios.chosen import choose
    from boardsim.scenarios.verify import status_of, verify_all

    chosen = choose(paths, only, strict, day, library or ())
    for problem in chosen.problems:
        _say(str(problem))
    if only is None:
        remove_gone(out, chosen.folders)
    make_ready(out, [s.path for s in chosen.scenarios])
    unfinished = f"what {out} holds of finished scenarios is complete"
    with _working(f"{len(chosen.scenarios)} scenarios", time_limit, cores, unfinished) as (crew, progress):
        outcomes = verify_all(chosen, out, crew, progress, _say)
    status = status_of(outcomes, bool(chosen.problems))
    write_collection(outcomes, chosen.problems, status, out)
    with _reader_may_leave():
        print_collection(outcomes, chosen.problems, status, _console(), out)
    raise typer.Exit(status)


@app.command(
    epilog="Example: boardsim deck netlists/fruit-sorter/board.toml netlists/fruit-sorter/patterns/rush.toml --to rush.cir && ngspice -b rush.cir"
)
def deck(
    board: BoardFile,
    pattern: PatternFile,
    to: Annotated[
        Path | None,
        typer.Option(
            metavar="FILE",
            help="where to write it, in a folder that is made if it is missing; standard output if not given",
        ),
    ] = None,
    corner: Annotated[
        int,
        typer.Option(
            metavar="N",
            min=1,
            help="which of the worst corners of the tolerances, counted from 1; the first if not given",
        ),
    ] = 1,
    clocked: Clocked = False,
    library: Libraries = None,
) -> None:
    """Write the assembled ngspice deck of a pattern; plain `ngspice -b` runs it and prints its readings."""
    from boardsim.board.reader import read_board
    from boardsim.firing.sources import read_source
    from boardsim.report.files import write_text
    from boardsim.scenarios.decks import write_deck

    if to is not None and any(to.exists() and to.samefile(one) for one in (board, pattern) if one.exists()):
        raise InputError(f"--to {to}: is one of the files to read; name another")
    the_board = read_board(board, library or ())
    the_pattern = read_source(pattern, the_board)
    names, text = write_deck(the_board, the_pattern, corner, "clocked" if clocked else "edges")
    if text is None:
        listed = "; ".join(f"{i} {name}" for i, name in enumerate(names, 1))
        raise InputError(f"--corner {corner}: this board has {len(names)}: {listed}")
    if to is None:
        sys.stdout.write(text)
    else:
        _say_new_folder(to)
        write_text(to, text)
        typer.echo(f"corner {corner}, {names[corner - 1]}: {to}", err=True)


@app.command(epilog='Example: boardsim volley netlists/fruit-sorter/board.toml --width "10 ms" --at-least 6')
def volley(
    board: BoardFile,
    width: Annotated[
        str | None,
        typer.Option(metavar="TIME", help='of the pulse, such as "10 ms"; until all has settled if not given'),
    ] = None,
    at_least: Annotated[
        int | None,
        typer.Option(metavar="N", min=1, help="how many must pass; the board's most_on if not given"),
    ] = None,
    out: Annotated[
        Path | None,
        typer.Option(metavar="DIR", help="folder for the results; out/BOARD-volley if not given"),
    ] = None,
    strict: Annotated[bool, typer.Option("--strict", help="count a limit that was not given as broken")] = False,
    time_limit: Annotated[float, typer.Option(metavar="SECONDS", min=1.0, help="for each run of the engine")] = 900.0,
    library: Libraries = None,
) -> None:
    """Find how many channels a board can fire at once: one to all together, each number against every limit.

    Exit status: 0 as many pass as are wanted, 1 fewer pass, 2 wrong input, 3 unproven.
    """
    from boardsim.board.reader import read_board
    from boardsim.report.folder import make_ready
    from boardsim.report.wording import plain_path
    from boardsim.scenarios import volley as question

    the_board = read_board(board, library or ())
    the_width = None if width is None else question.read_width(width)
    question.check_wanted(the_board, at_least)
    folder = out or Path("out") / f"{plain_path(the_board.name)}-volley"
    make_ready(folder, (board,))
    with _working(f"{the_board.name}, volley", time_limit) as (crew, progress):
        result = question.volley(the_board, folder, strict, crew, progress, the_width, at_least)
    _present(result, folder)


@app.command(epilog='Example: boardsim stroke netlists/bean-planter/board.toml --channel 0 --width "12 ms"')
def stroke(
    board: BoardFile,
    channel: Annotated[
        int | None,
        typer.Option(metavar="N", help="which channel; one of every build whose coil moves something if not given"),
    ] = None,
    width: Annotated[
        str | None,
        typer.Option(metavar="TIME", help='the pulse that has to work, such as "12 ms"; any if not given'),
    ] = None,
    out: Annotated[
        Path | None,
        typer.Option("--out", "-o", metavar="DIR", help="folder for the results; out/BOARD-stroke if not given"),
    ] = None,
    strict: Annotated[bool, typer.Option("--strict", help="count a limit that was not given as broken")] = False,
    time_limit: Annotated[float, typer.Option(metavar="SECONDS", min=1.0, help="for each run of the engine")] = 900.0,
    library: Libraries = None,
) -> None:
    """Find how wide a pulse must be: travel time, speed and energy of the blow for ever wider pulses, in every corner.

    Exit status: 0 a pulse works in every corner (that of --width, if given), 1 none does, 2 wrong input, 3 unproven.
    """
    from boardsim.board.reader import read_board
    from boardsim.report.folder import make_ready
    from boardsim.report.wording import plain_path
    from boardsim.scenarios import stroke as question
    from boardsim.scenarios.volley import read_width

    the_board = read_board(board, library or ())
    the_width = None if width is None else read_width(width)
    question.chosen_channels(the_board, channel)  # a wrong number must not cost an earlier result
    question.check_width(the_board, the_width)
    folder = out or Path("out") / f"{plain_path(the_board.name)}-stroke"
    make_ready(folder, (board,))
    with _working(f"{the_board.name}, stroke", time_limit) as (crew, progress):
        result = question.stroke(the_board, folder, strict, crew, progress, channel, the_width)
    _present(result, folder)


@app.command(epilog="Example: boardsim chain netlists/fruit-sorter/board.toml")
def chain(
    board: BoardFile,
    out: Annotated[
        Path | None,
        typer.Option(metavar="DIR", help="folder for the results; out/BOARD-chain if not given"),
    ] = None,
    strict: Annotated[bool, typer.Option("--strict", help="count a limit that was not given as broken")] = False,
    library: Libraries = None,
) -> None:
    """Judge the chain of registers: levels, set-up and hold at every link, highest clock, frame time and lateness.

    Exit status: 0 pass, 1 a limit is broken, 2 wrong input.
    """
    from boardsim.board.reader import read_board
    from boardsim.report.folder import make_ready
    from boardsim.report.wording import plain_path
    from boardsim.scenarios.chain import check_chain

    the_board = read_board(board, library or ())
    folder = out or Path("out") / f"{plain_path(the_board.name)}-chain"
    make_ready(folder, (board,))
    _present(check_chain(the_board, strict), folder)


@app.command("power-up", epilog="Example: boardsim power-up netlists/fruit-sorter/board.toml --random 7")
def power_up(
    board: BoardFile,
    seed: Annotated[
        int | None,
        typer.Option(
            "--random",
            metavar="N",
            min=0,
            help="random number for random register contents; always the same if not given",
        ),
    ] = None,
    out: Annotated[
        Path | None,
        typer.Option(metavar="DIR", help="folder for the results; out/BOARD-power-up if not given"),
    ] = None,
    strict: Annotated[bool, typer.Option("--strict", help="count a limit that was not given as broken")] = False,
    time_limit: Annotated[float, typer.Option(metavar="SECONDS", min=1.0, help="for each run of the engine")] = 900.0,
    library: Libraries = None,
) -> None:
    """Switch a board on with any register contents, and reset it in operation: what flows before the first enabled frame?

    Exit status: 0 nothing that counts, 1 a coil is on, 2 wrong input, 3 unproven.
    """
    from boardsim.board.reader import read_board
    from boardsim.report.folder import make_ready
    from boardsim.report.wording import plain_path
    from boardsim.scenarios.power_up import power_up as look

    the_board = read_board(board, library or ())
    folder = out or Path("out") / f"{plain_path(the_board.name)}-power-up"
    make_ready(folder, (board,))
    with _working(f"{the_board.name}, power-up", time_limit) as (crew, progress):
        result = look(the_board, folder, strict, crew, progress, seed)
    _present(result, folder)


@app.command(
    epilog='Example: boardsim overlay out/rush scope.csv --channel 7 --current "CH2" --current-scale "100 mV/A" --fit'
)
def overlay(
    result: Annotated[Path, typer.Argument(metavar="RESULT", help="folder that boardsim fire wrote its results into")],
    trace: Annotated[Path, typer.Argument(metavar="TRACE.csv", help="trace of an oscilloscope, exported as CSV")],
    channel: Annotated[
        int | None, typer.Option(metavar="N", help="which channel it shows; the one that was fired if it was only one")
    ] = None,
    pulse: Annotated[int, typer.Option(metavar="N", min=1, help="which of the channel's pulses it shows")] = 1,
    time: Annotated[str, typer.Option(metavar="COLUMN", help="title or number of the column of times")] = "time",
    current: Annotated[
        str | None, typer.Option(metavar="COLUMN", help="title or number of the column of the coil's current")
    ] = None,
    voltage: Annotated[
        str | None, typer.Option(metavar="COLUMN", help="title or number of the column of the voltage across the coil")
    ] = None,
    current_scale: Annotated[
        str | None,
        typer.Option(metavar="SCALE", help='of the current probe or shunt, such as "100 mV/A" or "0.1 ohm"'),
    ] = None,
    voltage_scale: Annotated[
        float, typer.Option(metavar="FACTOR", help="what the voltage is multiplied by, such as 10 for a 10:1 probe")
    ] = 1.0,
    at: Annotated[
        str | None,
        typer.Option(
            metavar="TIME", help="when the output turns on, in the trace's time; found in the trace if not given"
        ),
    ] = None,
    corner: Annotated[
        int | None,
        typer.Option(metavar="N", min=1, help="which of the worst corners, counted from 1; nominal parts if not given"),
    ] = None,
    within: Annotated[
        float | None, typer.Option(metavar="PERCENT", min=0.0, help="largest difference allowed, of the computed peak")
    ] = None,
    fit: Annotated[
        bool, typer.Option("--fit", help="adjust the coil's resistance, inductances and core loss to the trace")
    ] = False,
    out: Annotated[
        Path | None,
        typer.Option(metavar="DIR", help="folder for the results; overlay-TRACE in RESULT if not given"),
    ] = None,
    time_limit: Annotated[float, typer.Option(metavar="SECONDS", min=1.0, help="for each run of the engine")] = 900.0,
) -> None:
    """Lay a scope trace over the computed pulse of a channel, and fit the coil to it.

    Exit status: 0 within what is allowed, or nothing was asked, 1 not within, 2 wrong input, 3 unproven.
    """
    from boardsim.board.reader import read_board
    from boardsim.firing.sources import read_source
    from boardsim.report.folder import make_ready
    from boardsim.report.origin import read_origin
    from boardsim.report.overlay_report import print_overlay, write_overlay
    from boardsim.report.wording import plain_path
    from boardsim.scenarios import overlay as question
    from boardsim.verdict.findings import exit_status
    from boardsim.verdict.trace import Columns, read_trace

    origin = read_origin(result)
    the_board = read_board(origin.board, origin.libraries)
    the_pattern = read_source(origin.pattern, the_board)
    asked = question.ask(the_board, the_pattern, channel, pulse, corner, at, within, fit)
    the_trace = read_trace(trace, Columns(time, current, voltage, current_scale, voltage_scale))
    folder = out or result / f"overlay-{plain_path(trace.stem)}"
    make_ready(folder, (origin.board, origin.pattern, the_pattern.path, trace, result / "fired.json"))
    with _working(f"{the_board.name}, {trace.name}", time_limit) as (crew, progress):
        found = question.overlay(the_board, the_pattern, the_trace, asked, folder, crew, progress, origin.changes())
    picture = write_overlay(found, folder)
    with _reader_may_leave():
        print_overlay(found, _console(), picture, folder)
    raise typer.Exit(0 if found.verdict is None else exit_status(found.verdict))


@app.command(epilog="Example: boardsim schema > board.schema.json")
def schema(
    what: Annotated[
        str, typer.Argument(metavar="[board|pattern|capture|events|scenarios]", help="which kind of file")
    ] = "board",
) -> None:
    """Print the JSON Schema of board, pattern, capture, event or scenario files, for editors that complete and check TOML."""
    import json

    from boardsim.scenarios.starter import json_schema

    found = json_schema(what)
    if found is None:
        raise InputError(f'"{what}" is not a kind of file; say board, pattern, capture, events or scenarios')
    typer.echo(json.dumps(found, indent=2, ensure_ascii=False))


@app.command(
    epilog="Example: boardsim begin my-board && boardsim fire my-board/board.toml my-board/patterns/first.toml"
)
def begin(
    folder: Annotated[Path, typer.Argument(metavar="FOLDER", help="new folder for the board")],
) -> None:
    """Write a commented starter board, a first pattern and its scenarios into a new folder."""
    from boardsim.scenarios.starter import write_starter

    written = write_starter(folder)
    for path in written:
        typer.echo(path)
    typer.echo(f"\nnow try: boardsim fire {written[0]} {written[1]}\nand then: boardsim verify {folder}")


parts_app = typer.Typer(
    name="parts",
    no_args_is_help=True,
    help="The parts that boards may name: what there is, where each number is from, how well each model fits its datasheet.",
)
app.add_typer(parts_app)

PartName = Annotated[str, typer.Argument(metavar="NAME", help="of the part, such as n-logic-60v")]


@parts_app.command("list", epilog='Example: boardsim parts list --kind n-mosfet --voltage "40 V"')
def parts_list(
    kind: Annotated[str | None, typer.Option(metavar="KIND", help="only this kind, such as n-mosfet")] = None,
    voltage: Annotated[
        str | None, typer.Option(metavar="VOLTAGE", help='rated for at least this, such as "40 V"')
    ] = None,
    current: Annotated[
        str | None, typer.Option(metavar="CURRENT", help='rated for at least this, such as "2 A"')
    ] = None,
    library: Libraries = None,
) -> None:
    """List the parts of the library by kind, with their main ratings and where these are from."""
    from boardsim.report.parts_report import print_parts
    from boardsim.scenarios.parts import list_parts

    found = list_parts(library or (), kind, voltage, current)
    with _reader_may_leave():
        print_parts([(p.kind, p.name, p.ratings, p.source) for p in found], _console())


@parts_app.command("show", epilog="Example: boardsim parts show AO3400A")
def parts_show(name: PartName, library: Libraries = None) -> None:
    """Print every number of a part with its unit, its band, and its source."""
    from boardsim.report.parts_report import print_part
    from boardsim.scenarios.parts import show_part

    part, details = show_part(name, library or ())
    with _reader_may_leave():
        print_part(name, part.kind, [(d.field, d.value) for d in details], _console())


@parts_app.command("copy", epilog="Example: boardsim parts copy n-logic-60v --to my-board/library/my-switch.toml")
def parts_copy(
    name: PartName,
    to: Annotated[
        Path | None, typer.Option(metavar="FILE", help="new file to write it to; standard output if not given")
    ] = None,
    library: Libraries = None,
) -> None:
    """Write a part's record as a starting point for one of your own, for a board file or for your library."""
    from boardsim.scenarios.parts import copy_part, write_copy

    text = copy_part(name, library or ())
    if to is None:
        sys.stdout.write(text)
    else:
        write_copy(text, to)
        typer.echo(f"{name}: {to}", err=True)


@parts_app.command("prove", epilog="Example: boardsim parts prove AO3400A --json proofs.json")
def parts_prove(
    names: Annotated[list[str] | None, typer.Argument(metavar="NAME...", help="parts to prove")] = None,
    everything: Annotated[bool, typer.Option("--all", help="every part of the library")] = False,
    to_json: Annotated[
        Path | None, typer.Option("--json", metavar="FILE", help="write the numbers as JSON as well")
    ] = None,
    library: Libraries = None,
    cores: Annotated[int, typer.Option(metavar="N", min=0, help="runs of the engine at a time; 0 for all cores")] = 0,
    time_limit: Annotated[float, typer.Option(metavar="SECONDS", min=1.0, help="for each run of the engine")] = 900.0,
) -> None:
    """Run the test circuits of parts' datasheets on their models, and compare with what is printed.

    Exit status: 0 all within their tolerance and the printed band, 1 one is not, 2 wrong input, 3 one is unproven.
    """
    from boardsim.report.json_report import write_json
    from boardsim.report.parts_report import print_proofs, proofs_to_dict
    from boardsim.scenarios.part_proofs import parts_to_prove, prove_parts
    from boardsim.verdict.proving import status_of_proofs

    chosen = parts_to_prove(names or (), everything, library or ())
    with _working("proofs", time_limit, cores) as (crew, progress):
        proven = prove_parts(chosen, Path("out") / "parts", crew, progress)
    status = status_of_proofs(proven)
    if to_json is not None:
        write_json(to_json, proofs_to_dict(proven, status))
    with _reader_may_leave():
        print_proofs(proven, _console())
    raise typer.Exit(status)


@contextlib.contextmanager
def _working(
    what: str, time_limit: float, cores: int = 0, unfinished: str = "no result was written"
) -> Iterator[tuple[Crew, Callable[[float], None]]]:
    """Those who run the engine, and a progress bar; an interrupt ends every run and leaves no result."""
    from boardsim.scenarios.crew import Crew

    try:
        with Crew(cores, time_limit) as crew, _progress(what) as progress:
            yield crew, progress
    except KeyboardInterrupt:
        typer.echo(f"boardsim: stopped; {unfinished}", err=True)
        raise typer.Exit(EXIT_STOPPED) from None


@contextlib.contextmanager
def _progress(what: str) -> Iterator[Callable[[float], None]]:
    """A progress bar on standard error; nothing where that is no terminal."""
    from rich.console import Console
    from rich.progress import BarColumn, Progress, TextColumn, TimeElapsedColumn

    console = Console(stderr=True)
    shown = sys.stderr.isatty()
    columns: tuple[Any, ...] = (
        TextColumn("{task.description}"),
        BarColumn(),
        TextColumn("{task.percentage:>3.0f} %"),
        TimeElapsedColumn(),
    )
    with Progress(*columns, console=console, transient=True, disable=not shown) as bar:
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

    class Reporting(Console):
        def on_broken_pipe(self) -> None:
            """Leave it to the caller: the library would end the command with a status of its own."""
            raise BrokenPipeError

    if sys.stdout.isatty():
        return Reporting(soft_wrap=False)
    # Not the library's own judgement, which colours files where FORCE_COLOR is set, as many pipelines do.
    return Reporting(width=100, force_terminal=False, color_system=None)


@contextlib.contextmanager
def _reader_may_leave() -> Iterator[None]:
    """Whoever reads the output may stop, as `head` does: the files are written and the verdict stands."""
    try:
        yield
        sys.stdout.flush()
    except OSError:  # a pipe that nobody reads, or a full disk behind the output
        with contextlib.suppress(OSError, ValueError):
            os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())


def _say_new_folder(path: Path) -> None:
    """Say that a file's folder is made: a slip of the pen must not leave folders about unseen."""
    if not path.parent.exists():
        _say(f"{path.parent}: did not exist; made for {path.name}")


def _say(line: str) -> None:
    """A line of progress; whether anybody reads it must not matter."""
    with contextlib.suppress(OSError):
        typer.echo(line, err=True)


def _stop(*_: object) -> None:
    """Be ended as by an interrupt: engines are stopped and scratch folders removed."""
    for one in (signal.SIGTERM, signal.SIGINT):
        signal.signal(one, signal.SIG_IGN)  # a second one must not interrupt the tidying up
    raise KeyboardInterrupt


def main() -> None:
    """Run a command; an error that a user can cause ends in its message and its exit status, never in a traceback."""
    for one in (signal.SIGTERM, signal.SIGINT):
        signal.signal(one, _stop)
    # A stream that the caller closed is None; what is printed goes nowhere then.
    for name in ("stdout", "stderr"):
        if getattr(sys, name) is None:
            setattr(sys, name, os.fdopen(os.open(os.devnull, os.O_WRONLY), "w", encoding="utf-8"))
    try:
        app()
    except BoardsimError as err:
        located = isinstance(err, InputError) and err.problems  # begins with file and line, where editors look for them
        typer.echo(str(err) if located else f"boardsim: {err}", err=True)
        sys.exit(err.exit_status)


if __name__ == "__main__":
    main()
