"""Parcels of the invented town: blocks between streets, cut by a diagonal road and the river bank, and divided.

Coordinates here are along and across the town's streets, from its south-western corner. The lots of a block are the
faces of one set of lines, so that neighbours have every point of their common side in common.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np
import shapely
from shapely import LineString, Polygon

COLUMN_WIDTHS = (104.0, 118.0, 92.0, 126.0, 112.0, 108.0)
ROW_DEPTHS = (62.0, 70.0, 66.0, 74.0, 64.0)
STREET_M, MAIN_STREET_M = 11.0, 18.0
MAIN_STREETS = (2,)
"""Columns after which the street is a main street."""

LEAST_LOT_M2 = 9.0
PARK, SCHOOL, TERRACES, MILL = (4, 2), (1, 3), ((3, 2), (2, 1)), (5, 0)
CLOSE = (4, 3)
"""South-western block of the four that a close with a turning circle takes up."""


@dataclass(frozen=True, eq=False)
class Lot:
    """A lot, with the block it is in."""

    shape: Polygon
    column: int
    row: int
    block: int


@dataclass(frozen=True)
class Frame:
    """A rectangle along the streets."""

    west: float
    south: float
    east: float
    north: float

    @property
    def outline(self) -> Polygon:
        """The rectangle, its corners rounded off for the turning cart."""
        sharp = shapely.box(self.west, self.south, self.east, self.north)
        return shapely.buffer(shapely.buffer(sharp, -4.0, join_style="mitre"), 4.0, quad_segs=2)


def starts(sizes: tuple[float, ...], wide_after: tuple[int, ...] = ()) -> list[float]:
    """Give where each of a row of blocks begins."""
    at, result = 0.0, []
    for i, size in enumerate(sizes):
        result.append(at)
        at += size + (MAIN_STREET_M if i in wide_after else STREET_M)
    return result


def town_size() -> tuple[float, float]:
    """Give the town's extent along and across."""
    columns, rows = starts(COLUMN_WIDTHS, MAIN_STREETS), starts(ROW_DEPTHS, (1,))
    return columns[-1] + COLUMN_WIDTHS[-1], rows[-1] + ROW_DEPTHS[-1]


def make_lots(rng: np.random.Generator, bank: shapely.Geometry) -> list[Lot]:
    """Divide the town into lots; ``bank`` is the ground along the river that stays open."""
    width, depth = town_size()
    road = LineString(
        [(-60.0, -40.0), (0.12 * width, 0.2 * depth), (0.37 * width, 0.58 * depth), (0.62 * width, depth + 30.0)]
    )
    open_ground = shapely.union(shapely.buffer(road, 7.5, cap_style="flat", join_style="mitre"), bank)
    lots: list[Lot] = []
    for block, (column, row, frame) in enumerate(_frames(), start=1):
        land = shapely.difference(frame.outline, open_ground)
        if (column, row) == CLOSE:
            land, lines = _close(frame, land)
        else:
            lines = list(_lines(rng, frame, (column, row)))
        lots += [Lot(shape, column, row, block) for shape in _faces(land, lines)]
    return lots


def _frames() -> Iterator[tuple[int, int, Frame]]:
    """List the blocks, row by row from the river."""
    columns, rows = starts(COLUMN_WIDTHS, MAIN_STREETS), starts(ROW_DEPTHS, (1,))
    close = {(CLOSE[0] + i, CLOSE[1] + j) for i in (0, 1) for j in (0, 1)}
    for row, south in enumerate(rows):
        for column, west in enumerate(columns):
            if (column, row) == CLOSE:
                east, north = columns[column + 1] + COLUMN_WIDTHS[column + 1], rows[row + 1] + ROW_DEPTHS[row + 1]
                yield column, row, Frame(west, south, east, north)
            elif (column, row) not in close:
                yield column, row, Frame(west, south, west + COLUMN_WIDTHS[column], south + ROW_DEPTHS[row])


def _faces(land: shapely.Geometry, lines: list[LineString]) -> list[Polygon]:
    """Cut land along lines; the pieces share their points."""
    faces = shapely.get_parts(shapely.polygonize(shapely.get_parts(shapely.union_all([*lines, land.boundary]))))
    kept = [face for face in faces if face.area > LEAST_LOT_M2 and land.contains(face.representative_point())]
    return sorted(kept, key=lambda face: (round(face.centroid.y / 30.0), face.centroid.x))


