"""Measure every figure that is to be reached: ``python -m tests.benchmarks --work FOLDER``."""

from __future__ import annotations

import importlib.metadata
import json
import os
import platform
import tempfile
from dataclasses import asdict, replace
from pathlib import Path

import click

from tests.benchmarks.figures import Figure, Plan, Sizes, measure_figures
from tests.benchmarks.processes import CommandFailedError
from tests.benchmarks.workload import GEOGRAPHIC, need_space

QUICK = Sizes(middle=20_000, large=100_000, coast=200_000, share=2_000)
PACKAGES = ("geoshape", "numpy", "shapely", "pyogrio", "pyarrow", "geopandas", "opencv-python-headless")


@click.command()
@click.option(
    "--work",
    type=click.Path(path_type=Path, file_okay=False),
    help="Folder for layers; they stay there for the next run. Left out: a folder that is removed.",
)
@click.option("--quick", is_flag=True, help="Small layers, to see that all of it runs; not judged by the targets.")
@click.option("--skip-2m", is_flag=True, help="Leave the largest layer out.")
@click.option("--full", is_flag=True, help="Let the plain script measure all polygons instead of a share of them.")
@click.option("--crs", default=GEOGRAPHIC, show_default=True, help="CRS of the layers.")
@click.option("--json", "as_json", is_flag=True, help="Print the figures as JSON.")
def main(work: Path | None, quick: bool, skip_2m: bool, full: bool, crs: str, as_json: bool) -> None:
    """Make the workloads, measure every figure in one run, and print it beside its target."""
    sizes = QUICK if quick else Sizes()
    sizes = replace(sizes, large=None if skip_2m else sizes.large, share=sizes.middle if full else sizes.share)
    # Taken before anything runs: other work on the machine makes every time below longer.
    load = f"{os.getloadavg()[0]:.1f} processes were waiting or running before the first figure"
    with tempfile.TemporaryDirectory() as scratch:
        folder = work or Path(scratch)
        folder.mkdir(parents=True, exist_ok=True)
        plan = Plan(folder, sizes, 2 if quick else 3, crs)
        need_space(folder, [plan.workload(count) for count in (sizes.middle, sizes.large) if count])
        figures, failure = _collect(plan)
    about = machine() | {"load": load}
    if as_json:
        found = [asdict(figure) | {"met": None if quick else figure.met} for figure in figures]
        click.echo(json.dumps({"machine": about, "figures": found}))
    else:
        click.echo("\n".join(f"{name:10} {value}" for name, value in about.items()))
        if quick:
            click.echo("small layers: the targets are those of the full ones and are not judged")
        click.echo(table(figures, is_judged=not quick))
    if failure:
        raise click.ClickException(failure)


def _collect(plan: Plan) -> tuple[list[Figure], str]:
    """Measure until the end or the first failure; what was measured before one is not lost."""
    figures = []
    try:
        for figure in measure_figures(plan, lambda line: click.echo(line, err=True)):
            figures.append(figure)
            click.echo(f"  {figure.name}: {figure.measured:.2f} {figure.unit}", err=True)
    except CommandFailedError as error:
        return figures, str(error)
    return figures, ""


def machine() -> dict[str, str]:
    """Describe what the figures were measured on."""
    versions = [f"{name} {importlib.metadata.version(name)}" for name in PACKAGES]
    return {
        "cores": f"{len(os.sched_getaffinity(0)) if hasattr(os, 'sched_getaffinity') else os.cpu_count()}",
        "system": platform.platform(),
        "python": platform.python_version(),
        "packages": ", ".join(versions),
    }


def table(figures: list[Figure], *, is_judged: bool) -> str:
    """Lay figures out in columns."""
    rows = [("figure", "measured", "target", "met", "made of")]
    for figure in figures:
        bound = ">=" if figure.at_least else "<="
        targets = " then ".join(f"{bound} {target:g} {figure.unit}" for target in figure.targets)
        rows.append(
            (
                figure.name,
                f"{figure.measured:.2f} {figure.unit}",
                targets,
                figure.met if is_judged else "-",
                figure.note,
            )
        )
    widths = [max(len(row[i]) for row in rows) for i in range(4)]
    return "\n".join(
        "  ".join([*(cell.ljust(width) for cell, width in zip(row, widths, strict=False)), row[4]]) for row in rows
    )


if __name__ == "__main__":
    main()
