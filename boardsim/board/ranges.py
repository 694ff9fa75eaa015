"""Channel and output ranges: "0-23", "0,2,8-15", "23-0"."""

from __future__ import annotations

import re
from collections.abc import Sequence

from boardsim.errors import QuantityError

HIGHEST = 4095


def read_range(text: str) -> tuple[int, ...]:
    """The numbers that a range names, in the order written.

    Raises
    ------
    QuantityError
        If it is no range, or names a number twice.

    Examples
    --------
    >>> read_range("0-2, 7")
    (0, 1, 2, 7)
    >>> read_range("2-0")
    (2, 1, 0)
    """
    said = repr(text) if len(text) <= 60 else f"{text[:60]!r}..."
    numbers: list[int] = []
    seen: set[int] = set()
    for piece in text.split(","):
        match = re.fullmatch(r"\s*([0-9]{1,4})\s*(?:-\s*([0-9]{1,4})\s*)?", piece)
        if not match:
            raise QuantityError(f"{said} is not a range of numbers; write it such as '0-23' or '0,2,8-15'")
        first, last = int(match[1]), int(match[2] or match[1])
        if max(first, last) > HIGHEST:
            raise QuantityError(f"{said} reaches beyond {HIGHEST}, more than any chain has")
        step = 1 if last >= first else -1
        for n in range(first, last + step, step):
            if n in seen:
                raise QuantityError(f"{said} names {n} twice")
            seen.add(n)
            numbers.append(n)
    return tuple(numbers)


def write_range(numbers: tuple[int, ...] | list[int]) -> str:
    """The shortest text for a set of numbers.

    Examples
    --------
    >>> write_range([3, 1, 2, 7])
    '1-3, 7'
    """
    runs: list[list[int]] = []
    for n in sorted(set(numbers)):
        if runs and n == runs[-1][1] + 1:
            runs[-1][1] = n
        else:
            runs.append([n, n])
    return ", ".join(str(a) if a == b else f"{a}-{b}" if b > a + 1 else f"{a}, {b}" for a, b in runs)


def write_labels(labels: Sequence[str]) -> str:
    """Several channels by the board's own names, short where they differ in a number only.

    Examples
    --------
    >>> write_labels(["lane 0", "lane 1", "lane 2", "lane 7"])
    'lanes 0-2, 7'
    >>> write_labels(["sorting gate", "lane 1"])
    'sorting gate, lane 1'
    """
    if len(labels) == 1:
        return labels[0]
    split = [re.fullmatch(r"(.*\D)(\d+)", label) for label in labels]
    stems = {match[1] for match in split if match}
    if all(split) and len(stems) == 1 and (stem := stems.pop().strip()):
        return f"{stem}s {write_range([int(match[2]) for match in split if match])}"
    return ", ".join(labels[:8]) + (f" and {len(labels) - 8} more" if len(labels) > 8 else "")
