"""Lakes of the invented valley in two surveys: each is flooded from the ground, at the water level of its survey."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np
import shapely
import terrain
from river import MAIN_AXIS, River, channel, in_valley, oxbow
from scipy import ndimage, spatial
from shapely import Polygon
from terrain import Grid, filled, flood, fractal_noise, refined, smooth_line, stations

GAP_M = 40.0
"""Least distance between two lakes."""

Seed = tuple[float, float]


@dataclass(frozen=True, eq=False)
class Lake:
    """A lake as one survey found it."""

    kind: str
    outline: Polygon
    level_m: float
    depth_m: float


@dataclass(frozen=True, eq=False)
class Story:
    """What stood in one hollow at the earlier and at the later survey; the first lake of each is the same lake."""

    earlier: tuple[Lake, ...]
    later: tuple[Lake, ...]


class Shore:
    """Ground that lakes already cover."""

    def __init__(self, *taken: shapely.Geometry) -> None:
        self.taken = shapely.union_all(list(taken))

    def is_free(self, *lakes: Lake, gap: float = GAP_M) -> bool:
        """Tell whether lakes keep their distance from all others."""
        return all(lake.outline.distance(self.taken) > gap for lake in lakes)

    def take(self, story: Story) -> None:
        """Enter the lakes of a story."""
        self.taken = shapely.union_all([self.taken, *(lake.outline for lake in (*story.earlier, *story.later))])


def lake_at(kind: str, grid: Grid, level: float, seed: Seed) -> Lake | None:
    """Flood the ground around a seed; its depth is that of the ground below."""
    least_island = max(60.0, 6.0 * grid.cell**2)
    outline = flood(grid, level, seed, least_island)
    if outline is None:
        return None
    # Digitised at the detail the ground has: points where the shore turns, not one every cell.
    outline = shapely.simplify(outline, 0.22 * grid.cell)
    inside = terrain.water_cells(grid, level, seed)
    return Lake(kind, outline, level, level - float(grid.heights[inside].min()))


def lakes_at(kind: str, grid: Grid, level: float, seeds: tuple[Seed, ...]) -> tuple[Lake, ...] | None:
    """Flood the ground around several seeds; None where one of them is dry or open."""
    lakes = tuple(lake_at(kind, grid, level, seed) for seed in seeds)
    return lakes if all(lakes) else None


def unchanged(kind: str, grid: Grid, level: float, fall: float, seed: Seed) -> Story | None:
    """Tell of a lake whose level differed by ``fall`` metres at the earlier survey."""
    later = lake_at(kind, grid, level, seed)
    for _ in range(4):
        earlier = lake_at(kind, grid, level - fall, seed)
        if later and earlier and 0.8 < earlier.outline.area / later.outline.area < 1.25:
            return Story((earlier,), (later,))
        # Another hollow was joined or lost; stay with this one.
        fall /= 2.0
    return None


def troughs(rng: np.random.Generator, ground: Grid) -> Iterator[Story]:
    """Flood the large lake and the lakes of the hanging valleys."""
    at = (
        np.interp(9_000.0, stations(MAIN_AXIS), MAIN_AXIS[:, 0]),
        np.interp(9_000.0, stations(MAIN_AXIS), MAIN_AXIS[:, 1]),
    )
    yield _deepest_story(
        "trough", refined(ground, (0, 7_000, 17_000, 18_500), 2, rng, 1.2), terrain.LAKE_LEVEL_M, 0.4, at
    )
    for corners, level, (begin, end), _ in terrain.SIDE_TROUGHS:
        line = smooth_line(corners)
        near = line[int((begin + end) / 2 * len(line))]
        south, north = np.clip((near[1] - 3_800, near[1] + 3_800), 0, terrain.HEIGHT_M - 50)
        west, east = np.clip((near[0] - 3_800, near[0] + 3_800), 0, terrain.WIDTH_M - 50)
        yield _deepest_story(
            "trough", refined(ground, (west, south, east, north), 3, rng, 1.0), level, 0.3, tuple(near)
        )


def _deepest_story(kind: str, grid: Grid, level: float, fall: float, near: Seed) -> Story:
    """Tell of the lake in the deepest place within 600 m; a level too high for its sill is lowered."""
    row, column = grid.node(*near)
    reach = int(600.0 / grid.cell)
    top, left = max(row - reach, 0), max(column - reach, 0)
    part = grid.heights[top : row + reach, left : column + reach]
    r, c = np.unravel_index(int(part.argmin()), part.shape)
    seed = (grid.west + (left + c) * grid.cell, grid.south + (top + r) * grid.cell)
    for lower in np.arange(0.0, 60.0, 1.0):
        story = unchanged(kind, grid, level - lower, fall, seed)
        if story is not None:
            return story
    raise ValueError(f"no lake of {kind} at {near}; the ground there is open down to {level - 60.0} m")


@dataclass(frozen=True)
class Hollow:
    """A hollow of the ground: its deepest place, the level at which it spills, its area then."""

    seed: Seed
    floor_m: float
    spill_m: float
    area_m2: float
    box: tuple[float, float, float, float]


def hollows(ground: Grid) -> list[Hollow]:
    """Find the hollows of the hills, largest first."""
    stride = 2
    heights = ground.heights[::stride, ::stride]
    spill = filled(heights)
    labels, _ = ndimage.label(spill > heights + 1.0)
    cell = ground.cell * stride
    found = []
    for label, (rows, columns) in enumerate(ndimage.find_objects(labels), start=1):
        own = labels[rows, columns] == label
        depth = np.where(own, heights[rows, columns], np.inf)
        r, c = np.unravel_index(int(depth.argmin()), depth.shape)
        seed = ((columns.start + c) * cell, (rows.start + r) * cell)
        level = float(spill[rows, columns][own].min())
        box = (columns.start * cell - 300, rows.start * cell - 300, columns.stop * cell + 300, rows.stop * cell + 300)
        found.append(Hollow(seed, float(depth.min()), level, own.sum() * cell**2, box))
    return sorted((h for h in found if h.area_m2 > 20_000.0), key=lambda h: -h.area_m2)


def _window(rng: np.random.Generator, ground: Grid, hollow: Hollow, area: float) -> Grid:
    """Cut out a hollow, or as much of it as a lake of an area can need, in cells that suit that area."""
    reach = 4.0 * np.sqrt(area) + 400.0
    x, y = hollow.seed
    low = max(hollow.box[0], x - reach, 0), max(hollow.box[1], y - reach, 0)
    high = min(hollow.box[2], x + reach, terrain.WIDTH_M - 50), min(hollow.box[3], y + reach, terrain.HEIGHT_M - 50)
    factor = int(np.clip(np.round(ground.cell / (np.sqrt(area) / 55.0)), 2, 7))
    return refined(ground, (*low, *high), factor, rng, 0.9)


def tarns(rng: np.random.Generator, ground: Grid, shore: Shore, areas: np.ndarray) -> Iterator[Story]:
    """Flood hollows of the hills up to lakes of given areas."""
    places = hollows(ground)
    for area in np.sort(areas)[::-1]:
        fit = [h for h in places if h.area_m2 > 1.1 * area and h.area_m2 < 40.0 * area]
        for i in rng.permutation(len(fit)):
            grid = _window(rng, ground, fit[i], area)
            level = _level_for(grid, fit[i], area)
            story = level and unchanged("tarn", grid, level, float(rng.normal(0.1, 0.35)), fit[i].seed)
            if story and shore.is_free(*story.earlier, *story.later, gap=150.0):
                places.remove(fit[i])
                shore.take(story)
                yield story
                break


def _level_for(grid: Grid, hollow: Hollow, area: float) -> float | None:
    """Find the level at which a lake has an area, by halving."""
    low, high = hollow.floor_m, hollow.spill_m + 1.0
    for _ in range(12):
        level = (low + high) / 2.0
        cells = terrain.water_cells(grid, level, hollow.seed)
        if cells is None and level <= grid.heights[grid.node(*hollow.seed)]:
            low = level
        elif cells is None or cells.sum() * grid.cell**2 > area:
            high = level
        else:
            low = level
    cells = terrain.water_cells(grid, low, hollow.seed)
    return low if cells is not None and 0.7 * area < cells.sum() * grid.cell**2 < 1.3 * area else None


def joined(rng: np.random.Generator, ground: Grid, shore: Shore, *, rising: bool) -> Story:
    """Find two lakes with a low sill between them, and let the water rise over it or fall below it."""
    for hollow in hollows(ground):
        if not 250_000.0 < hollow.area_m2 < 6_000_000.0:
            continue
        grid = _window(rng, ground, hollow, 0.3 * hollow.area_m2)
        twin = _twin(grid, hollow)
        if twin is None:
            continue
        level, seeds = twin
        one, two = lakes_at("tarn", grid, level + 1.2, seeds[:1]), lakes_at("tarn", grid, level - 0.9, seeds)
        if not one or not two or one[0].outline.area > 2.5 * sum(lake.outline.area for lake in two):
            continue
        if two[0].outline.distance(two[1].outline) > 12.0 and shore.is_free(*one, *two, gap=150.0):
            story = Story(two, one) if rising else Story(one, two)
            shore.take(story)
            return story
    raise ValueError("no two lakes lie side by side; choose another seed for the ground")


def _twin(grid: Grid, hollow: Hollow) -> tuple[float, tuple[Seed, Seed]] | None:
    """Find the level at which a lake falls into two of fair size, and the deepest place of each, larger first."""
    for level in np.arange(hollow.spill_m - 1.5, hollow.floor_m + 3.0, -0.5):
        cells = terrain.water_cells(grid, level, hollow.seed)
        if cells is None:
            continue
        lower, count = ndimage.label(cells & (grid.heights < level - 0.5), structure=np.ones((3, 3)))
        sizes = np.bincount(lower.ravel(), minlength=count + 1)[1:] * grid.cell**2
        if count < 2 or np.sort(sizes)[-2] < 30_000.0 or np.sort(sizes)[-2] < 0.25 * sizes.max():
            continue
        seeds = []
        for label in np.argsort(-sizes)[:2] + 1:
            depth = np.where(lower == label, grid.heights, np.inf)
            r, c = np.unravel_index(int(depth.argmin()), depth.shape)
            seeds.append((grid.west + c * grid.cell, grid.south + r * grid.cell))
        return float(level), (seeds[0], seeds[1])
    return None


def kettles(rng: np.random.Generator, shore: Shore, count: int) -> Iterator[Story]:
    """Scatter kettle ponds in swarms over the outwash below the large lake's moraine."""
    swarms = in_valley(np.array([(18_300.0, 1_350.0), (20_600.0, -1_500.0), (22_300.0, 1_750.0), (28_600.0, -1_350.0)]))
    made = 0
    while made < count:
        swarm = swarms[int(rng.integers(len(swarms)))]
        x, y = np.round(swarm + rng.normal(0.0, 430.0, 2), 1)
        radius = float(np.exp(rng.normal(np.log(75.0), 0.38)))
        story = _kettle(rng, (float(x), float(y)), radius)
        if story and shore.is_free(*story.earlier, *story.later, gap=25.0):
            shore.take(story)
            made += 1
            yield story


