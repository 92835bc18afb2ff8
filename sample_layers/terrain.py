"""Ground of the invented valley: heights on a grid, and the outlines of what water covers.

Coordinates are metres east and north of the valley's south-western corner; row 0 of a grid is its southern edge.
"""

from __future__ import annotations

import heapq
from dataclasses import dataclass

import numpy as np
import shapely
from scipy import interpolate, ndimage, spatial
from shapely import Polygon

WIDTH_M, HEIGHT_M = 30_000.0, 20_000.0
CELL_M = 25.0
ICE_AZIMUTH_DEG = 112.0
"""Direction in which the ice went; basins on the hills are longer that way."""

LAKE_LEVEL_M = 340.0
"""Level of the large lake in the upper valley."""

# Station along the valley (m), height of the floor (m), half the width of the flat floor (m).
MAIN_FLOOR = np.array([
    (0, 366, 420), (2_200, 343, 560), (3_600, 318, 640), (5_600, 324, 700), (8_000, 262, 740), (11_500, 285, 640),
    (13_600, 328, 600), (15_500, 316, 560),
    (17_300, 336, 520), (18_100, 349, 560), (19_500, 336, 900), (24_000, 320, 1_250), (34_000, 292, 1_500),
])  # fmt: skip


@dataclass(frozen=True, eq=False)
class Grid:
    """Heights at the nodes of a square grid."""

    west: float
    south: float
    cell: float
    heights: np.ndarray

    def node(self, x: float, y: float) -> tuple[int, int]:
        """Give the row and column of the node nearest to a place."""
        return round((y - self.south) / self.cell), round((x - self.west) / self.cell)

    def at(self, x: np.ndarray, y: np.ndarray) -> np.ndarray:
        """Read heights at places, bilinearly."""
        rows, columns = (np.asarray(y) - self.south) / self.cell, (np.asarray(x) - self.west) / self.cell
        return ndimage.map_coordinates(self.heights, [rows, columns], order=1, mode="nearest")


def smooth_line(points: list[tuple[float, float]], step: float = 20.0) -> np.ndarray:
    """Lay a smooth curve through points; gives one point every ``step`` metres."""
    corners = np.array(points, dtype=float)
    chord = np.concatenate(([0.0], np.cumsum(np.hypot(*np.diff(corners, axis=0).T))))
    return interpolate.CubicSpline(chord, corners)(np.linspace(0.0, chord[-1], int(chord[-1] / step)))


def stations(line: np.ndarray) -> np.ndarray:
    """Give the distance of each point of a line from its start."""
    return np.concatenate(([0.0], np.cumsum(np.hypot(*np.diff(line, axis=0).T))))


MAIN_AXIS = smooth_line(
    [(-1_500, 16_300), (3_500, 14_900), (8_500, 12_300), (13_500, 10_900), (18_500, 8_600), (24_000, 7_600),
     (31_500, 4_600)]
)  # fmt: skip

# Hanging valleys with a lake each: course, level of the lake, share of the course where it lies, half width.
SIDE_TROUGHS = (
    ([(9_300, 20_400), (11_200, 17_600), (14_300, 15_300), (16_400, 12_300), (18_300, 9_300)],
     452.0, (0.10, 0.62), 330.0),
    ([(600, 5_600), (3_600, 7_000), (6_800, 7_600), (9_800, 9_400), (12_200, 10_900)], 418.0, (0.22, 0.66), 250.0),
    ([(13_200, 1_000), (16_200, 2_100), (19_000, 4_700), (21_000, 7_800)], 448.0, (0.12, 0.55), 190.0),
)  # fmt: skip


def fractal_noise(
    rng: np.random.Generator,
    shape: tuple[int, int],
    cell: float,
    longest: float,
    *,
    hurst: float = 0.7,
    stretch: float = 1.0,
) -> np.ndarray:
    """Make self-affine noise with mean 0 and standard deviation 1 and no wave longer than ``longest`` metres."""
    spectrum = np.fft.rfft2(rng.normal(size=shape))
    ky, kx = np.meshgrid(np.fft.fftfreq(shape[0], cell), np.fft.rfftfreq(shape[1], cell), indexing="ij")
    turn = np.radians(90.0 - ICE_AZIMUTH_DEG)
    along = (kx * np.cos(turn) + ky * np.sin(turn)) * np.sqrt(stretch)
    across = (ky * np.cos(turn) - kx * np.sin(turn)) / np.sqrt(stretch)
    wave = np.maximum(np.hypot(along, across), 1.0 / longest)
    spectrum *= wave ** -(hurst + 1.0)
    spectrum[0, 0] = 0.0
    noise = np.fft.irfft2(spectrum, shape)
    return noise / noise.std()


def steps_up(values: np.ndarray) -> np.ndarray:
    """Rise smoothly from 0 at 0 to 1 at 1."""
    values = np.clip(values, 0.0, 1.0)
    return values * values * (3.0 - 2.0 * values)


