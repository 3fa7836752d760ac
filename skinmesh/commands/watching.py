"""``skinmesh build --watch``: build again whenever an input file is saved, and say in a line what changed."""

from __future__ import annotations

import time
from collections.abc import Mapping
from datetime import datetime
from hashlib import sha256
from pathlib import Path
from time import perf_counter

import click
from rich.console import Console

from skinmesh.commands.closing import grouped, print_closing, printable, significant
from skinmesh.commands.keeping import node_moves, other_plies
from skinmesh.commands.rebuild import BuildOrder, Built, build_files
from skinmesh.commands.stages import shown_stages
from skinmesh.definition.packagefiles import geometry_folder
from skinmesh.errors import InputError, SkinmeshError
from skinmesh.mesh.measure import element_areas, mass_properties
from skinmesh.mesh.shellmesh import ShellMesh

INTERVAL = 0.25  # s
"""Between two looks at the files' clocks. A look takes some microseconds, works on network drives too, where systems
report no changes, and does not care how an editor saves."""

Contents = Mapping[Path, str]


def watch(order: BuildOrder, *, first: ShellMesh | None) -> None:
    """Build, wait for a change, build again, until the user stops it.

    Numbers are those of the last good mesh where the layout allows it, else of the first one, else new.

    Parameters
    ----------
    order : BuildOrder
    first : ShellMesh, optional
        An earlier mesh whose numbers are to stay; without it that is the first one built.
    """
    last, good = first, None
    tried: Contents = {order.blade_file: ""}
    told, mistakes = list[Path](), ""
    console = Console(highlight=False, markup=False, emoji=False)
    try:
        while True:
            start, found = perf_counter(), _contents(tried)
            keep = tuple(mesh for mesh in (last, first) if mesh is not None)
            try:
                with shown_stages() as stages:
                    or_fresh = good is not None or order.mapped_from is not None
                    built = build_files(order, stages, keep=keep, or_fresh=or_fresh)
            except SkinmeshError as error:
                stays = "nothing was written" if good is None else "the last good mesh stays"
                if str(error) != mistakes:
                    mistakes = str(error)
                    click.echo(printable(f"{_clock()} not built, {stays}:\n{mistakes}"), err=True)
                tried = {**_named_in(error, order.blade_file), **found}
            else:
                mistakes = ""
                seconds = perf_counter() - start
                if good is None:
                    print_closing(
                        console,
                        built.mesh,
                        directory=order.directory,
                        files=built.files,
                        seconds=seconds,
                        solid_mass=built.solid_mass,
                    )
                if last is not None:
                    click.echo("\n".join(news(last, built, seconds=seconds)))
                good = last = built.mesh
                first = first or last
                tried = _inputs(order.blade_file, last)
            if [*tried] != told:
                told = [*tried]
                click.echo(printable(f"Watching {', '.join(dict.fromkeys(path.name for path in told))}. Ctrl-C ends."))
            wait_for_change(tried)
    except KeyboardInterrupt:
        click.echo("\nStopped watching.")


def wait_for_change(tried: Contents) -> None:
    """Return when a file has another content than it had, and nobody has written to it since the last look.

    Parameters
    ----------
    tried : mapping of Path to str
        SHA-256 of every file's content, blank for one that was not there.
    """
    seen: object = None
    while True:
        state = _clocks(tried)
        if state != seen:
            time.sleep(INTERVAL)
            while (later := _clocks(tried)) != state:
                state = later
                time.sleep(INTERVAL)
            seen = state
            if _contents(tried) != tried:
                return
        time.sleep(INTERVAL)


