"""One engine for all reference tests: its worker takes longer to start than most of their runs."""

from __future__ import annotations

from collections.abc import Iterator

import pytest

from boardsim.engine.run import Engine


@pytest.fixture(scope="session")
def engine(tmp_path_factory: pytest.TempPathFactory) -> Iterator[Engine]:
    with Engine(tmp_path_factory.mktemp("engine") / "kept", time_limit=60.0) as one:
        yield one
