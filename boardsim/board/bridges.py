"""Full bridges in a board file: channel numbers that fire the coils of others the other way round."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace
from typing import TYPE_CHECKING, Any

from boardsim.board.ranges import read_range
from boardsim.board.schema import BoardFile, ChannelRange
from boardsim.board.toml_file import TomlFile
from boardsim.errors import Problem, QuantityError
from boardsim.parts.record import named_like

if TYPE_CHECKING:
    from boardsim.board.reader import Board, Channel

_OF_REVERSE = ("reverse_outputs", "reverse_bits", "reverse_label")


def backwards(text: str, group: ChannelRange) -> ChannelRange:
    """What a range of channels, named by `text`, says of its reverse channels, in the keys of a range of its own.

    They are counted in their labels as the channels are whose coils they fire.
    """
    return group.model_copy(
        update={
            "outputs": group.reverse_outputs,
            "bits": group.reverse_bits,
            "label": group.reverse_label or f"{group.label} back",
            "numbers": group.numbers or text,
        }
    )


def forwards(board: Board) -> tuple[Channel, ...]:
    """One channel for every coil of a board: of a full bridge the one that drives it forwards."""
    return tuple(c for c in board.channels if c.forwards)


def with_opposites(channels: list[Channel], board: BoardFile) -> list[Channel]:
    """The channels of a board, each with the one that fires the same coil the other way; ranges with mistakes are left out."""
    opposite: dict[int, int] = {}
    reversed_: set[int] = set()
    for text, group in board.channels.items():
        if group.reverse is None:
            continue
        try:
            forth, back = read_range(text), read_range(group.reverse)
        except QuantityError:
            continue  # complained of where it is laid out
        for a, b in zip(forth, back, strict=False):
            opposite[a], opposite[b] = b, a
            reversed_.add(b)
    return [
        replace(c, opposite=opposite[c.number], forwards=c.number not in reversed_) if c.number in opposite else c
        for c in channels
    ]


def refuse_wrong_bridges(board: BoardFile, file: TomlFile) -> Iterator[Problem]:
    """Reverse channels without a full bridge and the other way round, as many as do not fit, and clamps that cannot be."""
    for text, group in board.channels.items():
        switch: Any = group.switch  # a part of role "switch"
        clamp: Any = group.clamp
        given = [key for key in _OF_REVERSE if getattr(group, key) is not None]
        if group.reverse is None:
            if switch.both_ways:
                said = f'{named_like(switch.kind)} drives its coil both ways; say which further channel numbers fire backwards: reverse = "8-15"'
                yield file.problem_at(("channels", text), said)
            for key in given:
                yield file.problem_at(
                    ("channels", text, key), f"{key} says something of reverse channels; give reverse too"
                )
            continue
        if group.matrix is not None:
            said = "a matrix drives its coils one way; leave reverse out"
            yield file.problem_at(("channels", text, "reverse"), said)
            continue
        if not switch.both_ways:
            said = f"reverse needs a switch that drives its coil both ways (a full-bridge); this is {named_like(switch.kind)}"
            yield file.problem_at(("channels", text, "reverse"), said)
            continue
        if clamp.kind != "none":
            said = (
                f"{named_like(switch.kind)} takes its coil's current in either direction through its transistors and body diodes, "
                'and no clamp goes beside it; write clamp = { kind = "none" }'
            )
            yield file.problem_at(("channels", text, "clamp"), said)
        try:
            forth, back = read_range(text), read_range(group.reverse)
        except QuantityError:
            continue
        if len(forth) != len(back):
            said = f"names {len(back)} where the range has {len(forth)} channels; every coil needs one of each"
            yield file.problem_at(("channels", text, "reverse"), said)