def _kettle(rng: np.random.Generator, centre: Seed, radius: float) -> Story | None:
    """Melt a block of ice, or two that touched, out of the outwash."""
    cell = max(radius / 22.0, 2.0)
    n = int(5.0 * radius / cell) | 1
    y, x = np.meshgrid(*2 * ((np.arange(n) - n // 2) * cell,), indexing="ij")
    depth = 0.16 * radius * rng.uniform(0.8, 1.3)
    heights = np.full((n, n), 0.22 * depth)
    for size in (1.0, rng.uniform(0.45, 0.8))[: 1 + int(rng.random() < 0.4)]:
        dx, dy = rng.normal(0.0, 0.55 * radius, 2) if size < 1.0 else (0.0, 0.0)
        turn, stretch = rng.uniform(0, np.pi), rng.uniform(1.0, 1.35)
        u = ((x - dx) * np.cos(turn) + (y - dy) * np.sin(turn)) / stretch
        v = ((y - dy) * np.cos(turn) - (x - dx) * np.sin(turn)) * stretch
        heights = np.minimum(heights, depth * ((np.hypot(u, v) / (size * radius)) ** 1.7 - 1.0) * size)
    heights = np.minimum(heights, 0.22 * depth) + 0.14 * depth * fractal_noise(
        rng, (n, n), cell, 1.6 * radius, hurst=0.65
    )
    base = float(np.round(345.0 - 0.0015 * centre[0] + rng.normal(0.0, 1.5), 1))
    grid = Grid(centre[0] - n // 2 * cell, centre[1] - n // 2 * cell, cell, base + heights)
    return unchanged("kettle", grid, base, float(rng.normal(0.0, 0.04 * depth)), centre)


@dataclass(frozen=True)
class Dam:
    """A dam: its middle, the direction of the valley above it, levels, and how much water it holds back."""

    foot: Seed
    heading_deg: float
    length_m: float
    channel_m: float
    level_m: float
    earlier_m: float


def reservoir(rng: np.random.Generator, dam: Dam) -> Story:
    """Flood a valley with branches, up to a dam as straight as a dam."""
    grid, seed = _branched_valley(rng, dam)
    later, earlier = lake_at("reservoir", grid, dam.level_m, seed), lake_at("reservoir", grid, dam.earlier_m, seed)
    if later is None or (earlier is None and dam.earlier_m > dam.channel_m):
        raise ValueError(f"the reservoir at {dam.foot} leaks; choose another seed for it")
    return Story((earlier,) if earlier else (), (later,))


def _branched_valley(rng: np.random.Generator, dam: Dam) -> tuple[Grid, Seed]:
    lines: list[np.ndarray] = []
    _branch(rng, lines, (*dam.foot, dam.channel_m), dam.heading_deg, dam.length_m, 0)
    bed = np.vstack(lines)
    cell = dam.length_m / 450.0
    low, high = bed[:, :2].min(axis=0) - 500.0, bed[:, :2].max(axis=0) + 500.0
    columns, rows = np.arange(low[0], high[0], cell), np.arange(low[1], high[1], cell)
    y, x = np.meshgrid(rows, columns, indexing="ij")
    distance, nearest = spatial.cKDTree(bed[:, :2]).query(np.column_stack((x.ravel(), y.ravel())), k=6)
    rise = bed[nearest, 2] + 0.15 * distance
    noise = fractal_noise(rng, x.shape, cell, 700.0, hurst=0.7)
    heights = rise.min(axis=1).reshape(x.shape) + 3.2 * noise
    direction = np.array([np.cos(np.radians(dam.heading_deg)), np.sin(np.radians(dam.heading_deg))])
    upstream = (x - dam.foot[0]) * direction[0] + (y - dam.foot[1]) * direction[1]
    crest = 0.035 * dam.length_m
    heights = np.maximum(heights, dam.level_m + 0.3 * (crest - upstream))
    # Deepest at the foot of the dam, where every level that the survey finds has water.
    seed = np.array(dam.foot) + 2.6 * crest * direction
    nearest_bed = bed[spatial.cKDTree(bed[:, :2]).query(seed)[1], :2]
    return Grid(float(low[0]), float(low[1]), cell, heights), (float(nearest_bed[0]), float(nearest_bed[1]))


def _branch(
    rng: np.random.Generator,
    lines: list[np.ndarray],
    start: tuple[float, float, float],
    heading: float,
    length: float,
    order: int,
) -> None:
    """Draw a stream from its mouth up, and the streams that join it, alternately left and right."""
    step = 25.0
    n = max(int(length / step), 4)
    bends = np.convolve(rng.normal(0.0, 0.05, n + 8), np.hanning(9), mode="valid")
    headings = np.radians(heading) + np.cumsum(bends - 0.02 * np.cumsum(bends))
    course = np.cumsum(step * np.column_stack((np.cos(headings), np.sin(headings))), axis=0) + start[:2]
    share = np.arange(1, n + 1) / n
    bed = start[2] + length * (0.0066 + 0.008 * order) * share**1.5
    others = np.vstack([line[:, :2] for line in lines]) if lines else np.full((1, 2), np.inf)
    if order and spatial.cKDTree(others).query(course[7:])[0].min(initial=np.inf) < 115.0:
        return
    lines.append(np.column_stack((course, bed)))
    if order == 3 or length < 500.0:
        return
    side = rng.choice([-1.0, 1.0])
    mouths = np.arange(0.14, 0.9, 0.15 + 0.05 * order)
    for at in mouths + rng.uniform(-0.04, 0.04, len(mouths)):
        i = int(at * n)
        turn = np.degrees(headings[i]) + side * rng.uniform(48.0, 78.0)
        reach = length * (1.0 - 0.7 * at) * rng.uniform(0.32, 0.6)
        _branch(rng, lines, (*course[i], float(bed[i])), turn, reach, order + 1)
        side = -side


def oxbows(rng: np.random.Generator, river: River, shore: Shore, town: Polygon, count: int) -> Iterator[Story]:
    """Draw the lakes in the loops that the river cut off last, clear of its course."""
    kept = shapely.union_all([channel(river.course, 62.0), town])
    made = 0
    for loop in reversed(river.loops):
        if made == count:
            return
        shape = oxbow(rng, loop, float(rng.uniform(0.62, 0.86)))
        level = float(np.round(334.0 - 0.0012 * (shape.centroid.x - 15_000.0), 1))
        lake = Lake("oxbow", shape, level, float(rng.uniform(1.2, 3.4)))
        inside = shape.centroid.x < terrain.WIDTH_M - 600.0
        if inside and shape.area > 8_000.0 and shape.distance(kept) > 0.0 and shore.is_free(lake, gap=20.0):
            # It silts up from its ends: earlier it was longer.
            longer = oxbow(rng, loop, 0.9)
            before = Lake("oxbow", longer if longer.distance(kept) > 0.0 else shape, level, lake.depth_m + 0.4)
            story = Story((before,), (lake,))
            shore.take(story)
            made += 1
            yield story
