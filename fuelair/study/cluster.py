"""The runner on Dask workers: a scheduler somewhere, or a cluster of processes on this machine."""

from __future__ import annotations

import logging
import signal
import threading
from collections.abc import Iterator
from concurrent.futures import CancelledError
from contextlib import contextmanager
from importlib import import_module
from time import monotonic
from typing import Any, Final

from fuelair.errors import InputError, MissingExtraError, Problem, WorkersError
from fuelair.study.spread import AHEAD, Backend, Frozen, Runner, work

CONNECT_SECONDS: Final = 10
REFRESH_SECONDS: Final = 2.0
"""How often a scheduler is asked for the number of its workers."""
SILENT: Final = logging.CRITICAL


def _distributed() -> Any:
    try:
        return import_module("distributed")
    except ImportError:
        raise MissingExtraError("cluster", "The runner dask") from None


class Dask(Backend):
    """Workers of a Dask scheduler, or of a cluster on this machine."""

    def __init__(self, runner: Runner, frozen: Frozen) -> None:
        distributed = _distributed()
        self.frozen, self.killed = frozen, distributed.KilledWorker
        self.cluster: Any = None
        self.client: Any = None
        self.asked, self.threads = 0.0, 0
        security = _security(runner)
        self.log = logging.getLogger("distributed.client")
        self.level = self.log.level
        self.log.setLevel(SILENT)  # a scheduler that goes is an error with one line, not pages of tracebacks
        try:
            if runner.scheduler is None:
                with _deaf():
                    self.cluster = distributed.LocalCluster(
                        n_workers=runner.size, threads_per_worker=1, host="127.0.0.1", dashboard_address=None, silence_logs=SILENT
                    )
            address = self.cluster or runner.scheduler
            self.client = distributed.Client(address, timeout=CONNECT_SECONDS, security=security, set_as_default=False)
            self.client.wait_for_workers(1, timeout=CONNECT_SECONDS)
        except BaseException as error:
            self.close()
            if not isinstance(error, (OSError, ValueError, TimeoutError)):
                raise
            raise WorkersError(f"no worker of {runner.scheduler or 'a local cluster'} answers: {error}") from None
        self.done = distributed.as_completed([], loop=self.client.loop)
        self.running: dict[Any, int] = {}

    def submit(self, number: int, task: Any) -> None:
        """Begin a task on any worker."""
        future = self.client.submit(work, self.frozen, task, pure=False)
        self.running[future] = number
        self.done.add(future)

    def next_done(self) -> tuple[int, Any]:
        """Wait for any of the tasks."""
        future = next(self.done)
        try:
            return self.running.pop(future), future.result()
        except self.killed:
            raise WorkersError("a task ended with its worker again and again; is memory short?") from None
        except CancelledError:
            raise WorkersError("the scheduler is gone") from None

    def most(self) -> int:
        """In step with workers that come and go."""
        if monotonic() - self.asked > REFRESH_SECONDS:
            self.threads, self.asked = sum(self.client.nthreads().values()), monotonic()
        return max(self.threads, 1) * AHEAD

    def close(self) -> None:
        """Leave the scheduler; end the cluster of this machine."""
        self.log.setLevel(self.level)
        for one in (self.client, self.cluster):
            if one is not None:
                one.close()


@contextmanager
def _deaf() -> Iterator[None]:
    """Start processes that leave Ctrl-C to their parent."""
    if threading.current_thread() is not threading.main_thread():
        yield
        return
    before = signal.signal(signal.SIGINT, signal.SIG_IGN)
    try:
        yield
    finally:
        signal.signal(signal.SIGINT, before)


def _security(runner: Runner) -> Any:
    if runner.certificates is None:
        return None
    files = runner.certificates
    for path in (files.authority, files.certificate, files.key):
        if not path.is_file():
            raise InputError(Problem("no such file", "--tls-ca, --tls-cert, --tls-key", str(path)))
    return _distributed().Security(
        tls_ca_file=str(files.authority), tls_client_cert=str(files.certificate), tls_client_key=str(files.key),
        require_encryption=True,
    )  # fmt: skip
