"""Colours stay apart for every kind of eye: regions from regions, materials from materials, on light and dark pages."""

from __future__ import annotations

import importlib.util
from pathlib import Path

import pytest

from skinmesh.show.palette import MATERIAL_TONES, part_colours

SCRIPT = Path(__file__).parents[1] / "examples" / "pictures" / "colour_sight.py"
_spec = importlib.util.spec_from_file_location("colour_sight", SCRIPT)
assert _spec is not None
assert _spec.loader is not None
sight = importlib.util.module_from_spec(_spec)
_spec.loader.exec_module(sight)


@pytest.mark.parametrize(
    ("one", "two", "wanted"),
    # Sharma, Wu and Dalal (2005), table 1, from memory.
    [
        ((50.0, 2.6772, -79.7751), (50.0, 0.0, -82.7485), 2.0425),
        ((50.0, 3.1571, -77.2803), (50.0, 0.0, -82.7485), 2.8615),
        ((50.0, 2.5, 0.0), (73.0, 25.0, -18.0), 27.1492),
        ((50.0, 2.5, 0.0), (61.0, -5.0, 29.0), 22.8977),
        ((50.0, 2.5, 0.0), (56.0, -27.0, -3.0), 31.9030),
        ((50.0, 2.5, 0.0), (58.0, 24.0, 15.0), 19.4535),
    ],
)
def test_the_measure_of_difference_is_the_published_one(one: tuple, two: tuple, wanted: float) -> None:
    assert sight.ciede2000(one, two) == pytest.approx(wanted, abs=5e-5)


@pytest.mark.parametrize("kind", sight.SIGHT)
def test_white_and_black_stay_what_they_are(kind: str) -> None:
    for grey in ("#000000", "#808080", "#ffffff"):
        assert sight.seen(grey, kind) == pytest.approx(sight.linear(grey), abs=1e-5)


@pytest.mark.parametrize("kind", sight.SIGHT)
@pytest.mark.parametrize("group", ["regions", "materials"])
def test_any_two_colours_of_a_group_stay_apart(group: str, kind: str) -> None:
    regions = part_colours(sight.REGIONS)
    assert len(set(regions.values())) == len(sight.REGIONS)
    colours = regions if group == "regions" else dict(zip("12345678", MATERIAL_TONES, strict=True))
    pair, least = min(sight.differences(colours, kind).items(), key=lambda item: item[1])
    assert least >= 10.0, pair


@pytest.mark.parametrize("kind", sight.SIGHT)
@pytest.mark.parametrize("page", sight.GROUNDS)
def test_every_region_stands_out_of_the_page(page: str, kind: str) -> None:
    ground = sight.cielab(sight.seen(sight.GROUNDS[page][0], kind))
    for name, colour in part_colours(sight.REGIONS).items():
        # Regions have dark outlines too, so that less than between neighbours will do.
        assert sight.ciede2000(ground, sight.cielab(sight.seen(colour, kind))) >= 7.5, name


def test_the_picture_can_be_drawn(tmp_path: Path) -> None:
    sight.draw(tmp_path / "sight.png")
    assert 10_000 < (tmp_path / "sight.png").stat().st_size < 200_000