def news(old: ShellMesh, built: Built, *, seconds: float) -> list[str]:
    """What a rebuild changed: one line, and a line for each warning that was not there before.

    Parameters
    ----------
    old : ShellMesh
        The last good mesh.
    built : Built
    seconds : float
        What the rebuild took.

    Returns
    -------
    list of str
    """
    new = built.mesh
    if built.kept is not None:
        parts = ["numbers kept" if built.kept is old else "numbers of the first mesh, whose layout it has again"]
    else:
        why = "; ".join(built.refusal.changes) if built.refusal is not None else "nothing to keep"
        parts = [f"new numbers ({printable(why)})", f"{grouped(len(old.cells))} → {grouped(len(new.cells))} elements"]
    if len(parts) == 1 and built.kept is not old:
        parts.append(f"{grouped(len(old.cells))} → {grouped(len(new.cells))} elements")
    parts += _amounts(old, new)
    if built.kept is old:
        moved, plies = float(node_moves(old, new).max()), len(other_plies(old, new))
        parts += [f"nodes moved {significant(1e3 * moved)} mm at most"] * (moved > 1e-9)
        parts += [f"{grouped(plies)} element{'s have' if plies > 1 else ' has'} other plies"] * (plies > 0)
    known = {_head(text) for text in old.report.warnings}
    warnings = [text for text in new.report.warnings if text not in old.report.warnings]
    n_new = sum(_head(text) not in known for text in warnings)
    n_other = len(warnings) - n_new
    n_gone = len(known - {_head(text) for text in new.report.warnings})
    for n, text in ((n_new, "new warning"), (n_other, "changed warning"), (n_gone, "warning")):
        if n:
            parts.append(f"{n} {text}{'s' * (n > 1)}" + " gone" * (text == "warning"))
    if len(parts) == 1:
        parts.append("nothing changed")
    line = f"{_clock()} rebuilt in {seconds:.1f} s: {parts[0]}; {', '.join(parts[1:])}"
    return [line, *(f"  - {printable(text)}" for text in warnings)]


def _amounts(old: ShellMesh, new: ShellMesh) -> list[str]:
    """Mass, or area where there are no plies, before and after; nothing where they are the same."""
    if old.stacks and new.stacks:
        name, unit = "mass", "kg"
        before, after = mass_properties(old).mass, mass_properties(new).mass
    else:
        name, unit = "area", "m²"
        before, after = (float(element_areas(mesh).sum()) for mesh in (old, new))
    change = (after - before) / before
    if abs(change) < 1e-9:
        return []
    return [f"{name} {significant(before)} → {significant(after)} {unit} ({100 * change:+.2g} %)"]


def _head(warning: str) -> str:
    """What a warning is about, without the numbers that change with every build."""
    return warning.partition(":")[0]


def _clock() -> str:
    return f"{datetime.now():%H:%M:%S}"


def _clocks(files: Contents) -> list[tuple[int, int, int] | None]:
    """When each file was written, its size and its number in the file system; None where it is not there."""
    found: list[tuple[int, int, int] | None] = []
    for path in files:
        try:
            status = path.stat()
        except OSError:
            found.append(None)
        else:
            found.append((status.st_mtime_ns, status.st_size, status.st_ino))
    return found


def _contents(files: Contents) -> Contents:
    return {path: _content(path) for path in files}


def _content(path: Path) -> str:
    try:
        return sha256(path.read_bytes()).hexdigest()
    except OSError:
        return ""


def _inputs(blade_file: Path, mesh: ShellMesh) -> Contents:
    """The input files of a mesh, as they were when it was built."""
    contents = {blade_file: mesh.sources[0].sha256}
    for source in mesh.sources[1:]:
        beside = blade_file.parent / source.file
        if _content(beside):
            contents[beside] = source.sha256
        else:  # one of the package's own profiles, until the user puts one of that name beside the blade file
            contents[beside] = ""
            contents[geometry_folder() / source.file] = source.sha256
    return contents


def _named_in(error: SkinmeshError, blade_file: Path) -> Contents:
    """Files in which mistakes were found, as if they had not been there: one that is new to us is tried once more."""
    problems = error.problems if isinstance(error, InputError) else ()
    return {blade_file.parent / problem.file: "" for problem in problems if Path(problem.file) != blade_file}
