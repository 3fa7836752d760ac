"""Times of the main job by pytest-benchmark: ``pytest tests/benchmarks/bench_build.py``. Not in the default run.

``skinmesh build --timings`` gives the same by stage, with peak memory.
"""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import pytest
from pytest_benchmark.fixture import BenchmarkFixture

import skinmesh
from skinmesh.definition.blade import BladeDefinition
from skinmesh.definition.spanwise import constant
from skinmesh.write.registry import FORMATS

EXAMPLE = Path(__file__).parents[2] / "examples" / "marram-24" / "marram-24.yaml"
SIZES = {"20 000": 0.095, "200 000": 0.027}


def example(size: float) -> BladeDefinition:
    blade = skinmesh.load(EXAMPLE)
    return replace(blade, mesh=replace(blade.mesh, size=constant(size)))


@pytest.mark.parametrize("size", SIZES.values(), ids=SIZES)
def test_build(benchmark: BenchmarkFixture, size: float) -> None:
    blade = example(size)
    mesh = benchmark.pedantic(skinmesh.build, args=(blade,), rounds=3, warmup_rounds=1)
    benchmark.extra_info["elements"] = len(mesh.cells)


@pytest.mark.parametrize("name", sorted(FORMATS))
def test_write(benchmark: BenchmarkFixture, tmp_path: Path, name: str) -> None:
    mesh = skinmesh.build(example(SIZES["20 000"]))
    benchmark.pedantic(FORMATS[name].write, args=(mesh, tmp_path / f"mesh.{name}"), rounds=3, warmup_rounds=1)
    benchmark.extra_info["bytes"] = (tmp_path / f"mesh.{name}").stat().st_size
