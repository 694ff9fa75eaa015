"""Whether the switches of a board and the registers of its chain go together."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Any

from boardsim.board.schema import BoardFile
from boardsim.board.toml_file import TomlFile
from boardsim.errors import Problem
from boardsim.parts.record import named_like


def refuse_wrong_outputs(board: BoardFile, file: TomlFile) -> Iterator[Problem]:
    """Switches that are outputs of other registers than the chain's, and such that an open-drain output cannot drive."""
    register = board.chain.register_
    name = register.title or "the chain's register"
    for text, group in board.channels.items():
        switch: Any = group.switch  # a part of role "switch"
        if switch.in_the_chain and switch.part != register:
            other = switch.part.title or switch.kind
            yield file.problem(
                ("channels", text, "switch"),
                f"the switch is an output of {other}, and the registers of [chain] are {name}; make both the same part",
            )
        elif not switch.in_the_chain and register.open_drain:
            yield file.problem(
                ("channels", text, "switch"),
                f"the outputs of {name} are open-drain switches and cannot drive {named_like(switch.kind)}; write "
                f'switch = {{ part = "{name}" }}, or take registers with logic outputs',
            )
