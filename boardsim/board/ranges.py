"""Channel and output ranges: "0-23", "0,2,8-15", "23-0"."""

from __future__ import annotations

import re

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
    numbers: list[int] = []
    for piece in text.split(","):
        match = re.fullmatch(r"\s*(\d{1,4})\s*(?:-\s*(\d{1,4})\s*)?", piece)
        if not match:
            raise QuantityError(f"{text!r} is not a range of channels; write it such as '0-23' or '0,2,8-15'")
        first, last = int(match[1]), int(match[2] or match[1])
        step = 1 if last >= first else -1
        numbers.extend(range(first, last + step, step))
    if max(numbers) > HIGHEST:
        raise QuantityError(f"{text!r} reaches beyond {HIGHEST}, more than any chain has")
    twice = sorted({n for n in numbers if numbers.count(n) > 1})
    if twice:
        raise QuantityError(f"{text!r} names {twice[0]} twice")
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