def make_terrain(rng: np.random.Generator) -> Grid:
    """Raise hills, carve the valleys into them, and roughen all of it."""
    shape = (int(HEIGHT_M / CELL_M) + 1, int(WIDTH_M / CELL_M) + 1)
    x = np.arange(shape[1]) * CELL_M
    relief = fractal_noise(rng, shape, CELL_M, 9_000.0, hurst=0.72, stretch=1.7)
    # Highlands are rougher than the lowlands between them.
    hills = 575.0 + np.where(relief > 0.0, 80.0, 42.0) * relief - 0.0022 * x
    skerries = fractal_noise(rng, shape, CELL_M, 1_700.0, hurst=0.65, stretch=1.5)
    warp = 260.0 * fractal_noise(rng, shape, CELL_M, 4_000.0, hurst=0.9)
    for corners, level, (begin, end), half in SIDE_TROUGHS:
        line = smooth_line(corners)
        distance, station = _along(line, shape)
        share = station / stations(line)[-1]
        distance = np.maximum(distance + 0.5 * warp, 0.0)
        knots = [0.0, begin - 0.06, begin, (begin + end) / 2, end, end + 0.05, 1.0]
        floor = np.interp(share, knots, np.array([55, 22, -4, -38, -5, 6, -70.0]) + level)
        wide = half * np.interp(share, [0, begin, (begin + end) / 2, end, 1], [0.5, 0.6, 1.0, 0.6, 0.7])
        wall = 1.0 - np.exp(-((np.maximum(distance - 0.55 * wide, 0.0) / (1.5 * wide)) ** 1.5))
        hills = np.minimum(hills, floor + np.maximum(hills - floor, 90.0) * wall + 7.0 * relief * (1.0 - wall))
    distance, station = _along(MAIN_AXIS, shape)
    distance = np.maximum(distance + warp * np.interp(station, [0, 17_000, 19_000], [1, 1, 0.5]), 0.0)
    floor = np.interp(station, MAIN_FLOOR[:, 0], MAIN_FLOOR[:, 1])
    half = np.interp(station, MAIN_FLOOR[:, 0], MAIN_FLOOR[:, 2])
    wall = 1.0 - np.exp(-((np.maximum(distance - half, 0.0) / 1_050.0) ** 1.35))
    rough = np.interp(station, [0, 17_500, 19_500], [34.0, 16.0, 2.0])
    heights = floor + np.maximum(hills - floor, 20.0) * wall + rough * relief * (1.0 - wall)
    heights += (
        skerries * np.interp(station, [0, 17_500, 19_500], [17.0, 10.0, 1.0]) * np.exp(-((distance / 2_600.0) ** 4))
    )
    return Grid(0.0, 0.0, CELL_M, heights)


def _along(line: np.ndarray, shape: tuple[int, int]) -> tuple[np.ndarray, np.ndarray]:
    """Give each node's distance from a line, and the station of the line's nearest point."""
    stride = 4
    rows, columns = (np.arange(0, n + stride, stride) for n in shape)
    y, x = np.meshgrid(rows * CELL_M, columns * CELL_M, indexing="ij")
    distance, nearest = spatial.cKDTree(line).query(np.column_stack((x.ravel(), y.ravel())))
    at = np.meshgrid(np.arange(shape[0]) / stride, np.arange(shape[1]) / stride, indexing="ij")
    return tuple(
        ndimage.map_coordinates(values.reshape(x.shape), at, order=1, mode="nearest")
        for values in (distance, stations(line)[nearest])
    )  # fmt: skip


def refined(
    grid: Grid, box: tuple[float, float, float, float], factor: int, rng: np.random.Generator, rough: float
) -> Grid:
    """Cut a window out of a grid and give it finer cells, with the roughness that the coarse ones cannot carry."""
    south, west = (max(int((box[i] - start) / grid.cell), 0) for i, start in ((1, grid.south), (0, grid.west)))
    north, east = (int((box[i] - start) / grid.cell) + 1 for i, start in ((3, grid.south), (2, grid.west)))
    window = grid.heights[south : north + 1, west : east + 1]
    rows, columns = ((n - 1) * factor + 1 for n in window.shape)
    at = np.meshgrid(np.arange(rows) / factor, np.arange(columns) / factor, indexing="ij")
    heights = ndimage.map_coordinates(window, at, order=3, mode="nearest")
    cell = grid.cell / factor
    heights += rough * fractal_noise(rng, heights.shape, cell, 4.0 * grid.cell, hurst=0.6)
    return Grid(grid.west + west * grid.cell, grid.south + south * grid.cell, cell, heights)


