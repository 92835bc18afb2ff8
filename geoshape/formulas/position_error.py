"""Standard errors of columns under a given error of position, by simulation."""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np

from geoshape.columns import BIAS_SUFFIX, ERROR_SUFFIX, family_columns, has_bias, has_error, is_axial
from geoshape.formulas.digitising import KeyArray, PositionError, disturbed, median_edge, mixed
from geoshape.formulas.families import FAMILIES, Columns, Shapes
from geoshape.options import MeasureOptions
from geoshape.rings import FloatArray, IntArray, RingBatch

BLOCK_VERTICES = 150_000
"""Vertices of all runs that are measured at a time."""

MIN_RUNS_WITH_VALUE = 2


def feature_keys(seed: int, row: IntArray, part: IntArray) -> KeyArray:
    """Give each feature the key of its random numbers.

    Parameters
    ----------
    seed : int
    row : (n,) int64
        Row of the layer.
    part : (n,) int64
        Number of the part where features are split, else 0.

    Returns
    -------
    (n,) uint64
    """
    start = mixed(np.zeros(len(row), dtype=np.uint64), seed)
    return mixed(mixed(start, row), part)


def error_columns(shapes: Shapes, undisturbed: Columns, key: KeyArray, options: MeasureOptions) -> Columns:
    """Simulate position errors and take standard errors and shifts of the mean.

    Parameters
    ----------
    shapes : Shapes
        Outlines as they are.
    undisturbed : dict of str to (n_features,) float64
        Their columns.
    key : (n_features,) uint64
        From `feature_keys`.
    options : MeasureOptions
        With ``position_error_m``; where ``error_length_m`` is None each feature's own median edge length is taken, on
        the plane, with edges subdivided as they are there.

    Returns
    -------
    dict of str to (n_features,) float64
        Null where the column is null, or where fewer than two runs gave a value.

    Notes
    -----
    The standard error is the standard deviation over the runs, divisor n - 1; the bias is the mean over the runs less
    the undisturbed value. To have a value freed from what digitising added, take the bias from it. Directions have no
    bias; their standard error is the circular standard deviation sqrt(-2 ln R) of the doubled angle, halved (Mardia &
    Jupp 2000, Directional Statistics, sec. 2.3). Runs whose outline crosses itself are measured by the same formulas,
    with signed area; hulls, circles and rectangles of such a run may come out too small.

    Errors are put on the outline as digitised, which has its own already. Where these turn edges about as much as the
    outline itself turns from edge to edge, standard errors of perimeter-based columns come out too wide.
    """
    if options.position_error_m is None:
        raise ValueError("error columns need position_error_m")
    length = median_edge(shapes.batch)
    if options.error_length_m is not None:
        length = np.full_like(length, options.error_length_m)
    chosen = [column for family in options.families for column in family_columns(family, options)]
    sums = {
        column.name: _Sums.like(undisturbed[column.name], is_axial=is_axial(column))
        for column in chosen
        if has_error(column)
    }
    for start, stop in _blocks(shapes.batch.n_vertices, options.error_runs):
        copies = _disturbed_copies(shapes, key, np.arange(start, stop), PositionError(options.position_error_m, length))
        for family in options.families:
            values = FAMILIES[family](copies, options)
            for name in sums.keys() & values.keys():
                sums[name].add(values[name].reshape(stop - start, -1))
    errors = {name + ERROR_SUFFIX: sums[name].standard_error() for name in sums}
    return errors | {column.name + BIAS_SUFFIX: sums[column.name].bias() for column in chosen if has_bias(column)}


def _disturbed_copies(shapes: Shapes, key: KeyArray, runs: IntArray, error: PositionError) -> Shapes:
    n = len(runs)
    run_key = mixed(np.tile(key, n), np.repeat(runs, len(key)))
    by_copy = PositionError(error.sigma_m, np.tile(error.length_m, n))
    return Shapes(
        disturbed(_copies(shapes.batch, n), by_copy, run_key),
        np.tile(shapes.convergence_deg, n),
        np.tile(shapes.edge_count, n),
        # A large error lets outlines cross themselves.
        is_simple=False,
    )


@dataclass(eq=False)
class _Sums:
    """Sums over runs, of differences from the undisturbed value or of doubled angles."""

    centre: FloatArray
    is_axial: bool
    count: FloatArray
    first: FloatArray = field(repr=False)
    second: FloatArray = field(repr=False)

    @classmethod
    def like(cls, centre: FloatArray, *, is_axial: bool) -> _Sums:
        return cls(centre, is_axial, np.zeros(len(centre)), np.zeros(len(centre)), np.zeros(len(centre)))

    def add(self, values: FloatArray) -> None:
        # One run after the other, so that sums do not depend on how many runs a block holds.
        for run in values:
            difference = run - self.centre
            known = np.isfinite(difference)
            difference = np.where(known, difference, 0.0)
            doubled = np.radians(2.0 * difference)
            self.count += known
            self.first += np.where(known, np.cos(doubled), 0.0) if self.is_axial else difference
            self.second += np.sin(doubled) if self.is_axial else difference**2

    def standard_error(self) -> FloatArray:
        n = np.where(self.count >= MIN_RUNS_WITH_VALUE, self.count, np.nan)
        if self.is_axial:
            resultant = np.minimum(np.hypot(self.first, self.second) / n, 1.0)
            return np.asarray(np.degrees(0.5 * np.sqrt(-2.0 * np.log(resultant))))
        return np.asarray(np.sqrt(np.maximum(self.second - self.first**2 / n, 0.0) / (n - 1.0)))

    def bias(self) -> FloatArray:
        n = np.where(self.count >= MIN_RUNS_WITH_VALUE, self.count, np.nan)
        return np.asarray(self.first / n)


def _blocks(n_vertices: int, n_runs: int) -> list[tuple[int, int]]:
    size = max(1, BLOCK_VERTICES // max(n_vertices, 1))
    return [(start, min(start + size, n_runs)) for start in range(0, n_runs, size)]


def _copies(batch: RingBatch, n: int) -> RingBatch:
    """Set ``n`` copies of a batch one behind the other."""
    run = np.arange(n)[:, None]
    return RingBatch(
        x=np.tile(batch.x, n),
        y=np.tile(batch.y, n),
        ring_start=np.append((batch.ring_start[None, :-1] + run * batch.n_vertices).ravel(), n * batch.n_vertices),
        ring_part=(batch.ring_part[None, :] + run * batch.n_parts).ravel(),
        ring_is_hole=np.tile(batch.ring_is_hole, n),
        part_feature=(batch.part_feature[None, :] + run * batch.n_features).ravel(),
        n_features=n * batch.n_features,
        origin=np.tile(batch.origin, (n, 1)),
    )
