"""The figures that are to be reached, and how each is measured."""

from __future__ import annotations

import json
import statistics
from collections.abc import Callable, Iterator
from dataclasses import dataclass
from pathlib import Path

from tests.benchmarks.processes import Finished, python, run
from tests.benchmarks.workload import GEOGRAPHIC, Workload, make, make_coast

MEMORY_LIMIT_BYTES = 1.5e9
SMALL_ROWS = 30


@dataclass(frozen=True)
class Sizes:
    """How large the workloads are.

    Attributes
    ----------
    middle, large : int
        Polygons in the two layers; the second is ten times the first in a full run.
    coast : int
        Vertices of the one polygon.
    share : int
        Polygons that the plain script measures; its time is scaled up to ``middle``.
    """

    middle: int = 200_000
    large: int | None = 2_000_000
    coast: int = 2_000_000
    share: int = 20_000


@dataclass(frozen=True)
class Plan:
    """What is measured, where, and how often.

    Attributes
    ----------
    work : Path
        Folder for layers; inputs stay there, outputs are removed.
    sizes : Sizes
        How large the workloads are.
    repeats : int
        Runs of each cheap figure; the least counts for ratios, and the median is printed beside it.
    crs : str
        CRS of the layers.
    """

    work: Path
    sizes: Sizes
    repeats: int = 3
    crs: str = GEOGRAPHIC

    @property
    def output(self) -> Path:
        """File that measured layers go to."""
        return self.work / "measured.gpkg"

    @property
    def copied(self) -> Path:
        """File that copied layers go to."""
        return self.work / "copied.gpkg"

    def workload(self, count: int) -> Workload:
        """Describe a layer of this plan."""
        return Workload(self.work, count, self.crs)


@dataclass(frozen=True)
class Figure:
    """A figure, measured.

    Attributes
    ----------
    name : str
        What was measured.
    measured : float
        Value, in ``unit``.
    unit : str
        ``"x"`` for a ratio, ``"s"``, ``"GB"``.
    targets : tuple of float
        First what is to be reached first, then what is to be reached in the end.
    at_least : bool
        Whether the value is to be at least, not at most, the target.
    note : str
        What the value was made of.
    """

    name: str
    measured: float
    unit: str
    targets: tuple[float, ...]
    at_least: bool = False
    note: str = ""

    @property
    def met(self) -> str:
        """``"yes"``, ``"first"`` where only the first target is met, ``"no"``."""
        met = [self.measured >= target if self.at_least else self.measured <= target for target in self.targets]
        return "yes" if all(met) else "first" if any(met) else "no"


Say = Callable[[str], None]


def measure_figures(plan: Plan, say: Say) -> Iterator[Figure]:
    """Measure the figures one after the other; ``say`` is told what is going on."""
    yield from _start_figures(plan, say)
    say(f"making {plan.sizes.middle:,} polygons, where they are not there yet")
    source = make(plan.workload(plan.sizes.middle))
    say(f"measuring {plan.sizes.middle:,} polygons, {plan.repeats} times")
    timed = [_measure(source, plan.output) for _ in range(plan.repeats)]
    yield from _ratio_figures(plan, say, source, timed)
    say("measuring them once more, memory watched")
    middle = _measure(source, plan.output, watch_memory=True)
    yield _memory_figure(plan.sizes.middle, middle)
    if plan.sizes.large:
        yield from _large_figures(plan, say, middle)
    yield _coast_figure(plan, say)
    for leftover in (plan.output, plan.copied):
        leftover.unlink(missing_ok=True)


def _measure(source: Path, target: Path, *, watch_memory: bool = False) -> Finished:
    command = python("geoshape", "measure", source, target, "--overwrite", "-q")
    return run(command, watch_memory=watch_memory)


