"""Spreads the tasks of a study over cores and machines; three runners behind one function.

``threads`` in this process, for the compiled engine, which releases the lock; ``processes`` on this machine,
for the reference engine, which holds it; ``dask`` on a cluster of Dask workers. All give the same bits: a
task is a function of its own numbers alone. A worker that dies costs time, no task.
"""

from __future__ import annotations

import logging
import os
import pickle
import signal
from collections.abc import Callable, Iterable, Iterator
from concurrent.futures import FIRST_COMPLETED, Executor, Future, ProcessPoolExecutor, ThreadPoolExecutor, wait
from concurrent.futures.process import BrokenProcessPool
from contextlib import contextmanager
from dataclasses import dataclass
from functools import lru_cache
from multiprocessing import get_context
from pathlib import Path
from typing import Any, Final, Literal, Protocol, TypeVar, cast

from fuelair.errors import InputError, MissingExtraError, Problem, WorkersError
from fuelair.version import __version__

RunnerName = Literal["threads", "processes", "dask"]
RUNNERS: Final[tuple[RunnerName, ...]] = ("threads", "processes", "dask")
AHEAD: Final = 3
"""Tasks in flight for each worker."""
MOST_DEATHS: Final = 5
"""Times in a row that workers may die before a single task is done."""
CONNECT_SECONDS: Final = 10

Shared = TypeVar("Shared")
Task = TypeVar("Task")
Result = TypeVar("Result")


@dataclass(frozen=True, slots=True)
class Certificates:
    """Files of a TLS connection to a scheduler: authority, own certificate, own key (PEM)."""

    authority: Path
    certificate: Path
    key: Path


@dataclass(frozen=True, slots=True)
class Runner:
    """Where tasks run.

    Attributes
    ----------
    name : one of :data:`RUNNERS`.
    workers : how many; default the cores this process may use. A scheduler has its own.
    scheduler : address of a Dask scheduler, e.g. ``tcp://127.0.0.1:8786``; None: a cluster on this machine.
    certificates : for a scheduler that talks TLS (``tls://``).
    """

    name: RunnerName = "threads"
    workers: int | None = None
    scheduler: str | None = None
    certificates: Certificates | None = None

    def __post_init__(self) -> None:
        if self.name not in RUNNERS:
            raise InputError(Problem("no such runner", "--runner", self.name, ", ".join(RUNNERS)))
        if self.workers is not None and self.workers < 1:
            raise InputError(Problem("needs a worker at least", "--workers", self.workers, "1 or more"))
        for option, given in (("--scheduler", self.scheduler), ("--tls-ca", self.certificates)):
            if given is not None and self.name != "dask":
                raise InputError(Problem("goes with another runner", option, str(given), hint="--runner dask"))
        if self.scheduler is not None and self.scheduler.startswith("tls://") and self.certificates is None:
            hint = "--tls-ca, --tls-cert and --tls-key"
            raise InputError(Problem("needs certificates", "--scheduler", self.scheduler, hint=hint))

    @property
    def size(self) -> int:
        """Number of workers on this machine."""
        return self.workers or cores()


def cores() -> int:
    """Cores that this process may use."""
    try:
        return len(os.sched_getaffinity(0))
    except AttributeError:  # not on every system
        return os.cpu_count() or 1


def spread(
    function: Callable[[Shared, Task], Result],
    shared: Shared,
    tasks: Iterable[Task],
    runner: Runner | None = None,
    *,
    ordered: bool = True,
) -> Iterator[tuple[int, Result]]:
    """Do ``function(shared, task)`` for every task.

    Parameters
    ----------
    function : of the top level of a module, so that workers find it.
    shared : what all tasks need; sent once to a worker.
    tasks : taken as they are needed, a few ahead of the workers.
    ordered : whether results come in the order of the tasks, or as they are done.

    Yields
    ------
    Number of the task and its result.

    Raises
    ------
    WorkersError : workers keep dying, or cannot be reached; whatever the function raises.
    """
    runner = runner or Runner()
    numbered = enumerate(tasks)
    if runner.name == "threads":
        with _pool(ThreadPoolExecutor(runner.size)) as pool:
            local = _Local(lambda task: pool.submit(function, shared, task))
            yield from _pump(local, numbered, runner.size * AHEAD, ordered)
        return
    frozen = (__version__, pickle.dumps((function, shared)))
    if runner.name == "processes":
        with _Processes(runner.size, frozen) as processes:
            yield from _pump(processes, numbered, runner.size * AHEAD, ordered)
        return
    with _Dask(runner, frozen) as cluster:
        yield from _pump(cluster, numbered, cluster.size * AHEAD, ordered)


class _Backend(Protocol):
    """What takes tasks and gives them back done."""

    def submit(self, number: int, task: Any) -> None: ...

    def next_done(self) -> tuple[int, Any]: ...


def _pump(backend: _Backend, tasks: Iterator[tuple[int, Any]], most: int, ordered: bool) -> Iterator[tuple[int, Any]]:
    """Keep a bounded number of tasks in flight, and of results waiting for their turn."""
    waiting: dict[int, Any] = {}
    running, turn, more = 0, 0, True
    while more or running or waiting:
        while more and running + len(waiting) < most:
            entry = next(tasks, None)
            if entry is None:
                more = False
                break
            backend.submit(*entry)
            running += 1
        if running and not (ordered and turn in waiting):
            number, result = backend.next_done()
            running -= 1
            if not ordered:
                yield number, result
                continue
            waiting[number] = result
        while ordered and turn in waiting:
            yield turn, waiting.pop(turn)
            turn += 1
