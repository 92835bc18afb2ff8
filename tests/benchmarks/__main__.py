"""Print the figures that geoshape means to reach, each as a ratio or a time measured in this run.

``python -m tests.benchmarks [--work FOLDER] [--quick] [--skip-large] [--plain-rows N]``
"""

from __future__ import annotations

import argparse
import shutil
import statistics
import tempfile
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path

from tests.benchmarks import workload
from tests.benchmarks.watch import Seen, run

GIGABYTE = 1e9
SMALL_RUNS = 5
LARGE_RUNS = 3


@dataclass(frozen=True)
class Figure:
    """A figure with its targets."""

    name: str
    value: float
    unit: str
    first: float
    then: float | None = None
    at_least: bool = False

    def line(self) -> str:
        """Say what was measured and whether the targets are met."""
        sign = ">=" if self.at_least else "<="
        targets = f"{sign} {self.first:g}" + (f", then {self.then:g}" if self.then is not None else "")
        return f"{self.name:<66} {self.value:8.2f} {self.unit:<3} {targets:<16} {self._verdict()}"

    def _verdict(self) -> str:
        def met(target: float) -> bool:
            return self.value >= target if self.at_least else self.value <= target

        if self.then is not None and met(self.then):
            return "met, both"
        return "met" if met(self.first) else "missed"


def median(action: Callable[[], Seen], times: int) -> float:
    """Take the median time of several runs."""
    return statistics.median(action().seconds for _ in range(times))


def measure(source: Path, target: Path, *options: str) -> Seen:
    """Run ``geoshape measure`` in processes of its own."""
    return run("-m", "geoshape", "measure", str(source), str(target), "--overwrite", "-q", *options)


def figures(work: Path, arguments: argparse.Namespace) -> list[Figure]:
    """Measure everything."""
    rows = 20_000 if arguments.quick else 200_000
    more = 5 * rows if arguments.quick else 10 * rows
    plain_rows = min(arguments.plain_rows, rows)
    source, target = workload.layer(work, rows), work / "measured.gpkg"
    found = []
    runs = [measure(source, target) for _ in range(LARGE_RUNS)]
    seconds = statistics.median(seen.seconds for seen in runs)
    copy = median(lambda: run("-m", "tests.benchmarks.bare_copy", str(target), str(work / "copy.gpkg")), LARGE_RUNS)
    print(f"{rows:,} polygons: measure {seconds:.1f} s, bare copy of the output {copy:.1f} s")
    found.append(Figure(f"measure, {rows:,} polygons, against a bare copy", seconds / copy, "x", 3.0, 1.5))
    plain = run("-m", "tests.benchmarks.plain_script", str(source), str(work / "plain.gpkg"), str(plain_rows))
    scaled = plain.seconds * rows / plain_rows
    print(f"plain script: {plain.seconds:.1f} s for {plain_rows:,} polygons, {scaled:.1f} s for all in proportion")
    found.append(
        Figure("plain script, one polygon at a time, against measure", scaled / seconds, "x", 6.0, 15.0, at_least=True)
    )
    peak = max(seen.peak_bytes for seen in runs)
    found.append(Figure(f"peak memory of all processes, {rows:,} polygons", peak / GIGABYTE, "GB", 1.5))
    if not arguments.skip_large:
        (work / "copy.gpkg").unlink(missing_ok=True)
        large = measure(workload.layer(work, more), target)
        print(f"{more:,} polygons: measure {large.seconds:.1f} s")
        found += [
            Figure(f"peak memory of all processes, {more:,} polygons", large.peak_bytes / GIGABYTE, "GB", 1.5),
            Figure("the larger workload's memory against the smaller's", large.peak_bytes / peak, "x", 1.2),
            Figure(f"time of {more:,} against {rows:,}", large.seconds / seconds, "x", 11.0 * more / (10 * rows)),
        ]
    vertices = 200_000 if arguments.quick else 2_000_000
    coast = measure(workload.coast(work, vertices), target)
    found.append(Figure(f"one polygon with {vertices:,} vertices", coast.seconds, "s", 10.0))
    found.append(Figure("geoshape --help", median(lambda: run("-m", "geoshape", "--help"), SMALL_RUNS), "s", 0.4))
    small = workload.layer(work, 30)
    found.append(Figure("measure, 30 polygons", median(lambda: measure(small, target), SMALL_RUNS), "s", 2.5))
    return found


def main() -> None:
    """Parse the arguments, measure, print."""
    parser = argparse.ArgumentParser(prog="python -m tests.benchmarks", description=__doc__)
    parser.add_argument("--work", type=Path, help="folder for workloads and outputs; kept, so that they are made once")
    parser.add_argument("--quick", action="store_true", help="a tenth of the workloads, to see that everything runs")
    parser.add_argument("--skip-large", action="store_true", help="leave out the workload of 2 000 000 polygons")
    parser.add_argument("--plain-rows", type=int, default=20_000, help="rows for the plain script; its time is scaled")
    arguments = parser.parse_args()
    work = arguments.work or Path(tempfile.mkdtemp(prefix="geoshape-benchmarks-"))
    work.mkdir(parents=True, exist_ok=True)
    try:
        lines = [figure.line() for figure in figures(work, arguments)]
    finally:
        if arguments.work is None:
            shutil.rmtree(work)
    print()
    print(f"{'figure':<66} {'measured':>8}     {'target':<16}")
    print("\n".join(lines))


if __name__ == "__main__":
    main()
