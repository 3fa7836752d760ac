"""The mesh kernel's global state, opened for one piece of work and left as it was found."""

from __future__ import annotations

import ctypes
import os
import signal
import threading
from collections.abc import Iterator
from contextlib import contextmanager
from types import TracebackType
from typing import Any

from skinmesh.errors import MeshError

try:
    import gmsh
except OSError as error:  # pragma: no cover - where the wheel's system libraries are missing
    raise ImportError(
        f"gmsh does not load: {error}. On Debian and Ubuntu: apt-get install libglu1-mesa libgl1 libxcursor1 libxft2"
        " libxinerama1 libxrender1 libfontconfig1 libgomp1"
    ) from error

_LOCK = threading.RLock()
_MODEL = "skinmesh"
_OPTIONS = {
    "General.Terminal": 0.0,
    "General.Verbosity": 5.0,  # or its warnings never reach us
    "General.NumThreads": 1.0,  # identical bytes from identical input
    "Mesh.Algorithm": 6.0,
    "Mesh.ElementOrder": 1.0,
    "Mesh.SecondOrderIncomplete": 0.0,
    "Mesh.SecondOrderLinear": 0.0,
    "Mesh.RecombineAll": 0.0,
    "Mesh.RecombineNodeRepositioning": 1.0,
    "Mesh.RecombinationAlgorithm": 1.0,
    "Mesh.HighOrderOptimize": 0.0,
    "Mesh.Smoothing": 1.0,
    "Mesh.MeshSizeFactor": 1.0,
    "Mesh.MeshSizeMin": 0.0,
    "Mesh.MeshSizeMax": 1e22,
    "Mesh.MeshSizeExtendFromBoundary": 1.0,
    "Mesh.MshFileVersion": 4.1,
    "Mesh.Binary": 0.0,
    "Mesh.SaveAll": 0.0,
    "Mesh.SaveParametric": 0.0,
    "Mesh.Renumber": 1.0,
}
"""Every option that our work depends on, at the value it begins with."""


_SIGNALS = [number for number in signal.valid_signals() if number < 32]
_SIGACTION_BYTES = 512
"""Enough for the struct of any system; its content is not looked at."""


class gmsh_session:  # noqa: N801 (used as a function would be)
    """Open a clean gmsh model and put everything back afterwards.

    Works off the main thread; one session at a time in a process. Where gmsh is open already, the caller's models and
    options stay as they are. To be used in a ``with`` statement, which gives gmsh's API with an empty current model.

    Raises
    ------
    MeshError
        On leaving: gmsh failed, or warned of anything.
    """

    def __enter__(self) -> Any:
        _LOCK.acquire()
        self._is_ours = not gmsh.isInitialized()
        self._before: dict[str, float] = {}
        self._current = ""
        if self._is_ours:
            with _kept_signal_handlers():
                gmsh.initialize(readConfigFiles=False, interruptible=False)
        else:
            self._before = {name: gmsh.option.getNumber(name) for name in _OPTIONS}
            self._current = gmsh.model.getCurrent()
        for name, value in _OPTIONS.items():
            gmsh.option.setNumber(name, value)
        gmsh.model.add(_MODEL)
        # Where the caller's logger runs already, gmsh says so in it, and it is not ours to stop.
        gmsh.logger.start()
        self._already_logged = len(gmsh.logger.get())
        return gmsh

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, _traceback: TracebackType | None
    ) -> None:
        try:
            log = gmsh.logger.get()[self._already_logged :]
            if not self._already_logged:
                gmsh.logger.stop()
            gmsh.model.remove()
            if self._is_ours:
                with _kept_signal_handlers():
                    gmsh.finalize()
            for name, value in self._before.items():
                gmsh.option.setNumber(name, value)
            if self._current:
                gmsh.model.setCurrent(self._current)
        finally:
            _LOCK.release()
        if kind is Exception:  # gmsh's API raises this and nothing narrower
            raise MeshError(f"the mesh kernel failed: {error}") from error
        if kind is None:
            _raise_on_warnings(log)


@contextmanager
def _kept_signal_handlers() -> Iterator[None]:
    """Put the process's signal handlers back: starting, gmsh sets SIGTERM and SIGPIPE to their defaults.

    By sigaction(2) and not by Python's ``signal``, which works on the main thread only.
    """
    if os.name != "posix":
        yield
        return
    libc = ctypes.CDLL(None)
    actions = {number: ctypes.create_string_buffer(_SIGACTION_BYTES) for number in _SIGNALS}
    for number, action in actions.items():
        libc.sigaction(number, None, action)
    try:
        yield
    finally:
        for number, action in actions.items():
            libc.sigaction(number, action, None)


def _raise_on_warnings(log: list[str]) -> None:
    told = [line for line in log if line.startswith(("Warning", "Error"))]
    if told:
        raise MeshError("the mesh kernel warned: " + "; ".join(told[:5]))
