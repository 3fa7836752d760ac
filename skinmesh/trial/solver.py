"""CalculiX as a program beside ours: found, run, and its words kept."""

from __future__ import annotations

import os
import shutil
import subprocess
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path
from time import perf_counter

from skinmesh.errors import SkinmeshError

SOLVER = "ccx"
INSTALL_LINE = "apt-get install calculix-ccx"
N_LAST_LINES = 12
_LOOK_EVERY = 0.3  # seconds


class NoSolverError(SkinmeshError):
    """The solver is not installed, or not where it was said to be; the message carries the install line."""


class SolverError(SkinmeshError):
    """The solver stopped before the end.

    Parameters
    ----------
    message : str
    log : str
        All that it said.
    """

    def __init__(self, message: str, log: str) -> None:
        super().__init__(message)
        self.log = log


@dataclass(frozen=True)
class SolverRun:
    """What a run of the solver left.

    Attributes
    ----------
    log : str
        Standard output and errors.
    printed : str
        The .dat file.
    seconds : float
    peak_bytes : int or None
        Largest memory of the solver; None where the system does not tell.
    """

    log: str
    printed: str
    seconds: float
    peak_bytes: int | None


def find_solver(wanted: str | os.PathLike[str] | None = None) -> Path:
    """Path of the solver.

    Parameters
    ----------
    wanted : path, optional
        Program to take; by default ``ccx`` of the search path.

    Returns
    -------
    Path

    Raises
    ------
    NoSolverError

    Examples
    --------
    >>> find_solver("no/such/ccx")
    Traceback (most recent call last):
        ...
    skinmesh.trial.solver.NoSolverError: no/such/ccx is no program; wanted is the path of CalculiX (ccx).
    """
    found = shutil.which(SOLVER if wanted is None else os.fspath(wanted))
    if found is not None:
        return Path(found).absolute()
    if wanted is not None:
        raise NoSolverError(f"{os.fspath(wanted)} is no program; wanted is the path of CalculiX (ccx).")
    raise NoSolverError(
        "CalculiX (ccx) is not installed. On Debian and Ubuntu: "
        f"{INSTALL_LINE}; elsewhere give its path with --solver PATH."
    )


def run_solver(
    deck: Path, solver: Path, *, on_block: Callable[[int], None] | None = None, marker: str = ""
) -> SolverRun:
    """Run the solver on a deck, in the deck's folder.

    It takes as many threads as ``OMP_NUM_THREADS`` says, or as there are processors.

    Parameters
    ----------
    deck : Path
        Ends in ``.inp``.
    solver : Path
    on_block : callable, optional
        Called from time to time with the number of marked blocks that have been printed.
    marker : str
        Words that begin such a block.

    Returns
    -------
    SolverRun

    Raises
    ------
    SolverError
        It stopped with an error, or without its closing words. The message carries the last lines of its log.
    """
    log_path, printed_path = deck.with_suffix(".log"), deck.with_suffix(".dat")
    threads = os.environ.get("OMP_NUM_THREADS") or str(os.cpu_count() or 1)
    start = perf_counter()
    with log_path.open("wb") as log_file:
        process = subprocess.Popen(
            [str(solver), "-i", deck.stem],
            cwd=deck.parent,
            stdin=subprocess.DEVNULL,
            stdout=log_file,
            stderr=subprocess.STDOUT,
            env={**os.environ, "OMP_NUM_THREADS": threads},
        )
        try:
            peak = _wait(process, lambda: on_block(_count(printed_path, marker)) if on_block else None)
        finally:
            if process.returncode is None:
                process.kill()
                process.wait()
    log = log_path.read_text(encoding="utf-8", errors="replace")
    seconds = perf_counter() - start
    if process.returncode != 0 or "Job finished" not in log:
        raise SolverError(_failure(solver, process.returncode, log), log)
    printed = printed_path.read_text(encoding="utf-8", errors="replace") if printed_path.exists() else ""
    return SolverRun(log, printed, seconds, peak)


def _wait(process: subprocess.Popen[bytes], look: Callable[[], None]) -> int | None:
    """Wait for the end; returns the largest memory in bytes where the system's process table shows it."""
    status = Path(f"/proc/{process.pid}/status")
    peak: int | None = None
    while True:
        try:
            process.wait(timeout=_LOOK_EVERY)
        except subprocess.TimeoutExpired:
            peak = _peak_of(status) or peak
            look()
        else:
            return peak


def _peak_of(status: Path) -> int | None:
    try:
        lines = status.read_text(encoding="ascii", errors="replace").splitlines()
    except OSError:
        return None
    found = [line.split()[1] for line in lines if line.startswith("VmHWM:")]
    return int(found[0]) * 1024 if found else None


def _count(path: Path, marker: str) -> int:
    return path.read_text(encoding="utf-8", errors="replace").count(marker) if path.exists() else 0


def _failure(solver: Path, status: int, log: str) -> str:
    lines = [line.rstrip() for line in log.splitlines() if line.strip()]
    errors = [line for line in lines if "*ERROR" in line]
    told = "\n".join(f"  {line}" for line in [*errors[:3], *lines[-N_LAST_LINES:]])
    if status < 0:
        how = f"was stopped by signal {-status}" + (" (out of memory?)" if status == -9 else "")
    else:
        how = f"stopped with status {status}" if status else "stopped before the end"
    return f"{solver.name} {how}. The last lines of its log:\n{told or '  (nothing)'}"
