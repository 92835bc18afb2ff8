"""Look at a layer before it is measured: what it holds, and what is wrong with it."""

from __future__ import annotations

from collections import Counter
from dataclasses import dataclass, field

import numpy as np
import pyproj
import shapely

from geoshape import geometry
from geoshape.columns import Status
from geoshape.errors import LayerChoiceError
from geoshape.formulas.arclength import edge_lengths
from geoshape.formulas.staircase import is_staircase
from geoshape.geometry import ObjectArray, read_wkb
from geoshape.ground.equal_area import areal_scale, horizontal, layer_grid, plan_ground
from geoshape.ground.layer_crs import resolve_crs
from geoshape.ground.place import Ground, open_ground
from geoshape.layers.layer import LayerInfo, LayerSummary
from geoshape.layers.read import list_layers, open_layer, read_batches
from geoshape.options import GROUND_CENTRED, GROUND_PLANE, Edges, MeasureOptions, Source
from geoshape.rings import FloatArray, IntArray

_LOG_LOW, _LOG_HIGH, _BINS_PER_DECADE = -6.0, 9.0, 200
_N_BINS = round((_LOG_HIGH - _LOG_LOW) * _BINS_PER_DECADE)

MAX_REASONS = 5
"""Kinds of invalidity that a report names."""


@dataclass(frozen=True)
class Spacing:
    """How far vertices stand apart, over all edges of a layer.

    Attributes
    ----------
    fine, middle, coarse : float
        5 %, 50 % and 95 % quantiles of edge length, to about 1 %.
    """

    fine: float
    middle: float
    coarse: float


@dataclass(frozen=True)
class Findings:
    """What a layer holds, and what is wrong with it.

    Attributes
    ----------
    rows : int
        Rows read.
    by_status : dict of str to int
        Rows by what a measurement would make of them; invalid ones count as ``repaired``.
    reasons : dict of str to int
        Invalid geometries by kind, the most frequent first.
    parts, holes, vertices : int
        Sums over the layer.
    multipart_rows, holed_rows : int
        Rows with several parts, and with holes.
    duplicate_rows : int
        Rows whose geometry has been there before.
    staircase_rows : int
        Rows whose outline follows the edges of pixels.
    spacing : Spacing or None
        In metres, or in the layer's units where it has no CRS; None without edges.
    """

    rows: int
    by_status: dict[str, int]
    reasons: dict[str, int]
    parts: int
    holes: int
    vertices: int
    multipart_rows: int
    holed_rows: int
    duplicate_rows: int
    staircase_rows: int
    spacing: Spacing | None


@dataclass(frozen=True)
class CrsVerdict:
    """Whether areas would be right in a layer's own coordinates.

    Attributes
    ----------
    name : str or None
        Of the CRS; None where the layer has none.
    unit : str
        Of the coordinates; empty where it is not known.
    is_geographic : bool
    areal_scale : (float, float) or None
        Least and largest over the layer, 1 where areas are true; None for degrees and without a CRS.
    """

    name: str | None
    unit: str
    is_geographic: bool
    areal_scale: tuple[float, float] | None


@dataclass(frozen=True)
class Inspection:
    """A layer looked at.

    Attributes
    ----------
    path : str
    layers : tuple of LayerSummary
        All layers of the file.
    info : LayerInfo or None
        The layer looked at; None where the file holds several and none was named.
    crs : CrsVerdict or None
    findings : Findings or None
    """

    path: str
    layers: tuple[LayerSummary, ...]
    info: LayerInfo | None
    crs: CrsVerdict | None
    findings: Findings | None


def inspect_file(source: Source, *, assume_crs: str | None = None) -> Inspection:
    """Look at a layer.

    Parameters
    ----------
    source : Source
    assume_crs : str or None
        CRS of a layer that does not say its own.

    Returns
    -------
    Inspection

    Raises
    ------
    ReadError
        The file cannot be read, or has no layer of that name.

    Examples
    --------
    >>> seen = inspect_file(Source(path="tests/data/world_geodesic_area/world.gpkg"))
    >>> seen.findings.rows, seen.findings.parts, seen.crs.is_geographic
    (177, 289, True)
    """
    layers = list_layers(source.path)
    try:
        info = open_layer(source.path, layer=source.layer, where=source.where, bbox=source.bbox)
    except LayerChoiceError:
        if source.layer is not None or not layers:
            raise
        return Inspection(str(source.path), layers, None, None, None)
    options = MeasureOptions(assume_crs=assume_crs)
    crs = resolve_crs(pyproj.CRS(info.crs_wkt) if info.crs_wkt else None, options)
    ground = GROUND_PLANE if crs is None else GROUND_CENTRED
    inspector = Inspector(open_ground(plan_ground(crs, None, MeasureOptions(ground=ground, edges=Edges.PLANE))))
    for batch in read_batches(info):
        inspector.add(*read_wkb(batch.geometry.to_pylist()))
    return Inspection(str(source.path), layers, info, _verdict(crs, info), inspector.findings())


