"""Batches: run side by side, taken in order, as many as an error asks for."""

from __future__ import annotations

import os
from collections import deque
from collections.abc import Callable, Iterable, Iterator
from itertools import islice
from math import ceil
from typing import Any, Protocol


class Executor(Protocol):
    """Anything with `submit`: a pool of threads or processes, a cluster's client."""

    def submit(self, fn: Callable[..., Any], /, *args: Any) -> Any:
        """Start a call; return something with `result()`."""


def in_order(
    function: Callable[..., Any], tasks: Iterable[tuple[Any, ...]], executor: Executor | None, ahead: int | None = None
) -> Iterator[Any]:
    """Run a function over tasks and yield the results in the order given.

    Parameters
    ----------
    function : callable
        At the top of a module, so that it can be sent to another process.
    tasks : iterable of tuple
        Arguments of each call.
    executor : Executor or None
        None runs in this thread.
    ahead : int, optional
        Calls under way at once; default four a core.

    Yields
    ------
    object
        Results; what is left is cancelled when the generator is closed.
    """
    tasks = iter(tasks)
    if executor is None:
        for task in tasks:
            yield function(*task)
        return
    pending = deque(executor.submit(function, *task) for task in islice(tasks, ahead or 4 * (os.cpu_count() or 4)))
    try:
        while pending:
            result = pending.popleft().result()
            pending.extend(executor.submit(function, *task) for task in islice(tasks, 1))
            yield result
    finally:
        for future in pending:
            future.cancel()


def batches_needed(done: int, error: float, target: float, most: int) -> int:
    """Return how many batches a target asks for, given the error of those done.

    Errors fall with the root of the number of batches; at most doubled at once, since the guess is a rough one.
    """
    if error <= target:
        return done
    wanted = min(ceil(done * min(error / target, 1e3) ** 2 * 1.05), 2 * done)
    return min(max(wanted, done + 2), most)
