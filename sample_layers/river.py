"""The river of the lower valley: a meandering course grown bend by bend, and the loops that it cut off.

Bends move by the curvature upstream of them (Howard & Knutson 1984, Water Resources Research 20, 1659-1667).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import shapely
from scipy import spatial
from shapely import LineString, Polygon
from terrain import MAIN_AXIS, stations

WIDTH_M = 34.0
NODE_STEP_M = 17.0
OUTLET_STATION_M = 18_300.0
"""Where along the valley the river leaves the large lake."""

TOWN_STATION_M = 25_400.0
TOWN_REACH_M = 600.0
"""Half the length of the reach along the town, where banks are made fast."""

STEPS = 620
STEP_RATE = 4.0
CUTOFF_DISTANCE_M = 1.35 * WIDTH_M
MEMORY_M = 62.0
"""How far downstream a bend is felt."""

BELT_M = 560.0
"""Half the width that valley sides leave to the bends."""


@dataclass(frozen=True, eq=False)
class River:
    """A river's course and the loops it left behind, as lines."""

    course: LineString
    loops: list[LineString]


def in_valley(across: np.ndarray) -> np.ndarray:
    """Turn stations along and distances across the valley (to its left) into coordinates."""
    at = stations(MAIN_AXIS)
    x, y = (np.interp(across[:, 0], at, MAIN_AXIS[:, i]) for i in (0, 1))
    slope = np.gradient(MAIN_AXIS, at, axis=0)
    dx, dy = (np.interp(across[:, 0], at, slope[:, i]) for i in (0, 1))
    length = np.hypot(dx, dy)
    return np.column_stack((x - across[:, 1] * dy / length, y + across[:, 1] * dx / length))


def grow_river(rng: np.random.Generator) -> River:
    """Let a nearly straight course meander, and keep the loops of its last cut-offs."""
    station = np.arange(OUTLET_STATION_M, stations(MAIN_AXIS)[-1] - 40.0, NODE_STEP_M)
    noise = np.convolve(rng.normal(0.0, 9.0, len(station) + 12), np.hanning(13), mode="valid") / 2.5
    points = np.column_stack((station, noise - 120.0 * np.exp(-(((station - TOWN_STATION_M) / 2_000.0) ** 2))))
    loops: list[tuple[int, np.ndarray]] = []
    for step in range(STEPS):
        points = np.round(_respaced(_moved(points)), 4)
        if step % 5 == 0:
            points, lost = _cut_off(points)
            loops += [(step, loop) for loop in lost]
    recent = [LineString(in_valley(loop)) for step, loop in loops if step > 0.25 * STEPS]
    return River(LineString(in_valley(points)), recent)


def _moved(points: np.ndarray) -> np.ndarray:
    """Move a course by one step."""
    edge = np.gradient(points, axis=0)
    length = np.maximum(np.hypot(*edge.T), 1e-6)
    heading = np.unwrap(np.arctan2(edge[:, 1], edge[:, 0]))
    own = -np.clip(WIDTH_M * np.gradient(heading) / length, -1.0, 1.0)
    lags = np.arange(int(5 * MEMORY_M / NODE_STEP_M))
    weight = np.exp(-lags * NODE_STEP_M / MEMORY_M)
    upstream = np.convolve(own, weight)[: len(own)] / np.convolve(np.ones(len(own)), weight)[: len(own)]
    rate = -own + 2.5 * upstream
    fast = 1.0 - 0.9 * np.exp(-(((points[:, 0] - TOWN_STATION_M) / TOWN_REACH_M) ** 4))
    ends = np.minimum(1.0, np.minimum(np.arange(len(own)), np.arange(len(own))[::-1]) / 30.0)
    belt = np.clip(1.0 - np.abs(points[:, 1] / BELT_M) ** 6, 0.0, 1.0)
    outwards = np.sign(points[:, 1]) == np.sign(rate * edge[:, 0])
    normal = np.column_stack((-edge[:, 1], edge[:, 0])) / length[:, None]
    return points + normal * (STEP_RATE * rate * fast * ends * np.where(outwards, belt, 1.0))[:, None]


def _respaced(points: np.ndarray) -> np.ndarray:
    at = stations(points)
    new = np.linspace(0.0, at[-1], max(round(at[-1] / NODE_STEP_M), 10))
    points = np.column_stack([np.interp(new, at, points[:, i]) for i in (0, 1)])
    points[1:-1] = 0.01 * points[:-2] + 0.98 * points[1:-1] + 0.01 * points[2:]
    return points


def _cut_off(points: np.ndarray) -> tuple[np.ndarray, list[np.ndarray]]:
    """Let the course break through where two bends come close."""
    lost = []
    while True:
        pairs = spatial.cKDTree(points).query_pairs(CUTOFF_DISTANCE_M, output_type="ndarray")
        pairs = pairs[np.abs(pairs[:, 1] - pairs[:, 0]) > 2.5 * CUTOFF_DISTANCE_M / NODE_STEP_M]
        if not len(pairs):
            return points, lost
        first, last = min((min(pair), max(pair)) for pair in pairs.tolist())
        lost.append(points[first : last + 1])
        points = np.vstack((points[: first + 1], points[last:]))


def channel(line: LineString, width: float) -> Polygon:
    """Give a line the width of a river."""
    return shapely.buffer(line, width / 2.0, cap_style="flat")


def oxbow(rng: np.random.Generator, loop: LineString, keep: float) -> Polygon:
    """Draw the lake in a loop that was cut off; its ends have silted up."""
    share = np.linspace(0.5 - keep / 2.0, 0.5 + keep / 2.0, 80)
    middle = shapely.get_coordinates(shapely.line_interpolate_point(loop, share * loop.length))
    middle[1:-1] = 0.25 * middle[:-2] + 0.5 * middle[1:-1] + 0.25 * middle[2:]
    taper = np.sin(np.pi * np.linspace(0.03, 0.97, 80)) ** 0.45
    edge = np.gradient(middle, axis=0)
    normal = np.column_stack((-edge[:, 1], edge[:, 0])) / np.hypot(*edge.T)[:, None]
    sides = []
    for sign in (1.0, -1.0):
        rough = np.convolve(rng.normal(0.0, 1.0, 86), np.hanning(7), mode="valid")
        half = 0.5 * WIDTH_M * rng.uniform(0.75, 1.05) * taper * (1.0 + 0.09 * rough)
        sides.append(middle + sign * normal * half[:, None])
    outline = shapely.make_valid(Polygon(np.vstack((sides[0], sides[1][::-1]))))
    return max(shapely.get_parts(outline).tolist(), key=lambda part: part.area)