def _verdict(crs: pyproj.CRS | None, info: LayerInfo) -> CrsVerdict:
    if crs is None:
        return CrsVerdict(None, "", is_geographic=False, areal_scale=None)
    own = horizontal(crs)
    unit = own.axis_info[0].unit_name if own.axis_info else ""
    scale = areal_scale(own, layer_grid(own, info.bounds)) if own.is_projected else None
    return CrsVerdict(crs.name, unit, own.is_geographic, scale)


@dataclass(eq=False)
class Inspector:
    """Gathers findings batch by batch; memory grows by eight bytes a row, for duplicates.

    Attributes
    ----------
    ground : Ground
        On which lengths are taken.
    """

    ground: Ground
    _by_status: Counter[str] = field(default_factory=Counter)
    _reasons: Counter[str] = field(default_factory=Counter)
    _totals: Counter[str] = field(default_factory=Counter)
    _prints: list[IntArray] = field(default_factory=list)
    _histogram: IntArray = field(default_factory=lambda: np.zeros(_N_BINS, dtype=np.int64))

    def add(self, geometries: ObjectArray, unreadable: dict[int, str]) -> None:
        """Look at a batch of geometries, as `geometry.read_wkb` gives them."""
        geometries = self.ground.in_degrees(geometries)
        is_geographic = self.ground.plan.is_geographic
        polygons, verdicts = geometry.screen(geometries, unreadable, is_geographic=is_geographic)
        counts = geometry.count(polygons, geometries)
        there = ~shapely.is_missing(polygons)
        broken = np.flatnonzero(there & ~shapely.is_valid(polygons))
        verdicts.status[broken] = Status.REPAIRED
        self._reasons.update(text.partition("[")[0].lower() for text in shapely.is_valid_reason(polygons[broken]))
        self._by_status.update(map(str, verdicts.status))
        self._totals.update(
            rows=len(geometries),
            parts=int(np.nansum(counts.parts)),
            holes=int(np.nansum(counts.holes)),
            vertices=int(np.nansum(counts.vertices)),
            multipart=int(np.count_nonzero(counts.parts > 1)),
            holed=int(np.count_nonzero(counts.holes > 0)),
            staircase=int(np.count_nonzero(is_staircase(geometry.ring_batch(polygons)))),
        )
        self._prints.append(_fingerprints(polygons[there]))
        self._count_edges(polygons)

    def _count_edges(self, polygons: ObjectArray) -> None:
        polygons, frames, _ = self.ground.unwrap(polygons)
        placed = self.ground.place(geometry.ring_batch(polygons), frames)
        lengths = edge_lengths(placed.batch)
        lengths = lengths[np.isfinite(lengths) & (lengths > 0)]
        place = np.floor((np.log10(lengths) - _LOG_LOW) * _BINS_PER_DECADE)
        self._histogram += np.bincount(np.clip(place, 0, _N_BINS - 1).astype(np.int64), minlength=_N_BINS)

    def findings(self) -> Findings:
        """Sum up what has been seen."""
        prints = np.concatenate(self._prints) if self._prints else np.zeros(0, dtype=np.int64)
        totals = self._totals
        return Findings(
            rows=totals["rows"],
            by_status=dict(self._by_status.most_common()),
            reasons=dict(self._reasons.most_common(MAX_REASONS)),
            parts=totals["parts"],
            holes=totals["holes"],
            vertices=totals["vertices"],
            multipart_rows=totals["multipart"],
            holed_rows=totals["holed"],
            duplicate_rows=len(prints) - len(np.unique(prints)),
            staircase_rows=totals["staircase"],
            spacing=_spacing(self._histogram),
        )


def _fingerprints(polygons: ObjectArray) -> IntArray:
    """Hash polygons so that the same outline has the same number, whatever its first vertex and direction."""
    wkb = shapely.to_wkb(shapely.normalize(shapely.force_2d(polygons)))
    return np.array([hash(value) for value in wkb], dtype=np.int64)


def _spacing(histogram: IntArray) -> Spacing | None:
    total = histogram.sum()
    if not total:
        return None
    cumulative = np.cumsum(histogram) / total
    edges: FloatArray = 10.0 ** (_LOG_LOW + (np.searchsorted(cumulative, (0.05, 0.5, 0.95)) + 0.5) / _BINS_PER_DECADE)
    fine, middle, coarse = edges.tolist()
    return Spacing(fine, middle, coarse)
