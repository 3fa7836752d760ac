"""The processes that do the work: on this machine, or on a cluster of dask.distributed that runs already."""

from __future__ import annotations

import importlib.metadata
import logging
import os
from collections.abc import Callable, Iterable, Iterator
from contextlib import ExitStack, contextmanager
from itertools import islice
from typing import Any

from skinmesh.errors import InputError, MissingExtra, OutputError, Problem
from skinmesh.sweep.variant import FAILED, Outcome
from skinmesh.version import __version__

PATIENCE = 30
"""Seconds to wait for a scheduler to answer, and for its first worker."""
AHEAD = 2
"""Variants a worker is given beforehand, so that it never waits."""
_DEAF = "import signal; signal.signal(signal.SIGINT, signal.SIG_IGN)"
"""What a worker on this machine runs first: Ctrl-C reaches the whole terminal, but ending workers is the client's."""
_KEEP_MEMORY = {"MALLOC_TRIM_THRESHOLD_": 1 << 30, "MALLOC_MMAP_THRESHOLD_": 1 << 30}
"""For workers on this machine: glibc keeps the memory of large arrays for the next ones. By dask's own setting it gives
every array back, and fetching the pages anew took 40 % of the processor time."""
INSTALL = "pip install 'skinmesh[sweep]'"
Job = tuple[str, tuple[Any, ...]]


def require_sweep_libraries() -> None:
    """Refuse to begin where a library of the extra ``sweep`` is missing.

    Raises
    ------
    MissingExtra
    """
    try:
        import distributed
        import pyarrow
    except ImportError as error:
        raise MissingExtra(f"A sweep needs distributed and pyarrow: {INSTALL}") from error
    del distributed, pyarrow


@contextmanager
def open_crew(*, workers: int | None = None, scheduler: str | None = None) -> Iterator[Crew]:
    """Start workers on this machine, or go to those of a scheduler.

    Parameters
    ----------
    workers : int, optional
        Processes on this machine, of one thread each; by default one a processor.
    scheduler : str, optional
        Address of a scheduler that runs already: tcp://host:8786.

    Yields
    ------
    Crew

    Raises
    ------
    InputError
        The scheduler does not answer, has no workers, or a worker has no skinmesh or another one.
    """
    from dask import config
    from distributed import Client, LocalCluster

    with ExitStack() as stack:
        environment = config.get("distributed.nanny.pre-spawn-environ", {}) | _KEEP_MEMORY
        settings = {
            "distributed.comm.timeouts.connect": f"{PATIENCE}s",
            "distributed.nanny.pre-spawn-environ": environment,
        }
        stack.enter_context(config.set(settings))
        for name in ("distributed", "tornado", "asyncio"):
            stack.enter_context(_quiet(name))
        if scheduler is None:
            cluster: Any = stack.enter_context(
                LocalCluster(
                    n_workers=workers or os.cpu_count() or 1,
                    threads_per_worker=1,
                    processes=True,
                    # a free port of the loopback address: without one it takes 8787, and complains where that is taken
                    scheduler_kwargs={"dashboard": False, "dashboard_address": "127.0.0.1:0"},
                    preload=[_DEAF],
                    silence_logs=logging.CRITICAL,
                )
            )
            client = stack.enter_context(Client(cluster, set_as_default=False))
        else:
            try:
                client = stack.enter_context(Client(scheduler, set_as_default=False, timeout=PATIENCE))
                client.wait_for_workers(1, timeout=PATIENCE)
            except TimeoutError as error:
                raise _refused(scheduler, f"no worker answers within {PATIENCE} s; is one started?") from error
            except (OSError, ValueError) as error:
                raise _refused(scheduler, f"no scheduler answers there: {error}") from error
            _check_versions(client, scheduler)
        yield Crew(client)


class Crew:
    """Workers that take jobs.

    Parameters
    ----------
    client : distributed Client
    """

    def __init__(self, client: Any) -> None:
        self._client = client

    @property
    def size(self) -> int:
        """Threads of all workers."""
        return sum(self._client.nthreads().values())

    def shared(self, function: Callable[..., Any], *arguments: Any) -> Any:
        """Work something out once, for all jobs; it stays with the workers, and is made anew where it is lost.

        Returns
        -------
        distributed Future
            To be given to a job as an argument.
        """
        return self._client.submit(function, *arguments, pure=False)

    def outcomes(self, function: Callable[..., Outcome], jobs: Iterable[Job]) -> Iterator[tuple[str, Outcome]]:
        """Do jobs and give their outcomes as they come.

        Parameters
        ----------
        function : callable
        jobs : iterable of (str, tuple)
            Key and arguments of each; taken as workers become free, so that any number of them is no burden.

        Yields
        ------
        (str, Outcome)
            A job whose worker died again and again, or in which skinmesh broke, has failed; it is not final.

        Raises
        ------
        OutputError
            The scheduler has gone.
        """
        from distributed import as_completed

        waiting = iter(jobs)
        running: dict[Any, str] = {}
        done = as_completed(loop=self._client.loop)

        def give(n: int) -> None:
            for key, arguments in islice(waiting, n):
                future = self._client.submit(function, *arguments, pure=False)
                running[future] = key
                done.add(future)

        give(AHEAD * max(self.size, 1))
        while running:
            future = next(done)
            key = running.pop(future)
            yield key, _outcome(future)
            give(max(1, AHEAD * self.size - len(running)))


def _outcome(future: Any) -> Outcome:
    if future.status == "finished":
        outcome: Outcome = future.result()
        return outcome
    if future.status != "error":
        raise OutputError("the scheduler has gone; type the same command again when it is back")
    error = future.exception()
    told = " ".join(str(error).split())
    if type(error).__name__ == "KilledWorker":
        told = "its workers died, again and again; did the memory run out?"
    return Outcome(FAILED, f"{type(error).__name__}: {told}", is_final=False)


def _check_versions(client: Any, scheduler: str) -> None:
    """Ask every worker for its skinmesh; nothing of skinmesh itself is sent before that."""
    answers = client.run(importlib.metadata.version, "skinmesh", on_error="return")
    missing = sorted(worker for worker, answer in answers.items() if not isinstance(answer, str))
    others = sorted({str(answer) for answer in answers.values() if isinstance(answer, str)} - {__version__})
    if missing:
        raise _refused(
            scheduler, f"skinmesh is not installed on {len(missing)} of its workers: {', '.join(missing[:4])}"
        )
    if others:
        raise _refused(scheduler, f"its workers have skinmesh {', '.join(others)}, here it is {__version__}")


def _refused(scheduler: str, text: str) -> InputError:
    return InputError([Problem("--scheduler", 0, scheduler, text)])


@contextmanager
def _quiet(name: str) -> Iterator[None]:
    """Keep a library from telling of every worker that comes and goes; what matters becomes an outcome."""
    logger = logging.getLogger(name)
    level = logger.level
    logger.setLevel(logging.CRITICAL)
    try:
        yield
    finally:
        logger.setLevel(level)