def _lines(rng: np.random.Generator, frame: Frame, place: tuple[int, int]) -> Iterator[LineString]:
    """Draw the lines that divide an ordinary block into two rows of lots, back to back."""
    if place == PARK:
        return
    width = frame.east - frame.west
    if place in (SCHOOL, MILL):
        yield LineString([(frame.west + 0.68 * width, frame.south), (frame.west + 0.66 * width, frame.north)])
        return
    middle = frame.south + (frame.north - frame.south) * rng.uniform(0.46, 0.54)
    yield LineString([(frame.west - 1.0, middle), (frame.east + 1.0, middle)])
    narrow = place in TERRACES
    low, high = (8.0, 11.5) if narrow else (16.5, 25.0)
    odd = set(rng.permutation(2)[: 1 + int(rng.random() < 0.45)].tolist())
    for side, front in enumerate((frame.south, frame.north)):
        edges = _edges(rng, frame, low, high)
        inner = edges[1:-1]
        kind = rng.choice(["flag", "jog", "sliver", "askew"], p=[0.4, 0.3, 0.12, 0.18]) if side in odd else ""
        chosen = int(rng.integers(1, max(len(inner) - 1, 2)))
        for i, at in enumerate(inner):
            yield from _lot_line(
                rng, kind if i == chosen and not narrow else "", at, (front, middle), edges[i + 2] - at
            )


def _edges(rng: np.random.Generator, frame: Frame, low: float, high: float) -> list[float]:
    """Divide a front into lots; those at the corners are wider."""
    edges = [frame.west, frame.west + rng.uniform(low, high) * 1.25]
    while frame.east - edges[-1] > 2.3 * high:
        edges.append(edges[-1] + rng.uniform(low, high))
    rest = frame.east - edges[-1]
    return [*edges, edges[-1] + 0.46 * rest, frame.east]


def _lot_line(
    rng: np.random.Generator, kind: str, at: float, depth: tuple[float, float], width: float
) -> Iterator[LineString]:
    """Draw the line between two lots; the second of them, ``width`` wide, may be an odd one."""
    front, back = depth
    # Lines run past the front and the middle, so that they meet what they are meant to meet.
    past = front - 0.2 * (back - front), back + 0.05 * (back - front)
    foot, head = (at, past[0]), (at, past[1])
    half = front + 0.55 * (back - front)
    match kind:
        case "flag":
            yield LineString([foot, head])
            yield LineString([(at + 3.6, past[0]), (at + 3.6, half), (at + width, half)])
        case "jog":
            shift = rng.uniform(6.0, 9.0)
            yield LineString([foot, (at, half), (at - shift, half), (at - shift, past[1])])
        case "sliver":
            yield LineString([foot, head])
            yield LineString([(at + 1.1, past[0]), (at + 0.7, past[1])])
        case "askew":
            yield LineString([foot, (at + rng.choice([-1.0, 1.0]) * rng.uniform(4.0, 7.0), past[1])])
        case _:
            yield LineString([foot, head])


def _close(frame: Frame, land: shapely.Geometry) -> tuple[shapely.Geometry, list[LineString]]:
    """Draw a close: a stem from the southern street, a turning circle, and lots like slices of a cake round it."""
    x, y = (frame.west + frame.east) / 2.0, frame.south + 0.56 * (frame.north - frame.south)
    stem = shapely.box(x - 4.5, frame.south - 10.0, x + 4.5, y)
    street = shapely.union(stem, shapely.buffer(shapely.Point(x, y), 13.0, quad_segs=6))
    ground = shapely.difference(land, street)
    far = frame.east - frame.west + frame.north - frame.south
    lines = [
        LineString([(x, y), (x + far * np.cos(angle), y + far * np.sin(angle))])
        for angle in np.radians(np.linspace(-22.0, 202.0, 9)[1:-1])
    ]
    reach = 34.0
    for side in (-1.0, 1.0):
        back = x + side * (4.5 + reach)
        corner = y + (back - x) * side * np.tan(np.radians(-22.0))
        lines += [LineString([(back, frame.south - 10.0), (back, corner)]), LineString([(x, y), (back, corner)])]
        lines += [
            LineString([(x, level), (back + 0.2 * side, level)]) for level in np.linspace(frame.south, corner, 4)[1:]
        ]
        lines.append(LineString([(back, corner), (x + side * far, corner)]))
        edge = frame.east if side > 0 else frame.west
        lines += [
            LineString([(along, frame.south - 10.0), (along, corner)]) for along in np.linspace(back, edge, 5)[1:-1]
        ]
    return ground, lines


def zone_of(lot: Lot) -> str:
    """Zone a lot: trade along the main street, works by the river's lower end, terraces, and houses."""
    place = (lot.column, lot.row)
    if place in (PARK, SCHOOL):
        return "P"
    if place == MILL:
        return "M"
    if place in TERRACES:
        return "R2"
    return "C" if lot.column in (MAIN_STREETS[0], MAIN_STREETS[0] + 1) and lot.row < 3 else "R1"


def with_corners_swapped(shape: Polygon) -> Polygon:
    """Make a bow-tie of a lot, as typing two corners in the wrong order does."""
    corners = shapely.get_coordinates(shape.minimum_rotated_rectangle)[:4]
    return Polygon(corners[[0, 2, 1, 3]])
