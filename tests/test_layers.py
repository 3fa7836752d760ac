"""The package stands on rows, as DEVELOPERS.md draws them, and every module imports only from lower rows.

``python tests/test_layers.py`` prints the picture anew, every module on the lowest row that its imports allow.
"""

from __future__ import annotations

import ast
import re
import sys
from collections.abc import Iterator
from fnmatch import fnmatch
from pathlib import Path

import pytest

REPOSITORY = Path(__file__).parents[1]
PACKAGE = REPOSITORY / "skinmesh"

# The only modules that may import a library; numpy and scipy may be imported anywhere.
ALLOWED = {
    "gmsh": ("mesh.kernel", "write.formats.msh"),
    "meshio": ("write.*",),
    "shapely": ("skin.*", "mesh.midsurface"),
    "yaml": ("definition.*",),
    "pydantic": ("definition.*", "sweep.fields"),
    "pydantic_core": ("definition.*",),
    "pyvista": ("show.*",),
    "vtkmodules": ("show.*",),
    "matplotlib": ("show.*",),
    "dask": ("sweep.crew",),
    "distributed": ("sweep.crew",),
    "pyarrow": ("sweep.crew", "sweep.table"),
    "click": ("commands.*",),
    "rich": ("commands.*",),
    "numpy": ("*",),
    "scipy": ("*",),
}
# Heavy libraries of an optional extra: imported inside functions, so that the package works without them.
OPTIONAL = {"pyvista", "vtkmodules", "matplotlib", "dask", "distributed", "pyarrow"}
FRONT_DOOR = "skinmesh"
# Folders that stand side by side: neither knows the other.
BESIDE = (("show", "write"), ("laminate", "surface"))


def name_of(path: Path) -> str:
    parts = path.relative_to(PACKAGE).with_suffix("").parts
    parts = parts[:-1] if parts[-1] == "__init__" else parts
    return ".".join(parts) or FRONT_DOOR


MODULES = {name_of(path): path for path in sorted(PACKAGE.rglob("*.py"))}
TREES = {name: ast.parse(path.read_text(encoding="utf-8")) for name, path in MODULES.items()}


def rows_of_developers_page() -> list[list[str]]:
    """Module names of each row of the picture, bottom row first.

    A line of the picture is a row: ``folder | module  module``. A blank folder is that of the line above.
    """
    page = (REPOSITORY / "DEVELOPERS.md").read_text(encoding="utf-8")
    block = re.search(r"## The rows\n.*?```text\n(.*?)```", page, re.DOTALL)
    assert block, "DEVELOPERS.md has no picture of the rows"
    rows: list[list[str]] = []
    folder = ""
    for line in block[1].splitlines():
        label, _, words = line.partition("|")
        folder = label.strip() or folder
        inside = {word: f"{folder}.{word}" for word in words.split()}
        rows.append([inside[word] if inside[word] in MODULES else word for word in words.split()])
    return rows[::-1]


ROW_OF = {name: level for level, row in enumerate(rows_of_developers_page()) for name in row}


def imports_in(tree: ast.AST) -> Iterator[str]:
    """Dotted names of everything that is imported, ``a.b.c`` for ``from a.b import c``."""
    for node in ast.walk(tree):
        if isinstance(node, ast.Import):
            yield from (alias.name for alias in node.names)
        elif isinstance(node, ast.ImportFrom):
            assert node.level == 0, "imports are absolute"
            yield from (f"{node.module}.{alias.name}" for alias in node.names)


def own_module(dotted: str) -> str | None:
    """The module of the package that an imported name belongs to."""
    parts = dotted.split(".")
    if parts[0] != "skinmesh":
        return None
    inside = parts[1:]
    for length in range(len(inside), 0, -1):
        name = ".".join(inside[:length])
        if name in MODULES:
            return name
    return FRONT_DOOR


def is_bare(name: str) -> bool:
    """Whether a module is the ``__init__`` of a folder, with a docstring and nothing else."""
    return MODULES[name].name == "__init__.py" and len(TREES[name].body) == 1


