"""From the path of a blade file to the checked definition of the blade."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from os import PathLike, fspath
from pathlib import Path

from skinmesh.definition.along import AlongReader
from skinmesh.definition.blade import (
    CLOCKWISE,
    BladeDefinition,
    CircleProfile,
    FileProfile,
    NacaProfile,
    Profile,
    Source,
)
from skinmesh.definition.coordinates import Floats, read_coordinates
from skinmesh.definition.fieldcheck import check_fields
from skinmesh.definition.filetext import read_text
from skinmesh.definition.layoutrule import LayoutReader
from skinmesh.definition.materials import make_material
from skinmesh.definition.packagefiles import geometry_folder
from skinmesh.definition.problems import FieldPath, FieldReport, Findings, nearest, no_such, shown
from skinmesh.definition.schedule import read_mesh_rule, read_plies
from skinmesh.definition.schema import ProfileFields
from skinmesh.definition.table import ReadTable, check_extra_columns, read_table
from skinmesh.definition.yamltree import Document, read_document
from skinmesh.errors import InputError

_PROFILE_KINDS = ("circle", "naca", "file")


def load_blade(path: str | PathLike[str]) -> BladeDefinition:
    """Read and check a blade file with its station table and its profile files.

    Runs no code from input. Files that the blade file names are looked up beside it, profiles then in the package's
    own geometry folder.

    Parameters
    ----------
    path : str or path

    Returns
    -------
    BladeDefinition

    Raises
    ------
    InputError
        With every mistake of every file.
    """
    file = fspath(path)
    findings = Findings()
    text = read_text(Path(file), file, findings=findings, kind="blade file", source_name=Path(file).name)
    document = read_document(text, findings) if text else None
    if text is None or document is None:
        raise InputError(findings.problems)
    return _load(document, Path(file), text.source, FieldReport(file, document.lines, findings))


def _load(document: Document, path: Path, source: Source, report: FieldReport) -> BladeDefinition:
    fields = check_fields(document, report)
    files = _NamedFiles(path.parent, report, [source])
    table = files.table(fields.planform)
    profiles = {name: files.profile(name, profile) for name, profile in (fields.profiles or {}).items()}
    if table is not None and fields.profiles is not None:
        _check_profile_names(table, profiles, report.findings)
    materials = {
        name: make_material(name, material, path=("materials", name), report=report)
        for name, material in (fields.materials or {}).items()
    }
    along = AlongReader(report, table)
    layout_reader = LayoutReader(report, along, _blade_span(table))
    layout = layout_reader.read(fields.layout)
    plies = read_plies(
        fields.plies or (), layout=layout, materials=materials, table=table, reader=layout_reader, along=along
    )
    mesh = read_mesh_rule(fields.mesh, layout=layout, table=table, report=report, along=along)
    if table is not None:
        check_extra_columns(table, along.used, report.findings)
    if table is None or report.findings.problems:
        # the blade file's own mistakes first, whatever was found first
        raise InputError(sorted(report.findings.problems, key=lambda problem: problem.file != report.file))
    return BladeDefinition(
        title=" ".join((fields.title or path.stem).split()),
        stem=path.stem,
        hand=fields.hand or CLOCKWISE,
        stations=table.stations(),
        profiles={name: profile for name, profile in profiles.items() if profile is not None},
        materials={name: material for name, material in materials.items() if material is not None},
        layout=layout,
        plies=plies,
        mesh=mesh,
        sources=tuple(files.sources),
        lines=dict(document.lines),
    )


@dataclass
class _NamedFiles:
    """The files that a blade file names."""

    folder: Path
    report: FieldReport
    sources: list[Source]
    loops: dict[str, Floats | None] = field(default_factory=dict)

    def table(self, name: str | None) -> ReadTable | None:
        """Read the station table."""
        if name is None:
            return None
        if not name.strip():
            self.report.add(("planform",), "is empty; give the file name of the station table")
            return None
        findings = self.report.findings
        text = read_text(self.folder / name, name, findings=findings, kind="station table")
        if text is None:
            return None
        self.sources.append(text.source)
        return read_table(text, findings)

    def profile(self, name: str, fields: ProfileFields) -> Profile | None:
        """Make a profile, reading its file where it has one."""
        path = ("profiles", name)
        given = [kind for kind in _PROFILE_KINDS if getattr(fields, kind) or self.report.has((*path, kind))]
        if len(given) != 1:
            if given or not self.report.has(path):
                got = f", got {' and '.join(given)}" if given else ""
                self.report.add(path, f'must be one of {{circle: true}}, {{naca: "4424"}}, {{file: name.dat}}{got}')
            return None
        if fields.trailing_gap is not None and given != ["naca"]:
            self.report.add(
                (*path, "trailing_gap"), "belongs to a NACA profile only; a file gives its own trailing edge"
            )
        if fields.circle:
            return CircleProfile()
        if fields.naca is not None:
            return self._naca(fields.naca, fields.trailing_gap, (*path, "naca"))
        return self._file_profile(fields.file, (*path, "file"))

    def _naca(self, code: str, trailing_gap: float | None, path: FieldPath) -> NacaProfile | None:
        if not (len(code) == 4 and code.isascii() and code.isdigit()):
            self.report.add(path, f"must be the four digits of a NACA 4-digit profile, got {shown(code)}")
        elif code[2:] == "00":
            self.report.add(
                path, f"the last two digits are the thickness in per cent and cannot be 00, got {shown(code)}"
            )
        elif (code[0] == "0") != (code[1] == "0"):
            text = "the first two digits, camber and its place, are both 0 or neither is"
            self.report.add(path, f"{text}, got {shown(code)}")
        else:
            return NacaProfile(code, trailing_gap)
        return None

    def _file_profile(self, name: str | None, path: FieldPath) -> FileProfile | None:
        if name is None:
            return None
        if name not in self.loops:
            self.loops[name] = self._loop(name, path)
        loop = self.loops[name]
        return None if loop is None else FileProfile(name, loop)

    def _loop(self, name: str, path: FieldPath) -> Floats | None:
        beside, packaged = self.folder / name, geometry_folder() / name
        place = packaged if _is_absent(beside) and not _is_absent(packaged) else beside
        if _is_absent(place):
            self.report.add(
                path,
                f"no such file {shown(name)}: neither at {beside.absolute()} nor among skinmesh's own"
                f" profiles in {geometry_folder()}{_nearest_file(beside)}",
            )
            return None
        text = read_text(place, name, findings=self.report.findings, kind="profile file", is_strict=False)
        if text is None:
            return None
        self.sources.append(text.source)
        return read_coordinates(text, self.report.findings)


def _is_absent(path: Path) -> bool:
    """Whether nothing at all is at a path; a broken link or a forbidden folder is not nothing."""
    try:
        path.lstat()
    except FileNotFoundError:
        return True
    except (OSError, ValueError):
        return False
    return False


def _nearest_file(wanted: Path) -> str:
    """A hint at a file whose name is nearly the wanted one."""
    try:
        names = [entry.name for folder in (wanted.parent, geometry_folder()) for entry in folder.iterdir()]
    except OSError:
        return ""
    near = nearest(wanted.name, names)
    return f" — did you mean '{near}'?" if near else ""


def _check_profile_names(table: ReadTable, profiles: Mapping[str, Profile | None], findings: Findings) -> None:
    for row, name in enumerate(table.profile):
        if name is not None and name not in profiles:
            text = no_such("profile", name, profiles).replace("; known", " in the blade file; known", 1)
            findings.add(table.file, text, place=f"{table.place(row)}, profile", line=table.lines[row])


def _blade_span(table: ReadTable | None) -> tuple[float, float] | None:
    return (float(table.stations().z[0]), float(table.stations().z[-1])) if table and table.is_sound else None
