"""What ``skinmesh new`` writes reads at once and builds at once."""

from __future__ import annotations

import os
from pathlib import Path

import pytest
from blade_files import PROFILE

from skinmesh.commands.starter import write_starter
from skinmesh.definition.blade import CircleProfile, FileProfile, NacaProfile
from skinmesh.definition.read import load_blade
from skinmesh.errors import InputError, OutputError, Problem
from skinmesh.mesh.build import build_mesh

TABLE = """\
z_m,chord_m,twist_deg,pitch_axis,profile
0.5,1.2,12,0.5,Cylinder
1.5,1.2,12,0.5,Cylinder
4.5,1.9,9,0.35,THICK 40
9.0,1.4,4,0.32,
14.0,0.9,1,0.3,NACA 4418
17.0,0.5,0,0.3,naca_4415
"""


@pytest.fixture
def own(tmp_path: Path) -> Path:
    """A folder with a table, and one with profiles."""
    (tmp_path / "stations.csv").write_text(TABLE, encoding="utf-8")
    (tmp_path / "airfoils").mkdir()
    (tmp_path / "airfoils" / "thick_40.dat").write_text(PROFILE, encoding="utf-8")
    return tmp_path


def refused(directory: Path, **arguments: Path) -> tuple[Problem, ...]:
    with pytest.raises(InputError) as caught:
        write_starter(directory, **arguments)
    return caught.value.problems


def test_the_demonstration_blade_stands_on_its_own(tmp_path):
    files = write_starter(tmp_path / "deep" / "mine")
    assert files[0].name == "marram-24.yaml"
    assert all(file.parent == tmp_path / "deep" / "mine" for file in files)
    blade = load_blade(files[0])
    assert {source.file for source in blade.sources} == {file.name for file in files}
    assert ".." not in files[0].read_text(encoding="utf-8")


def test_the_demonstration_blade_is_the_example(tmp_path):
    example = load_blade(Path(__file__).parents[1] / "examples" / "marram-24" / "marram-24.yaml")
    mine = load_blade(write_starter(tmp_path)[0])
    assert [source.sha256 for source in mine.sources[1:]] == [source.sha256 for source in example.sources[1:]]
    assert mine.plies
    assert [ply.name for ply in mine.plies] == [ply.name for ply in example.plies]


def test_round_an_own_table(own):
    files = write_starter(own / "mine", table=own / "stations.csv", profiles=own / "airfoils")
    assert [file.name for file in files] == ["stations.yaml", "stations.csv", "thick_40.dat"]
    assert files[1].read_text(encoding="utf-8") == TABLE
    blade = load_blade(files[0])
    assert isinstance(blade.profiles["Cylinder"], CircleProfile)
    assert isinstance(blade.profiles["THICK 40"], FileProfile)
    assert blade.profiles["NACA 4418"] == NacaProfile("4418", None)
    assert blade.profiles["naca_4415"] == NacaProfile("4415", None)
    assert [cap.name for cap in blade.layout.caps] == ["main cap"]
    assert [web.name for web in blade.layout.webs] == ["fore web", "aft web"]
    assert blade.layout.caps[0].width(4.5) == pytest.approx(0.2 * 1.9, rel=0.03)
    text = files[0].read_text(encoding="utf-8")
    assert text.count("invented: replace by your own") + text.count("invented, replace by your own") >= 3
    assert all(len(line) <= 120 for line in text.splitlines())


@pytest.mark.parametrize(
    "rows",
    [
        ["0,100,10,0.3,NACA 0012", "200,90,5,0.3,", "500,40,0,0.3,naca0012"],
        [
            "0,4800,14,0.5,round",
            "3000,4800,14,0.5,round",
            "22000,6200,9,0.35,naca4440",
            "50000,4000,3,0.3,naca 4421",
            "107000,600,-2,0.28,NACA_4415",
        ],
        ["1000,500,0,0.5,circle", "2000,300,0,0.5,circle"],
    ],
    ids=["half a metre", "a hundred metres", "a tube"],
)
def test_blades_of_any_size_build_at_once(tmp_path, rows):
    table = tmp_path / "table.csv"
    table.write_text("\n".join(["z_mm,chord_mm,twist_deg,pitch_axis,profile", *rows]), encoding="utf-8")
    mesh = build_mesh(load_blade(write_starter(tmp_path / "mine", table=table)[0]))
    assert len(mesh.cells) > 500
    assert (mesh.stack >= 0).all()
    assert not [text for text in mesh.report.warnings if text.startswith("folded")]