def test_every_module_stands_on_exactly_one_row() -> None:
    drawn = [name for row in rows_of_developers_page() for name in row]
    assert len(drawn) == len(set(drawn))
    assert sorted(drawn) == sorted(name for name in MODULES if not is_bare(name))


@pytest.mark.parametrize("name", [name for name in MODULES if not is_bare(name)])
def test_imports_come_from_lower_rows(name: str) -> None:
    used = {own_module(dotted) for dotted in imports_in(TREES[name])} - {None}
    assert not [other for other in used if is_bare(other)]
    too_high = {other: ROW_OF[other] for other in used if ROW_OF[other] >= ROW_OF[name]}
    assert not too_high, f"{name} stands on row {ROW_OF[name]}"


@pytest.mark.parametrize(("left", "right"), [*BESIDE, *(pair[::-1] for pair in BESIDE)])
def test_folders_side_by_side_do_not_know_each_other(left: str, right: str) -> None:
    of_left = [name for name in MODULES if name.partition(".")[0] == left]
    used = {own_module(dotted) for name in of_left for dotted in imports_in(TREES[name])} - {None}
    assert of_left
    assert not [name for name in used if name.partition(".")[0] == right]


@pytest.mark.parametrize("name", list(MODULES))
def test_libraries_are_imported_only_where_they_may_be(name: str) -> None:
    used = {dotted.partition(".")[0] for dotted in imports_in(TREES[name])}
    for library in used - {"skinmesh", "__future__"} - sys.stdlib_module_names:
        assert any(fnmatch(name, pattern) for pattern in ALLOWED.get(library, ())), f"{name} imports {library}"


@pytest.mark.parametrize("name", list(MODULES))
def test_only_optional_libraries_are_imported_inside_functions(name: str) -> None:
    functions = [node for node in ast.walk(TREES[name]) if isinstance(node, ast.FunctionDef | ast.AsyncFunctionDef)]
    inside = {dotted.partition(".")[0] for function in functions for dotted in imports_in(function)}
    assert inside <= OPTIONAL
    guarded = [node for node in TREES[name].body if isinstance(node, ast.Import | ast.ImportFrom)]
    assert not OPTIONAL & {dotted.partition(".")[0] for node in guarded for dotted in imports_in(node)}


def test_the_rule_sees_what_it_forbids() -> None:
    tree = ast.parse("import gmsh.model\ndef f():\n    from skinmesh.mesh.shellmesh import ShellMesh\n")
    assert list(imports_in(tree)) == ["gmsh.model", "skinmesh.mesh.shellmesh.ShellMesh"]
    assert own_module("skinmesh.mesh.shellmesh.ShellMesh") == "mesh.shellmesh"
    assert own_module("skinmesh.load") == FRONT_DOOR
    assert own_module("numpy.linalg") is None


def folder_of(name: str) -> str:
    """Label of a module's rows in the picture."""
    own = {FRONT_DOOR: "front door", "__main__": "commands"}
    return own.get(name, name.rpartition(".")[0].partition(".")[0] or "base")


def lowest_rows() -> str:
    """The picture with every module on the lowest row of its folder that its imports allow."""
    needs = {
        name: {own_module(dotted) for dotted in imports_in(tree)} & set(MODULES) - {name}
        for name, tree in TREES.items()
        if not is_bare(name)
    }
    members: dict[str, set[str]] = {}
    for name in needs:
        members.setdefault(folder_of(name), set()).add(name)

    def depth(folder: str) -> int:
        below = {folder_of(other) for name in members[folder] for other in needs[name]} - {folder}
        return 1 + max(map(depth, below), default=-1)

    def height(name: str) -> int:
        beside = needs[name] & members[folder_of(name)]
        return 1 + max(map(height, beside), default=-1)

    lines = []
    for folder in sorted(members, key=lambda folder: (depth(folder), folder), reverse=True):
        rows: dict[int, list[str]] = {}
        for name in sorted(members[folder]):
            rows.setdefault(height(name), []).append(name.removeprefix(f"{folder}."))
        for level in sorted(rows, reverse=True):
            label = folder if level == max(rows) else ""
            lines.append(f"{label:<11}| {'  '.join(rows[level])}")
    return "\n".join(lines)


if __name__ == "__main__":
    print(lowest_rows())
