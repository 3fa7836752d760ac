"""The whole sweep: what is done already, what is left to do, and every result put on disk as it comes."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from skinmesh.errors import InputError, Problem
from skinmesh.sweep.crew import Job, open_crew, require_sweep_libraries
from skinmesh.sweep.paths import RefusedError
from skinmesh.sweep.plan import BladeTexts, SweepPlan, Variant
from skinmesh.sweep.records import Records, open_records, variant_key
from skinmesh.sweep.table import ResultTable, csv_text, result_table, write_parquet
from skinmesh.sweep.texts import blade_texts, variant_blade
from skinmesh.sweep.variant import FAILED, Outcome, build_base, run_variant
from skinmesh.write.placing import new_file

Progress = Callable[[int, int], None]


@dataclass(frozen=True, eq=False)
class Sweep:
    """A finished sweep.

    Attributes
    ----------
    plan : SweepPlan
    table : ResultTable
    n_before : int
        Variants that an earlier run had done.
    n_now : int
        Blades that were built now; variants that are the same blade are built once.
    """

    plan: SweepPlan
    table: ResultTable
    n_before: int
    n_now: int


def run_sweep(
    plan: SweepPlan,
    directory: Path,
    *,
    workers: int | None = None,
    scheduler: str | None = None,
    progress: Progress | None = None,
) -> Sweep:
    """Build and measure every variant that has no result yet, and write the table.

    Every result is on disk before the next is asked for: a run that is stopped, by whatever, goes on from there when it
    is started again with the same directory.

    Parameters
    ----------
    plan : SweepPlan
    directory : Path
    workers : int, optional
        Processes on this machine; by default one a processor.
    scheduler : str, optional
        Address of a scheduler that runs already, in place of this machine.
    progress : callable, optional
        Called with the number of blades done and of all, first with those done before.

    Returns
    -------
    Sweep

    Raises
    ------
    InputError
        The base blade cannot be built, or the scheduler is of no use.
    OutputError
        The directory cannot be written, or another sweep is at work in it.
    MissingExtra
        A library of the extra ``sweep`` is not installed.
    """
    require_sweep_libraries()
    tell = progress or _silent
    base = blade_texts(plan.base) if plan.order.keep else None
    with open_records(directory) as records:
        keys, refused = _keys(plan, base)
        first: dict[str, Variant] = {}
        for variant in plan.variants:
            first.setdefault(keys[variant.number], variant)
        outcomes = {key: found for key in first if (found := records.read(key)) is not None and found.is_final}
        n_before = sum(keys[variant.number] in outcomes for variant in plan.variants)
        for key in [key for key in first if key not in outcomes and key in refused]:
            outcomes[key] = Outcome(FAILED, refused[key])
        left = {key: variant for key, variant in first.items() if key not in outcomes}
        tell(len(first) - len(left), len(first))
        if left:
            with open_crew(workers=workers, scheduler=scheduler) as crew:
                mesh = None if base is None else crew.shared(build_base, base)
                if mesh is not None:
                    _refuse_base(plan, mesh)
                for key, outcome in crew.outcomes(run_variant, _jobs(plan, left, mesh)):
                    if outcome.is_final:
                        records.add(key, outcome, about=_about(plan, left[key]))
                    outcomes[key] = outcome
                    tell(len(outcomes), len(first))
        results = [(variant, keys[variant.number], outcomes[keys[variant.number]]) for variant in plan.variants]
        table = result_table(plan, results)
        _write_tables(table, records, plan.stem)
    return Sweep(plan, table, n_before, len(left))


def _keys(plan: SweepPlan, base: BladeTexts | None) -> tuple[dict[int, str], dict[str, str]]:
    """Key of every variant by its number, and why one cannot be written out, by its key."""
    keys: dict[int, str] = {}
    refused: dict[str, str] = {}
    for variant in plan.variants:
        try:
            keys[variant.number] = variant_key(_texts(plan, variant), base, plan.order)
        except RefusedError as error:
            keys[variant.number] = f"refused-{variant.number}"
            refused[keys[variant.number]] = str(error)
    return keys, refused


def _texts(plan: SweepPlan, variant: Variant) -> BladeTexts:
    return blade_texts(variant_blade(plan.base, plan.changes, variant.values))


def _refuse_base(plan: SweepPlan, mesh: Any) -> None:
    """Stop where the base blade cannot be built: no variant could keep its numbers."""
    found = mesh.result()
    if isinstance(found, str):
        raise InputError([Problem(plan.base.file, 0, "", f"the base blade cannot be built: {found}")])


def _jobs(plan: SweepPlan, left: Mapping[str, Variant], mesh: Any) -> Iterator[Job]:
    for key, variant in left.items():
        of_mesh = [change.name for change in plan.changes if change.is_of_mesh_rule and change.name in variant.values]
        because = "" if plan.order.keep else "the sweep file asks for new numbers"
        if of_mesh:
            because = f"the divisions change with {', '.join(of_mesh)}"
        yield key, (_texts(plan, variant), None if of_mesh else mesh, plan.order, because)


def _about(plan: SweepPlan, variant: Variant) -> dict[str, Any]:
    return {"sweep": plan.title, "blade": plan.base.title, "variant": variant.number, "changes": dict(variant.values)}


def _write_tables(table: ResultTable, records: Records, stem: str) -> None:
    with new_file(records.directory / f"{stem}.csv") as unfinished:
        unfinished.write_text(csv_text(table), encoding="utf-8", newline="\n")
    with new_file(records.directory / f"{stem}.parquet") as unfinished:
        write_parquet(table, unfinished)


def _silent(done: int, in_all: int) -> None:
    """Progress that nobody wants to hear of."""
