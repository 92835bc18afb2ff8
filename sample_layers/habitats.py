"""Habitat patches of the invented valley; each class has shapes of its own, for the reason it has them in the field."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np
import shapely
import shapely.ops
import terrain
from river import WIDTH_M, River, channel
from scipy import ndimage
from shapely import LineString, MultiPolygon, Polygon, affinity
from terrain import Grid, fractal_noise, largest_region

LEAST_PART_M2 = 900.0
LEAST_HOLE_M2 = 1_500.0


@dataclass(frozen=True, eq=False)
class Patch:
    """A habitat patch."""

    habitat: str
    shape: Polygon | MultiPolygon


class Cover:
    """Ground that is taken by water, the town and patches mapped before."""

    def __init__(self, *taken: shapely.Geometry) -> None:
        self.taken = shapely.union_all(list(taken))

    def map(self, habitat: str, shape: shapely.Geometry, gap: float) -> Patch | None:
        """Map what is left of a shape, unless too little is."""
        rest = shape.difference(shapely.buffer(self.taken.intersection(shapely.buffer(shape, 100.0)), gap))
        # An opening takes off the threads that cutting leaves.
        opened = shapely.buffer(shapely.buffer(rest, -2.0, join_style="mitre"), 2.0, join_style="mitre")
        parts = [part for part in shapely.get_parts(opened) if part.area > LEAST_PART_M2]
        if not parts or sum(part.area for part in parts) < 0.55 * shape.area:
            return None
        whole = parts[0] if len(parts) == 1 else MultiPolygon(parts)
        self.taken = shapely.union(self.taken, whole)
        return Patch(habitat, whole)


def wet_meadows(rng: np.random.Generator, river: River, cover: Cover, count: int) -> Iterator[Patch]:
    """Map ribbons along the river: one bank is the river's, the other is where the ground rises."""
    at, made = 250.0, 0
    end = river.course.length
    while at < end and made < count:
        length = float(np.exp(rng.normal(np.log(560.0), 0.45)))
        reach = shapely.ops.substring(river.course, at, min(at + length, end))
        at += length + float(rng.exponential(330.0)) + 40.0
        if reach.length < 120.0 or not 0.0 < reach.centroid.x < terrain.WIDTH_M - 700.0:
            continue
        strip = _strip(rng, reach)
        banks = shapely.get_parts(strip.difference(channel(river.course, WIDTH_M + 5.0))).tolist()
        banks.sort(key=lambda part: -part.area)
        kept = MultiPolygon(banks[:2]) if rng.random() < 0.3 and len(banks) > 1 else banks[0]
        patch = cover.map("wet meadow", kept, 0.5)
        if patch is not None:
            made += 1
            yield patch


def _strip(rng: np.random.Generator, line: LineString) -> shapely.Geometry:
    """Give a line a width that changes smoothly along it and goes to nothing at its ends."""
    n = max(int(line.length / 10.0), 8)
    share = np.linspace(0.0, 1.0, n)
    wave = np.convolve(rng.normal(0.0, 1.0, n + 24), np.hanning(25), mode="valid") / 3.0
    fade = np.minimum(1.0, np.minimum(share, 1.0 - share) * line.length / 90.0) ** 0.6
    half = np.minimum(np.exp(np.log(rng.uniform(34.0, 78.0)) + 0.25 * wave), 112.0) * fade + 8.0
    dots = shapely.buffer(shapely.line_interpolate_point(line, share * line.length), half, quad_segs=6)
    links = shapely.convex_hull(shapely.union(dots[:-1], dots[1:]))
    return shapely.simplify(shapely.union_all(links), 1.2)


def woodlands(rng: np.random.Generator, ground: Grid, cover: Cover, count: int) -> Iterator[Patch]:
    """Map remnants between fields: one to five fields that were never cleared, with their straight bounds."""
    made = 0
    while made < count:
        x, y = rng.uniform(700.0, terrain.WIDTH_M - 700.0), rng.uniform(700.0, terrain.HEIGHT_M - 700.0)
        height = float(ground.at(np.array([x]), np.array([y]))[0])
        if height > 455.0 or _slope(ground, x, y) > 0.16:
            continue
        size = float(np.exp(rng.normal(np.log(400.0), 0.32)))
        fields = _fields(rng, shapely.box(-size, -size, size, size), size * size / 6.0)
        start = min(fields, key=lambda field: field.centroid.distance(shapely.Point(0, 0)))
        wood = [start]
        for _ in range(int(rng.integers(0, 5))):
            beside = [f for f in fields if f not in wood and _share_side(f, wood)]
            if beside:
                wood.append(beside[int(rng.integers(len(beside)))])
        turn = 72.0 + float(rng.normal(0.0, 14.0))
        # A closing takes out the hair's breadth that may lie between fields cut one after the other.
        joined = shapely.buffer(
            shapely.buffer(shapely.union_all(wood), 1.0, join_style="mitre"), -1.0, join_style="mitre"
        )
        shape = affinity.translate(affinity.rotate(joined, turn, origin=(0, 0)), x, y)
        patch = cover.map("woodland", _worn(rng, shape), 6.0)
        if patch is not None:
            made += 1
            yield patch


def _share_side(field: Polygon, wood: list[Polygon]) -> bool:
    return any(field.intersection(other).length > 25.0 for other in wood)