def filled(heights: np.ndarray) -> np.ndarray:
    """Raise every hollow to the height at which it spills, by flooding inwards from the edge."""
    rows, columns = heights.shape
    level = np.full((rows, columns), np.inf)
    border = {(r, c) for r in range(rows) for c in (0, columns - 1)} | {
        (r, c) for c in range(columns) for r in (0, rows - 1)
    }
    queue = [(float(heights[place]), *place) for place in sorted(border)]
    for height, row, column in queue:
        level[row, column] = height
    heapq.heapify(queue)
    plain, done = heights.tolist(), level.tolist()
    while queue:
        height, row, column = heapq.heappop(queue)
        for r, c in ((row - 1, column), (row + 1, column), (row, column - 1), (row, column + 1)):
            if 0 <= r < rows and 0 <= c < columns and done[r][c] == np.inf:
                done[r][c] = max(height, plain[r][c])
                heapq.heappush(queue, (done[r][c], r, c))
    return np.array(done)


def water_cells(grid: Grid, level: float, seed: tuple[float, float]) -> np.ndarray | None:
    """Find the nodes that water of a level covers around a seed; None where it runs out of the window."""
    labels, _ = ndimage.label(grid.heights < level, structure=np.ones((3, 3)))
    own = labels[grid.node(*seed)]
    if own == 0:
        return None
    cells = labels == own
    edge = cells[0].any() or cells[-1].any() or cells[:, 0].any() or cells[:, -1].any()
    return None if edge else cells


def flood(grid: Grid, level: float, seed: tuple[float, float], least_island_m2: float) -> Polygon | None:
    """Draw the lake that stands at a level around a seed, islands left out."""
    cells = water_cells(grid, level, seed)
    if cells is None:
        return None
    alone = np.where(cells, grid.heights, np.maximum(grid.heights, level + 0.05 * grid.cell))
    return largest_region(Grid(grid.west, grid.south, grid.cell, alone), level, least_island_m2)


def largest_region(grid: Grid, level: float, least_hole_m2: float) -> Polygon:
    """Draw the largest region below a level, without the holes that are too small to map."""
    rings = [shapely.LinearRing(ring) for ring in contour_rings(grid, level)]
    shells = [Polygon(ring) for ring in rings if ring.is_ccw]
    shell = max(shells, key=lambda ring: ring.area)
    holes = [Polygon(ring) for ring in rings if not ring.is_ccw]
    kept = [hole.exterior for hole in holes if hole.area >= least_hole_m2 and shell.contains(hole)]
    return Polygon(shell.exterior, kept)


def contour_rings(grid: Grid, level: float) -> list[np.ndarray]:
    """Trace the closed contours of a level, low ground on the left."""
    low = np.pad(grid.heights, 1, constant_values=np.inf) < level
    heights = np.pad(grid.heights, 1, mode="edge")
    heights[~low & (heights < level)] = level + grid.cell
    following = _links(low, heights, level)
    rings = []
    while following:
        start = at = next(iter(following))
        edges = []
        while True:
            edges.append(at)
            at = following.pop(at)
            if at == start:
                break
        rings.append(_crossings(np.array(edges), heights, level))
    west, south = grid.west - grid.cell, grid.south - grid.cell
    return [np.array((west, south)) + grid.cell * ring for ring in rings if len(ring) > 2]


# The corners of a cell, counter-clockwise from the south-west, and its edges, each from a corner to the next.
_CORNERS = ((0, 0), (0, 1), (1, 1), (1, 0))


def _links(low: np.ndarray, heights: np.ndarray, level: float) -> dict[int, int]:
    """Pair the edges where the contour enters and leaves each cell; an edge is numbered 2 x node + direction."""
    rows, columns = low.shape
    corner = [low[r : rows - 1 + r, c : columns - 1 + c] for r, c in _CORNERS]
    case = sum(corner[k].astype(int) << k for k in range(4))
    links: dict[int, int] = {}
    for row, column in np.argwhere((case > 0) & (case < 15)):
        is_low = [bool(case[row, column] >> k & 1) for k in range(4)]
        into = [k for k in range(4) if is_low[k] and not is_low[k - 3]]
        out = [k for k in range(4) if not is_low[k] and is_low[k - 3]]
        if len(into) == 2:
            # A saddle: its middle decides which corners belong together.
            is_open = bool(heights[row : row + 2, column : column + 2].mean() < level)
            out = out[::-1] if is_open == (into[0] == 1) else out
        for begin, end in zip(into, out, strict=True):
            links[_edge(row, column, begin, columns)] = _edge(row, column, end, columns)
    return links


def _edge(row: int, column: int, k: int, columns: int) -> int:
    """Give the number of the edge k of a cell: south, east, north, west."""
    r, c = (row + (k == 2), column + (k == 1))
    return int(2 * (r * columns + c) + (k in (1, 3)))


def _crossings(edges: np.ndarray, heights: np.ndarray, level: float) -> np.ndarray:
    """Place a contour on edges, in columns and rows."""
    row, column = np.divmod(edges // 2, heights.shape[1])
    upwards = edges % 2
    a, b = heights[row, column], heights[row + upwards, column + 1 - upwards]
    share = np.clip((level - a) / np.where(a == b, 1.0, b - a), 0.02, 0.98)
    return np.column_stack((column + share * (1 - upwards), row + share * upwards))
