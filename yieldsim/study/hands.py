"""Processes of this machine that share the work of one run."""

from __future__ import annotations

import signal
from collections.abc import Callable, Iterable, Iterator
from concurrent.futures import FIRST_COMPLETED, Future, ProcessPoolExecutor, wait
from concurrent.futures.process import BrokenProcessPool
from multiprocessing import active_children, get_context
from types import TracebackType
from typing import Any, Generic, TypeVar

from yieldsim.errors import PlaceError
from yieldsim.study import ready

T = TypeVar("T")
_AHEAD = 4  # calls waiting for each process: it never idles, and no more is held than that


class Hands:
    """A number of processes, each started when there is work for it; the first at once, to compile what is not yet."""

    def __init__(self, count: int) -> None:
        """Take how many there shall be, from 1."""
        self.count, self._others = count, set(active_children())
        # Fresh interpreters: a fork would copy the locks of threads that numpy and HDF5 may hold.
        self._pool = ProcessPoolExecutor(count, mp_context=get_context("spawn"), initializer=_end_when_interrupted)
        self._begun: list[Shared[None]] = [self.share(ready.light, [()])]

    def __enter__(self) -> Hands:
        """Return itself."""
        return self

    def __exit__(self, kind: type[BaseException] | None, error: object, trace: TracebackType | None) -> None:
        """End the processes at once: what they gave was taken, and their files are whole or not there."""
        for process in set(active_children()) - self._others:
            process.terminate()
        self._pool.shutdown(cancel_futures=True)

    def begin(self, function: Callable[..., None], *arguments: object) -> None:
        """Begin function(*arguments), to be waited for with `settle`."""
        self._begun.append(self.share(function, [arguments]))

    def settle(self) -> None:
        """Wait for all that was begun."""
        for each in self._begun:
            list(each)
        self._begun = []

    def share(self, function: Callable[..., T], calls: Iterable[tuple[Any, ...]]) -> Shared[T]:
        """Begin function(*call) for each call and return an iterator over what they return, as they finish.

        Parameters
        ----------
        function : of a module's top level
        calls : tuples of arguments, all of which can be pickled; taken as processes become free

        Raises
        ------
        PlaceError
            From the iterator, when a process was ended from outside.
        """
        return Shared(self._pool, _AHEAD * self.count, function, calls)


class Shared(Generic[T]):
    """What calls return, as they finish."""

    def __init__(
        self, pool: ProcessPoolExecutor, most: int, function: Callable[..., T], calls: Iterable[tuple[Any, ...]]
    ) -> None:
        """Begin the first calls."""
        self._pool, self._most, self._function, self._left = pool, most, function, iter(calls)
        self._running: set[Future[T]] = set()
        self._begin()

    def _begin(self) -> None:
        for call in self._left:
            self._running.add(self._pool.submit(self._function, *call))
            if len(self._running) >= self._most:
                break

    def __iter__(self) -> Iterator[T]:
        """Yield what each call returns; raise what it raises."""
        try:
            while self._running:
                done, self._running = wait(self._running, return_when=FIRST_COMPLETED)
                for future in done:
                    yield future.result()
                self._begin()
        except BrokenProcessPool:
            raise PlaceError(
                "a process of this run was ended from outside, perhaps for want of memory; "
                "what is finished is kept: run again to go on, with fewer --workers if memory is short"
            ) from None


def _end_when_interrupted() -> None:
    """Let Ctrl-C end a process at once, without a traceback: files are whole or not there, and the parent tells."""
    signal.signal(signal.SIGINT, signal.SIG_DFL)