def _fields(rng: np.random.Generator, land: Polygon, largest: float) -> list[Polygon]:
    """Divide land again and again, across its longer side and a little askew."""
    if land.area < largest * rng.uniform(0.6, 1.6):
        return [land]
    west, south, east, north = land.bounds
    share, skew, far = rng.uniform(0.33, 0.67), rng.normal(0.0, 0.05), 3.0 * (east - west + north - south)
    if east - west > north - south:
        x = west + share * (east - west)
        line = LineString([(x - skew * far, south - far), (x + skew * far, north + far)])
    else:
        y = south + share * (north - south)
        line = LineString([(west - far, y - skew * far), (east + far, y + skew * far)])
    halves = shapely.get_parts(shapely.ops.split(land, line))
    return [field for half in halves for field in _fields(rng, half, largest)]


def _worn(rng: np.random.Generator, shape: Polygon) -> Polygon:
    """Let the edge of a wood wander by a crown's width, corners kept."""
    points = shapely.get_coordinates(shapely.segmentize(shapely.get_exterior_ring(shape), 38.0))[:-1]
    rough = np.convolve(rng.normal(0.0, 1.0, len(points) + 2), (0.3, 0.6, 0.3), mode="valid")
    ahead, behind = np.roll(points, -1, axis=0), np.roll(points, 1, axis=0)
    side = ahead - behind
    normal = np.column_stack((-side[:, 1], side[:, 0])) / np.maximum(np.hypot(*side.T), 1.0)[:, None]
    worn = shapely.make_valid(Polygon(points + normal * 2.4 * rough[:, None]))
    return max(shapely.get_parts(worn).tolist(), key=lambda part: part.area)


def _slope(ground: Grid, x: float, y: float) -> float:
    step = 60.0
    east, west, north, south = ground.at(np.array([x + step, x - step, x, x]), np.array([y, y, y + step, y - step]))
    return float(np.hypot(east - west, north - south) / (2.0 * step))


def heaths(rng: np.random.Generator, ground: Grid, cover: Cover, count: int) -> Iterator[Patch]:
    """Map lobed heaths on the open heights, with hollows left out and outliers beside them."""
    shape = ground.heights.shape
    patchy = fractal_noise(rng, shape, ground.cell, 2_600.0, hurst=0.62, stretch=1.3)
    height = ndimage.gaussian_filter(ground.heights, 6.0)
    field = patchy - 3.0 * terrain.steps_up((560.0 - height) / 90.0)
    yield from _regions(rng, Grid(0.0, 0.0, ground.cell, field), cover, "heath", count)


def scrubs(rng: np.random.Generator, ground: Grid, cover: Cover, count: int) -> Iterator[Patch]:
    """Map ragged scrub on the valley sides."""
    shape = ground.heights.shape
    patchy = fractal_noise(rng, shape, ground.cell, 900.0, hurst=0.34, stretch=2.2)
    smooth = ndimage.gaussian_filter(ground.heights, 4.0)
    slope = np.hypot(*np.gradient(smooth, ground.cell))
    field = patchy - 3.0 * terrain.steps_up((0.13 - slope) / 0.07)
    yield from _regions(rng, Grid(0.0, 0.0, ground.cell, field), cover, "scrub", count)


def _regions(rng: np.random.Generator, field: Grid, cover: Cover, habitat: str, count: int) -> Iterator[Patch]:
    """Map some of the regions where a field is high; pieces that almost touch are one patch."""
    level = float(np.quantile(field.heights, 0.93))
    high = field.heights > level
    near = ndimage.binary_dilation(high, iterations=1) if habitat == "heath" else high
    labels, _ = ndimage.label(near)
    boxes = ndimage.find_objects(labels)
    cells = np.bincount(labels[high], minlength=len(boxes) + 1)[1:]
    fit = np.flatnonzero((cells * field.cell**2 > 14_000.0) & (cells * field.cell**2 < 1_300_000.0)) + 1
    made = 0
    for label in rng.permutation(fit):
        rows, columns = boxes[label - 1]
        if min(rows.start, columns.start) < 3 or rows.stop > high.shape[0] - 3 or columns.stop > high.shape[1] - 3:
            continue
        shape = _outline(rng, field, level, labels == label, (rows, columns))
        patch = cover.map(habitat, shape, 5.0)
        if patch is not None:
            yield patch
            made += 1
            if made == count:
                return


def _outline(
    rng: np.random.Generator, field: Grid, level: float, own: np.ndarray, box: tuple[slice, slice]
) -> shapely.Geometry:
    """Draw the pieces of one region, with the detail that the field's cells cannot carry."""
    rows, columns = (slice(side.start - 2, side.stop + 2) for side in box)
    # Low ground inside, as water has it: the field upside down, and everything foreign above the level.
    heights = np.where(own[rows, columns], -field.heights[rows, columns], np.abs(level) + 1.0)
    west, south = columns.start * field.cell, rows.start * field.cell
    factor = 2
    at = np.meshgrid(*(np.arange((n - 1) * factor + 1) / factor for n in heights.shape), indexing="ij")
    fine = ndimage.map_coordinates(np.minimum(heights, -level + 0.6), at, order=1)
    fine += 0.10 * fractal_noise(rng, fine.shape, field.cell / factor, 120.0, hurst=0.6)
    labels, count = ndimage.label(fine < -level)
    pieces = []
    for piece in range(1, count + 1):
        alone = np.where(labels == piece, fine, np.maximum(fine, -level + 0.05))
        if (labels == piece).sum() * (field.cell / factor) ** 2 > LEAST_PART_M2:
            grid = Grid(west, south, field.cell / factor, alone)
            pieces.append(shapely.simplify(largest_region(grid, -level, LEAST_HOLE_M2), 2.5))
    pieces.sort(key=lambda piece: -piece.area)
    kept = [piece for piece in pieces if piece.area > 0.06 * pieces[0].area]
    return shapely.union_all(kept)
