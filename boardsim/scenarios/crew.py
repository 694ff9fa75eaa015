"""The threads that run corners, shared by everything that runs at one time."""

from __future__ import annotations

import os
import threading
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass, field
from types import TracebackType

from boardsim.engine.run import DEFAULT_TIME_LIMIT


@dataclass
class Crew:
    """As many runs of the engine at a time as there are cores.

    Leaving the `with` statement ends every run that is still under way: after an error nobody waits for them.

    Attributes
    ----------
    workers : int
        Runs at a time; the number of cores that this process may use if absent.
    time_limit : float
        Per run. [s]
    cancel : threading.Event
        Set to end all runs.
    """

    workers: int = 0
    time_limit: float = DEFAULT_TIME_LIMIT
    cancel: threading.Event = field(default_factory=threading.Event)
    _pool: ThreadPoolExecutor | None = None

    @property
    def size(self) -> int:
        """Runs at a time."""
        return self.workers or len(os.sched_getaffinity(0))

    def __enter__(self) -> Crew:
        self._pool = ThreadPoolExecutor(max_workers=self.size)
        return self

    def __exit__(self, kind: type[BaseException] | None, error: BaseException | None, _: TracebackType | None) -> None:
        self.cancel.set()
        if self._pool is not None:
            self._pool.shutdown(wait=True, cancel_futures=True)
            self._pool = None

    @property
    def pool(self) -> ThreadPoolExecutor:
        """Where runs are handed in.

        Raises
        ------
        RuntimeError
            Outside a `with` statement.
        """
        if self._pool is None:
            raise RuntimeError("a Crew works inside a with statement only")
        return self._pool