def _start_figures(plan: Plan, say: Say) -> Iterator[Figure]:
    say("starting the command line")
    repeats = max(5, plan.repeats)
    runs = [run(python("geoshape", "--help")) for _ in range(repeats)]
    yield Figure("geoshape --help", _least(runs), "s", (0.4,), note=_spread(runs))
    small = make(plan.workload(SMALL_ROWS))
    runs = [_measure(small, plan.output) for _ in range(repeats)]
    yield Figure(f"measure, {SMALL_ROWS} polygons", _least(runs), "s", (2.5,), note=_spread(runs))


def _ratio_figures(plan: Plan, say: Say, source: Path, timed: list[Finished]) -> Iterator[Figure]:
    count = f"{plan.sizes.middle:,} polygons"
    say("copying the measured layer through Arrow")
    copies = []
    for _ in range(plan.repeats):
        plan.copied.unlink(missing_ok=True)
        copies.append(run(python("tests.benchmarks.arrow_copy", plan.output, plan.copied)))
    plan.copied.unlink(missing_ok=True)
    note = f"measure {_spread(timed)}; copy of the output {_spread(copies)}"
    yield Figure(f"measure / Arrow copy, {count}", _least(timed) / _least(copies), "x", (3.0, 1.5), note=note)
    share = min(plan.sizes.share, plan.sizes.middle)
    say(f"measuring {share:,} polygons with the plain script")
    plain = run(python("tests.benchmarks.plain_script", source, plan.copied, share))
    took = json.loads(plain.output.splitlines()[-1])
    worked = took["read_s"] + took["measure_s"] + took["write_s"]
    scaled = plain.seconds - worked + worked * plan.sizes.middle / share
    how = (
        f"{scaled:.1f} s" if share == plan.sizes.middle else f"{scaled:.1f} s, scaled linearly from {share:,} polygons"
    )
    note = f"plain script {how} (start-up not scaled); measure {_least(timed):.1f} s"
    yield Figure(f"plain script / measure, {count}", scaled / _least(timed), "x", (6.0, 15.0), at_least=True, note=note)


def _memory_figure(count: int, finished: Finished) -> Figure:
    name = f"peak memory of all processes, {count:,} polygons"
    return Figure(name, finished.peak_bytes / 1e9, "GB", (MEMORY_LIMIT_BYTES / 1e9,), note="proportional set size")


def _large_figures(plan: Plan, say: Say, middle: Finished) -> Iterator[Figure]:
    count = plan.sizes.large
    say(f"making {count:,} polygons, where they are not there yet")
    source = make(plan.workload(count))
    say(f"measuring {count:,} polygons, memory watched")
    large = _measure(source, plan.output, watch_memory=True)
    yield _memory_figure(count, large)
    ratio = large.peak_bytes / middle.peak_bytes
    note = f"{count:,} against {plan.sizes.middle:,} polygons"
    yield Figure("peak memory, larger / smaller layer", max(ratio, 1.0 / ratio), "x", (1.2,), note=note)
    # 11 for ten times the polygons; in proportion where the layers are others.
    limit = 1.1 * count / plan.sizes.middle
    note = f"{large.seconds:.1f} s against {middle.seconds:.1f} s, both with memory watched"
    yield Figure(
        f"time, {count:,} / {plan.sizes.middle:,} polygons", large.seconds / middle.seconds, "x", (limit,), note=note
    )


def _coast_figure(plan: Plan, say: Say) -> Figure:
    vertices = plan.sizes.coast
    say(f"measuring one polygon of {vertices:,} vertices")
    source = make_coast(plan.work, vertices)
    runs = [_measure(source, plan.output, watch_memory=i == 0) for i in range(min(2, plan.repeats))]
    note = f"{_spread(runs)}; peak memory {runs[0].peak_bytes / 1e9:.2f} GB"
    return Figure(f"one polygon, {vertices:,} vertices", _least(runs), "s", (10.0,), note=note)


def _least(runs: list[Finished]) -> float:
    return min(finished.seconds for finished in runs)


def _spread(runs: list[Finished]) -> str:
    seconds = [finished.seconds for finished in runs]
    if len(seconds) == 1:
        return f"{seconds[0]:.2f} s"
    return f"least {min(seconds):.2f} s, median {statistics.median(seconds):.2f} s of {len(seconds)}"
