"""Folders that travel with the package: profile coordinates and the starter blade."""

from __future__ import annotations

from pathlib import Path

_PACKAGE = Path(__file__).parents[1]
_CHECKOUT = Path(__file__).parents[2]


def geometry_folder() -> Path:
    """Folder of the profiles and tables that skinmesh brings along.

    In a wheel it lies in the package, in a checkout at the top of the repository.

    Returns
    -------
    Path
    """
    return _first_folder(_PACKAGE / "geometry", _CHECKOUT / "geometry")


def starter_folder() -> Path:
    """Folder of the demonstration blade.

    Returns
    -------
    Path
    """
    return _first_folder(_PACKAGE / "starter", _CHECKOUT / "examples" / "marram-24")


def _first_folder(*folders: Path) -> Path:
    return next((folder for folder in folders if folder.is_dir()), folders[0])
