"""The stages of long work: a progress bar on a terminal, and what each stage took."""

from __future__ import annotations

import sys
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from time import perf_counter

from rich.console import Console
from rich.progress import BarColumn, Progress, SpinnerColumn, TaskID, TextColumn, TimeElapsedColumn

try:
    import resource
except ImportError:  # pragma: no cover - not on Windows
    resource = None  # type: ignore[assignment]


@dataclass(frozen=True)
class Stage:
    """A finished stage.

    Attributes
    ----------
    name : str
    seconds : float
    peak_bytes : int or None
        Largest memory of the process up to the end of the stage; None where the system does not tell.
    """

    name: str
    seconds: float
    peak_bytes: int | None


class Stages:
    """Shows one stage after the other and keeps their times.

    Parameters
    ----------
    progress : rich Progress or None
        None where nothing is shown.

    Examples
    --------
    >>> stages = Stages(None)
    >>> stages.begin("reading", 0.0)
    >>> stages.begin("meshing", 0.5)
    >>> stages.end()
    >>> [stage.name for stage in stages.finished]
    ['reading', 'meshing']
    """

    def __init__(self, progress: Progress | None) -> None:
        self.finished: list[Stage] = []
        self._progress = progress
        self._task: TaskID | None = None
        self._name = ""
        self._start = 0.0

    def begin(self, name: str, done: float) -> None:
        """Start a stage, and end the one before it.

        Parameters
        ----------
        name : str
        done : float
            Share of the whole work that is done, 0 to 1.
        """
        self.end()
        self._name, self._start = name, perf_counter()
        if self._progress is not None:
            if self._task is None:
                self._task = self._progress.add_task(name, total=1.0)
            self._progress.update(self._task, description=name, completed=done)

    def part(self, low: float, high: float) -> Callable[[str, float], None]:
        """What a part of the work calls to begin its stages, counting its own share from 0 to 1."""

        def begin(name: str, done: float) -> None:
            if done < 1.0:
                self.begin(name, low + done * (high - low))

        return begin

    def end(self) -> None:
        """End the stage that runs, where one does."""
        if self._name:
            self.finished.append(Stage(self._name, perf_counter() - self._start, peak_memory()))
            self._name = ""


@contextmanager
def shown_stages() -> Iterator[Stages]:
    """Stages with a bar on standard error where that is a terminal, silent where it is a pipe."""
    if not sys.stderr.isatty():
        yield Stages(None)
        return
    columns = (
        SpinnerColumn(),
        TextColumn("{task.description}", markup=False),
        BarColumn(bar_width=30),
        TimeElapsedColumn(),
    )
    with Progress(*columns, console=Console(stderr=True), transient=True) as progress:
        yield Stages(progress)


def peak_memory() -> int | None:
    """Largest memory that this process has had, in bytes; None where the system does not tell."""
    if resource is None:
        return None
    peak = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss
    # getrusage(2): kilobytes on Linux, bytes on macOS.
    return peak if sys.platform == "darwin" else peak * 1024