def test_unknown_profiles_are_told_with_the_nearest_file(own):
    (own / "stations.csv").write_text(TABLE.replace("THICK 40", "thik 40"), encoding="utf-8")
    (problem,) = refused(own / "mine", table=own / "stations.csv", profiles=own / "airfoils")
    assert (problem.line, problem.field) == (4, "row 3 (z_m = 4.5), profile")
    assert "'thik 40' is not known: no file of this name in" in problem.text
    assert "did you mean 'thick_40'?" in problem.text
    assert not (own / "mine").exists()


def test_without_a_folder_of_profiles(own):
    (own / "stations.csv").write_text(TABLE.replace("THICK 40", "mine 40"), encoding="utf-8")
    (problem,) = refused(own / "mine", table=own / "stations.csv")
    assert "--profiles" in problem.text


def test_all_mistakes_at_once(own):
    (own / "stations.csv").write_text(TABLE.replace("4.5,1.9", "4.5,l.9").replace("Cylinder", "x", 1), encoding="utf-8")
    (own / "airfoils" / "thick_40.dat").write_text("no numbers\n", encoding="utf-8")
    found = {(Path(problem.file).name, problem.line) for problem in refused(
        own / "mine", table=own / "stations.csv", profiles=own / "airfoils"
    )}  # fmt: skip
    assert found == {("stations.csv", 2), ("stations.csv", 4), ("thick_40.dat", 0)}


def test_a_column_without_use_is_told(own):
    (own / "stations.csv").write_text(TABLE.replace("chord_m", "chord_m,mass_kg", 1), encoding="utf-8")
    fields = [problem.field for problem in refused(own / "mine", table=own / "stations.csv")]
    assert "mass_kg" in fields


@pytest.mark.parametrize("name", ["stations.yaml", "stations.csv", "thick_40.dat"])
def test_nothing_is_overwritten(own, name):
    (own / "mine").mkdir()
    (own / "mine" / name).write_text("precious", encoding="utf-8")
    (problem,) = refused(own / "mine", table=own / "stations.csv", profiles=own / "airfoils")
    assert problem.file == str(own / "mine")
    assert problem.text.startswith(f"{name} is there already, and nothing is overwritten")
    assert [(entry.name, entry.read_text(encoding="utf-8")) for entry in (own / "mine").iterdir()] == [
        (name, "precious")
    ]


def test_the_table_may_lie_in_the_folder_itself(own):
    files = write_starter(own, table=own / "stations.csv", profiles=own / "airfoils")
    assert [file.name for file in files] == ["stations.yaml", "thick_40.dat"]
    assert load_blade(files[0]).stations.z[0] == 0.5


def test_wrong_arguments(own):
    assert "--table" in refused(own / "mine", profiles=own / "airfoils")[0].text
    assert "no folder" in refused(own / "mine", table=own / "stations.csv", profiles=own / "nowhere")[0].text
    assert "no such file" in refused(own / "mine", table=own / "nowhere.csv")[0].text
    (own / "file").write_text("", encoding="utf-8")
    with pytest.raises(OutputError, match="is a file"):
        write_starter(own / "file")
    with pytest.raises(OutputError):
        write_starter(own / "file" / "below")


@pytest.mark.skipif(os.geteuid() == 0, reason="root may write everywhere")
def test_a_folder_that_cannot_be_written(own):
    own.chmod(0o500)
    try:
        with pytest.raises(OutputError, match="Permission denied"):
            write_starter(own / "mine")
    finally:
        own.chmod(0o700)
