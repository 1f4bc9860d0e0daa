"""Spreads the tasks of a study over cores and machines; three runners behind one function.

``threads`` in this process, for the compiled engine, which releases the lock; ``processes`` on this machine,
for the reference engine, which holds it; ``dask`` on a cluster of Dask workers. All give the same bits: a
task is a function of its own numbers alone. A worker that dies costs time, no task.
"""

from __future__ import annotations

import os
import pickle
import signal
import threading
from abc import ABC, abstractmethod
from collections.abc import Callable, Generator, Iterable, Iterator
from concurrent.futures import FIRST_COMPLETED, Future, ProcessPoolExecutor, ThreadPoolExecutor, wait
from concurrent.futures.process import BrokenProcessPool
from dataclasses import dataclass
from functools import lru_cache
from multiprocessing import get_context, parent_process
from pathlib import Path
from typing import Any, Final, Literal, Self, TypeVar

from fuelair.errors import InputError, Problem, WorkersError
from fuelair.version import __version__

RunnerName = Literal["threads", "processes", "dask"]
RUNNERS: Final[tuple[RunnerName, ...]] = ("threads", "processes", "dask")
AHEAD: Final = 3
"""Tasks in flight for each worker."""
MOST_DEATHS: Final = 5
"""Times in a row that workers may die before a single task is done."""

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
) -> Generator[tuple[int, Result], None, None]:
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
    with _backend(function, shared, runner) as backend:
        yield from _pump(backend, enumerate(tasks), ordered)


class Backend(ABC):
    """Takes tasks and gives them back done, in any order."""

    @abstractmethod
    def submit(self, number: int, task: Any) -> None:
        """Begin a task, or queue it."""

    @abstractmethod
    def next_done(self) -> tuple[int, Any]:
        """Wait for any of the tasks."""

    @abstractmethod
    def most(self) -> int:
        """Tasks to keep in flight."""

    @abstractmethod
    def close(self) -> None:
        """End the workers; queued tasks are dropped."""

    def __enter__(self) -> Self:
        return self

    def __exit__(self, *_: object) -> None:
        self.close()


def _backend(function: Callable[[Any, Any], Any], shared: object, runner: Runner) -> Backend:
    if runner.name == "threads":
        return _Threads(runner.size, function, shared)
    frozen = (__version__, pickle.dumps((function, shared)))
    if runner.name == "processes":
        return _Processes(runner.size, frozen)
    from fuelair.study.cluster import Dask

    return Dask(runner, frozen)


def _pump(backend: Backend, tasks: Iterator[tuple[int, Any]], ordered: bool) -> Iterator[tuple[int, Any]]:
    """Keep a bounded number of tasks in flight, and of results waiting for their turn."""
    waiting: dict[int, Any] = {}
    running, turn, more = 0, 0, True
    while more or running:
        while more and running + len(waiting) < backend.most():
            entry = next(tasks, None)
            if entry is None:
                more = False
                break
            backend.submit(*entry)
            running += 1
        if not running:
            continue
        number, result = backend.next_done()
        running -= 1
        if not ordered:
            yield number, result
            continue
        waiting[number] = result
        while turn in waiting:
            yield turn, waiting.pop(turn)
            turn += 1


Frozen = tuple[str, bytes]
"""Release, and the pickled function with what its tasks share."""


def work(frozen: Frozen, task: Any) -> Any:
    """What a worker of another process does."""
    release, data = frozen
    if release != __version__:
        raise WorkersError(f"a worker runs fuelair {__version__}, the study fuelair {release}: install one release everywhere")
    function, shared = _thawed(data)
    return function(shared, task)


@lru_cache(maxsize=4)
def _thawed(data: bytes) -> Any:
    return pickle.loads(data)


class _Threads(Backend):
    def __init__(self, size: int, function: Callable[[Any, Any], Any], shared: object) -> None:
        self.size, self.function, self.shared = size, function, shared
        self.pool = ThreadPoolExecutor(size)
        self.running: dict[Future[Any], int] = {}

    def submit(self, number: int, task: Any) -> None:
        self.running[self.pool.submit(self.function, self.shared, task)] = number

    def next_done(self) -> tuple[int, Any]:
        done = next(iter(wait(self.running, return_when=FIRST_COMPLETED).done))
        return self.running.pop(done), done.result()

    def most(self) -> int:
        return self.size * AHEAD

    def close(self) -> None:
        self.pool.shutdown(cancel_futures=True)


class _Processes(Backend):
    """Processes of this machine; a pool that a dying worker breaks is made anew and its tasks given again."""

    def __init__(self, size: int, frozen: Frozen) -> None:
        self.size, self.frozen, self.deaths, self.broken = size, frozen, 0, False
        self.tasks: dict[int, Any] = {}
        self.running: dict[Future[Any], int] = {}
        self.pool = self._pool()

    def _pool(self) -> ProcessPoolExecutor:
        return ProcessPoolExecutor(self.size, mp_context=get_context("spawn"), initializer=_begin)

    def submit(self, number: int, task: Any) -> None:
        self.tasks[number] = task
        self._give(number)

    def _give(self, number: int) -> None:
        try:
            self.running[self.pool.submit(work, self.frozen, self.tasks[number])] = number
        except BrokenProcessPool:
            self.broken = True

    def next_done(self) -> tuple[int, Any]:
        while True:
            if self.broken:
                self._renew()
                continue
            done = next(iter(wait(self.running, return_when=FIRST_COMPLETED).done))
            number = self.running.pop(done)
            try:
                result = done.result()
            except BrokenProcessPool:
                self.broken = True
                continue
            self.deaths = 0
            del self.tasks[number]
            return number, result

    def _renew(self) -> None:
        """Give every task that is not done to a new pool."""
        self.deaths += 1
        if self.deaths > MOST_DEATHS:
            raise WorkersError(f"worker processes died {self.deaths} times before a single task was done; is memory short?")
        self.pool.shutdown()
        self.pool, self.running, self.broken = self._pool(), {}, False
        for number in list(self.tasks):
            self._give(number)

    def most(self) -> int:
        return self.size * AHEAD

    def close(self) -> None:
        self.pool.shutdown(cancel_futures=True)


def _begin() -> None:
    """In a new worker process: leave Ctrl-C to the parent, and end when the parent is gone."""
    signal.signal(signal.SIGINT, signal.SIG_IGN)

    def watch() -> None:
        parent = parent_process()
        if parent is not None:
            parent.join()
        os._exit(1)

    threading.Thread(target=watch, daemon=True).start()
