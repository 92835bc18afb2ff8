"""Make the sample layers: lakes, habitat patches and parcels of Skarnbeck, an invented valley.

Run as ``python sample_layers/make_sample_layers.py``; the same seed gives the same layers. Nothing here exists: names,
shores, owners and values are made up, and so is the valley, which lies where its CRSs say only so that maps agree.
"""

from __future__ import annotations

from dataclasses import dataclass
from itertools import pairwise
from pathlib import Path

import geopandas as gpd
import numpy as np
import shapely
import shapely.ops
from shapely import LineString, MultiPolygon, Polygon, affinity

SEED = 4711
HERE = Path(__file__).parent
VALLEY_CRS = "EPSG:32633"
PARCEL_CRS = "EPSG:3006"
ORIGIN = (448_000.0, 6_812_000.0)
"""South-western corner of the valley in its CRS."""

SHORE_STEP_M = 18.0
GAP_M = 60.0
"""Least distance between two lakes, and between a lake and the town."""

TOWN_CENTRE = (19_600.0, 5_200.0)
TOWN_TURN_DEG = 14.0


def river() -> LineString:
    """Draw the river that runs through the valley, from the trough lake in the west to the town in the east."""
    along = np.linspace(0.0, 1.0, 900)
    x = 11_500.0 + 11_500.0 * along
    y = 5_600.0 - 1_300.0 * along + 420.0 * np.sin(15.0 * along) + 160.0 * np.sin(47.0 * along + 1.0)
    return LineString(np.column_stack((x + 110.0 * np.sin(61.0 * along), y)))


def rough_outline(rng: np.random.Generator, shape: Polygon, step: float, amplitude: float) -> Polygon:
    """Make an outline rough at all scales by displacing the middles of its edges, again and again."""
    points = shapely.get_coordinates(shape.exterior)[:-1]
    while True:
        following = np.roll(points, -1, axis=0)
        edge = following - points
        length = np.hypot(*edge.T)
        long = length > step
        if not long.any():
            break
        normal = np.column_stack((edge[:, 1], -edge[:, 0]))
        middle = points + edge * rng.uniform(0.4, 0.6, (len(points), 1))
        middle += normal * rng.normal(0.0, amplitude, (len(points), 1)).clip(-0.3, 0.3)
        stacked = np.stack((points, middle), axis=1).reshape(-1, 2)
        points = stacked[np.column_stack((np.ones(len(long), dtype=bool), long)).ravel()]
    return largest(shapely.make_valid(Polygon(points)))


def largest(shape: shapely.Geometry) -> Polygon:
    """Take the largest polygon of a geometry."""
    parts = [part for part in shapely.get_parts(shape) if part.geom_type == "Polygon"]
    return max(parts, key=lambda part: part.area)


def blob(rng: np.random.Generator, radius: float, lobes: float, stretch: float) -> Polygon:
    """Draw a smooth lobed outline round the origin."""
    angle = np.linspace(0.0, 2.0 * np.pi, 40, endpoint=False)
    distance = np.ones_like(angle)
    for k in range(2, 7):
        distance += rng.normal(0.0, lobes / k) * np.cos(k * angle + rng.uniform(0.0, 2.0 * np.pi))
    distance = radius * np.clip(distance, 0.35, 2.2)
    points = np.column_stack((stretch * distance * np.cos(angle), distance * np.sin(angle) / stretch))
    return affinity.rotate(largest(shapely.make_valid(Polygon(points))), rng.uniform(0, 180), origin=(0, 0))


def ribbon(line: LineString, widths: np.ndarray) -> Polygon:
    """Give a line a width that changes along it."""
    share = np.linspace(0.0, 1.0, len(widths))
    dots = [line.interpolate(at, normalized=True).buffer(width / 2.0) for at, width in zip(share, widths, strict=True)]
    links = [shapely.union(a, b).convex_hull for a, b in pairwise(dots)]
    return largest(shapely.union_all(links))


def walk(
    rng: np.random.Generator, start: tuple[float, float], heading: float, length: float, bend: float
) -> LineString:
    """Draw a line that wanders."""
    n = 24
    headings = np.radians(heading) + np.cumsum(rng.normal(0.0, bend, n))
    steps = length / n * np.column_stack((np.cos(headings), np.sin(headings)))
    return LineString(np.vstack((start, np.array(start) + np.cumsum(steps, axis=0))))


def trough(
    rng: np.random.Generator, start: tuple[float, float], heading: float, length: float, width: float
) -> Polygon:
    """Draw a long lake in a glacial trough."""
    line = walk(rng, start, heading, length, 0.07)
    share = np.linspace(0.0, 1.0, 25)
    widths = width * (0.35 + np.sin(np.pi * share) ** 0.6 * rng.uniform(0.75, 1.15, 25))
    return rough_outline(rng, ribbon(line, widths).simplify(0.13 * width), SHORE_STEP_M * 2, 0.15)


def reservoir(rng: np.random.Generator, dam: tuple[float, float], heading: float, length: float) -> Polygon:
    """Draw a reservoir: drowned side valleys, and a dam as straight as a dam."""
    main = walk(rng, dam, heading, length, 0.08)
    arms = [ribbon(main, np.linspace(0.20, 0.03, 25) * length)]
    for at in (0.25, 0.4, 0.55, 0.7):
        mouth = main.interpolate(at, normalized=True)
        side = heading + rng.choice([-1.0, 1.0]) * rng.uniform(45.0, 75.0)
        reach = length * (0.45 - 0.35 * at)
        arms.append(ribbon(walk(rng, (mouth.x, mouth.y), side, reach, 0.10), np.linspace(0.10, 0.02, 25) * length))
    whole = rough_outline(rng, largest(shapely.union_all(arms)).simplify(10.0), SHORE_STEP_M, 0.07)
    direction = np.array([np.cos(np.radians(heading)), np.sin(np.radians(heading))])
    across = np.array([-direction[1], direction[0]])
    foot = np.array(dam) + 0.02 * length * direction
    far = 3.0 * length
    behind = Polygon([foot - far * across, foot + far * across, foot + far * across + far * direction,
                      foot - far * across + far * direction])  # fmt: skip
    return largest(whole.intersection(behind))


def oxbow(rng: np.random.Generator) -> Polygon:
    """Draw a cut-off meander."""
    radius = rng.uniform(70.0, 150.0)
    angle = np.radians(np.linspace(0.0, rng.uniform(200.0, 280.0), 25))
    line = LineString(radius * np.column_stack((np.cos(angle), rng.uniform(0.8, 1.3) * np.sin(angle))))
    widths = rng.uniform(28.0, 46.0) * (0.55 + 0.45 * np.sin(np.linspace(0.15, np.pi - 0.15, 25)))
    return rough_outline(rng, ribbon(line, widths).simplify(2.0), 9.0, 0.05)


def with_islands(rng: np.random.Generator, lake: Polygon, count: int) -> Polygon:
    """Put islands into a lake, away from its shore."""
    islands = []
    for _ in range(60):
        if len(islands) == count:
            break
        west, south, east, north = lake.bounds
        radius = float(np.sqrt(lake.area)) * rng.uniform(0.008, 0.04)
        island = affinity.translate(
            rough_outline(rng, blob(rng, radius, 0.5, rng.uniform(1.0, 1.5)), 10.0, 0.10),
            rng.uniform(west, east), rng.uniform(south, north),
        )  # fmt: skip
        room = island.buffer(12.0)
        if lake.contains(room) and all(not room.intersects(other) for other in islands):
            islands.append(island)
    return Polygon(lake.exterior, [island.exterior.coords for island in islands])


@dataclass
class Room:
    """Ground that is taken; what is placed later keeps away from it."""

    taken: shapely.Geometry

    def place(
        self, rng: np.random.Generator, shape: Polygon, box: tuple[float, float, float, float], gap: float
    ) -> Polygon | None:
        """Move a shape to a free place in a box, or give up."""
        for _ in range(200):
            x, y = rng.uniform(box[0], box[2]), rng.uniform(box[1], box[3])
            moved = affinity.translate(shape, x, y)
            if moved.distance(self.taken) > gap:
                return moved
        return None

    def take(self, shape: shapely.Geometry) -> None:
        """Enter a shape as taken."""
        self.taken = shapely.union(self.taken, shape)


FIRST = ("Alder", "Bram", "Cold", "Dun", "Esk", "Fell", "Grey", "Hag", "Ivel", "Kell", "Ling", "Mire", "Nor", "Otter",
         "Pell", "Rush", "Skarn", "Thorn", "Ulf", "Wether")  # fmt: skip
LAST = {"kettle": ("pot", "pool"), "tarn": ("tarn", "mere"), "oxbow": ("loop", "bend"),
        "trough": ("water", "long water"), "reservoir": ("reservoir",)}  # fmt: skip


def make_lakes(rng: np.random.Generator, town: Polygon) -> gpd.GeoDataFrame:
    """Make about 40 lakes with bays and islands."""
    stream = river()
    shapes: list[tuple[str, Polygon]] = [
        ("trough", with_islands(rng, trough(rng, (600.0, 3_400.0), 14.0, 11_200.0, 1_900.0), 9)),
        ("trough", with_islands(rng, trough(rng, (7_200.0, 8_300.0), 24.0, 6_000.0, 850.0), 2)),
        ("trough", trough(rng, (14_500.0, 1_300.0), 8.0, 4_600.0, 520.0)),
        ("reservoir", with_islands(rng, reservoir(rng, (18_300.0, 8_000.0), 128.0, 3_000.0), 1)),
        ("reservoir", reservoir(rng, (12_700.0, 2_700.0), 240.0, 1_900.0)),
    ]
    room = Room(shapely.union_all([town.buffer(GAP_M), stream.buffer(40.0), *(shape for _, shape in shapes)]))
    for _ in range(6):
        loop = affinity.rotate(oxbow(rng), rng.uniform(0, 360), origin=(0, 0))
        near = stream.interpolate(rng.uniform(0.05, 0.85), normalized=True)
        place = room.place(rng, loop, (near.x - 450.0, near.y - 450.0, near.x + 450.0, near.y + 450.0), 15.0)
        if place is not None:
            shapes.append(("oxbow", place))
            room.take(place)
    for kind, count, sizes, lobes in (("tarn", 12, (90.0, 700.0), 0.75), ("kettle", 18, (38.0, 190.0), 0.22)):
        for radius in np.exp(rng.uniform(*np.log(sizes), count)):
            base = blob(rng, radius, lobes, rng.uniform(1.0, 1.5 if kind == "tarn" else 1.15))
            shape = rough_outline(
                rng, base, max(6.0, min(SHORE_STEP_M, radius / 12.0)), 0.11 if kind == "tarn" else 0.05
            )
            if kind == "tarn" and radius > 200.0:
                shape = with_islands(rng, shape, int(rng.integers(1, 6)))
            place = room.place(rng, shape, (300.0, 300.0, 23_500.0, 11_500.0), GAP_M)
            if place is not None:
                shapes.append((kind, place))
                room.take(place)
    names = _names(rng, [kind for kind, _ in shapes])
    areas = np.array([shape.area for _, shape in shapes])
    depth = {"trough": 60.0, "reservoir": 25.0, "tarn": 14.0, "kettle": 9.0, "oxbow": 2.5}
    return _in_valley(
        gpd.GeoDataFrame(
            {
                "lake_id": [f"SK{i:03d}" for i in range(1, len(shapes) + 1)],
                "name": names,
                "lake_type": [kind for kind, _ in shapes],
                "basin": ["upper" if shape.centroid.x < 11_000 else "lower" for _, shape in shapes],
                "elevation_m": np.round(620.0 - 0.012 * np.array([s.centroid.x for _, s in shapes]), 1),
                "max_depth_m": np.round(
                    [depth[kind] * (area / 1e6) ** 0.15 * rng.uniform(0.7, 1.3)
                     for (kind, _), area in zip(shapes, areas, strict=True)], 1,
                ),
                "survey_year": rng.choice([2019, 2021, 2022], len(shapes)),
            },
            geometry=[shape for _, shape in shapes],
        )
    )  # fmt: skip


def _names(rng: np.random.Generator, kinds: list[str]) -> list[str]:
    taken: set[str] = set()
    names = []
    for kind in kinds:
        while True:
            name = f"{rng.choice(FIRST)} {rng.choice(LAST[kind])}"
            if name not in taken:
                break
            taken.add(name)
            name = f"{rng.choice(('Upper', 'Lower', 'Little', 'Great'))} {name}"
            if name not in taken:
                break
        taken.add(name)
        names.append(name)
    return names


def make_patches(rng: np.random.Generator, lakes: gpd.GeoDataFrame, town: Polygon) -> gpd.GeoDataFrame:
    """Make about 150 habitat patches in four classes."""
    water = shapely.union_all([affinity.translate(shape, -ORIGIN[0], -ORIGIN[1]) for shape in lakes.geometry])
    stream = river()
    room = Room(shapely.union_all([shapely.buffer(water, 8.0), town.buffer(20.0)]))
    patches: list[tuple[str, shapely.Geometry]] = []

    def add(habitat: str, shape: shapely.Geometry, gap: float = 0.0) -> bool:
        rest = shape.difference(shapely.buffer(room.taken, gap) if gap else room.taken)
        parts = [part for part in shapely.get_parts(rest) if part.geom_type == "Polygon" and part.area > 1_200.0]
        if not parts or sum(part.area for part in parts) < 0.6 * shape.area:
            return False
        whole = parts[0] if len(parts) == 1 else MultiPolygon(parts)
        patches.append((habitat, whole))
        room.take(whole)
        return True

    for at in np.linspace(0.02, 0.93, 30):
        reach = rng.uniform(0.010, 0.022)
        bank = shapely.ops.substring(stream, at, at + reach, normalized=True)
        side = rng.choice([-1.0, 1.0])
        line = bank.parallel_offset(rng.uniform(35.0, 70.0), "left" if side > 0 else "right")
        if line.geom_type == "LineString" and line.length > 60.0:
            widths = rng.uniform(35.0, 95.0) * rng.uniform(0.5, 1.3, 25)
            add("wet meadow", rough_outline(rng, ribbon(line, widths).simplify(3.0), 14.0, 0.04))
    for habitat, target in (("woodland", 48), ("heath", 40), ("scrub", 40)):
        placed = 0
        for _ in range(600):
            if placed == target:
                break
            x, y = rng.uniform(600.0, 23_000.0), rng.uniform(400.0, 11_300.0)
            placed += add(habitat, affinity.translate(_patch(rng, habitat), x, y), 6.0)
    order = rng.permutation(len(patches))
    frame = gpd.GeoDataFrame(
        {
            "patch_id": np.arange(1, len(patches) + 1),
            "habitat": [patches[i][0] for i in order],
            "condition": rng.choice(["good", "fair", "poor"], len(patches), p=[0.35, 0.45, 0.2]),
            "surveyed": [f"2024-{rng.integers(5, 10):02d}-{rng.integers(1, 29):02d}" for _ in patches],
        },
        geometry=[patches[i][1] for i in order],
    )
    return _in_valley(frame).to_crs("EPSG:4326")


def _patch(rng: np.random.Generator, habitat: str) -> Polygon:
    match habitat:
        case "woodland":
            # Remnants between fields: few corners, straight sides.
            n = int(rng.integers(5, 9))
            angle = np.sort(rng.uniform(0, 2 * np.pi, n)) + rng.uniform(0, 2 * np.pi)
            distance = np.exp(rng.uniform(np.log(90.0), np.log(330.0))) * rng.uniform(0.75, 1.2, n)
            corners = np.column_stack((distance * np.cos(angle), distance * np.sin(angle)))
            return rough_outline(rng, largest(shapely.make_valid(Polygon(corners).convex_hull)), 30.0, 0.012)
        case "heath":
            radius = np.exp(rng.uniform(np.log(80.0), np.log(360.0)))
            return rough_outline(rng, blob(rng, radius, 1.0, rng.uniform(1.0, 1.6)), 15.0, 0.06)
        case _:
            # Strips along old field walls, with corners where walls meet.
            line = walk(rng, (0.0, 0.0), rng.uniform(0, 180), rng.uniform(250.0, 900.0), 0.22)
            return rough_outline(rng, ribbon(line, rng.uniform(12.0, 34.0, 25)).simplify(2.0), 12.0, 0.03)


BLOCK_M, LOT_DEPTH_M, STREET_M = 118.0, 34.0, 11.0


def town_outline() -> Polygon:
    """Draw the limits of the town."""
    return affinity.translate(
        affinity.rotate(shapely.box(-480.0, -210.0, 490.0, 210.0), TOWN_TURN_DEG, origin=(0, 0)), *TOWN_CENTRE
    )


def make_parcels(rng: np.random.Generator) -> gpd.GeoDataFrame:
    """Make about 300 parcels of a street grid, cut by a diagonal road, with a handful of defects."""
    road = LineString([(-620.0, -230.0), (620.0, 235.0)]).buffer(8.0, cap_style="flat")
    lots: list[Polygon] = []
    for column in range(7):
        for row in range(4):
            west = -446.0 + column * (BLOCK_M + STREET_M)
            south = -176.0 + row * (2 * LOT_DEPTH_M + STREET_M + 12.0)
            lots += _block(rng, west, south)
    cut = []
    for lot in lots:
        parts = shapely.get_parts(shapely.difference(lot, road))
        cut += [part for part in parts if part.geom_type == "Polygon" and part.area > 8.0]
    shapes: list[shapely.Geometry | None] = [
        affinity.translate(affinity.rotate(lot, TOWN_TURN_DEG, origin=(0, 0)), *TOWN_CENTRE) for lot in cut
    ]
    values = np.array([shape.area for shape in shapes]) * rng.lognormal(5.3, 0.25, len(shapes))
    frame = gpd.GeoDataFrame(
        {
            "parcel_id": [f"{rng.integers(1, 48):02d}-{i:04d}" for i in range(1, len(shapes) + 1)],
            "zone": rng.choice(["R1", "R2", "C", "M"], len(shapes), p=[0.55, 0.25, 0.12, 0.08]),
            "land_use": rng.choice(["dwelling", "shop", "yard", "vacant", "garden"], len(shapes)),
            "owner_type": rng.choice(["private", "company", "parish"], len(shapes), p=[0.8, 0.14, 0.06]),
            "assessed_value": np.round(values, -2),
        },
        geometry=shapes,
    )
    frame = _in_valley(frame).to_crs(PARCEL_CRS)
    frame.geometry = shapely.set_precision(frame.geometry.values, 0.001)
    return _with_defects(frame)


def _block(rng: np.random.Generator, west: float, south: float) -> list[Polygon]:
    """Cut a block into two rows of lots, back to back, with the odd ones that every town has."""
    lots = []
    for row in range(2):
        low = south + row * LOT_DEPTH_M
        edges = [west]
        while west + BLOCK_M - edges[-1] > 40.0:
            edges.append(edges[-1] + rng.uniform(17.0, 28.0))
        edges.append(west + BLOCK_M)
        lots += [shapely.box(a, low, b, low + LOT_DEPTH_M) for a, b in pairwise(edges)]
    choice = rng.random()
    if choice < 0.35:
        lots = _flag_lot(lots)
    elif choice < 0.6:
        lots = _l_shape(lots)
    elif choice < 0.75:
        lots = _sliver(lots)
    return lots


def _flag_lot(lots: list[Polygon]) -> list[Polygon]:
    """Give the back half of a lot to a parcel of its own, with a drive along the side."""
    west, south, east, north = lots[1].bounds
    drive, half = 4.0, (south + north) / 2.0
    front = shapely.box(west + drive, south, east, half)
    return [*lots[:1], front, lots[1].difference(front), *lots[2:]]


def _l_shape(lots: list[Polygon]) -> list[Polygon]:
    """Let a lot take the back of its neighbour."""
    west, _, east, north = lots[1].bounds
    back = shapely.box(west, north - 14.0, east, north)
    return [lots[0].union(back), lots[1].difference(back), *lots[2:]]


def _sliver(lots: list[Polygon]) -> list[Polygon]:
    """Leave a strip between two lots that nobody had measured right."""
    west, south, _, north = lots[1].bounds
    strip = shapely.box(west, south, west + 1.1, north)
    return [lots[0], strip, lots[1].difference(strip), *lots[2:]]


def _with_defects(frame: gpd.GeoDataFrame) -> gpd.GeoDataFrame:
    """Plant what real layers bring along: a bow-tie, an empty and a null geometry, a duplicate."""
    shapes = frame.geometry.to_numpy().copy()
    corners = shapely.get_coordinates(shapes[40].minimum_rotated_rectangle)[:4]
    shapes[40] = Polygon(corners[[0, 2, 1, 3]])
    shapes[97] = Polygon()
    shapes[151] = None
    shapes[205] = shapes[204]
    return frame.set_geometry(gpd.GeoSeries(shapes, crs=frame.crs))


def _in_valley(frame: gpd.GeoDataFrame) -> gpd.GeoDataFrame:
    moved = [None if shape is None else affinity.translate(shape, *ORIGIN) for shape in frame.geometry]
    return frame.set_geometry(gpd.GeoSeries(shapely.set_precision(moved, 0.01), crs=VALLEY_CRS))


def make_all() -> dict[str, gpd.GeoDataFrame]:
    """Make the layers, by file name."""
    town = town_outline()
    lakes = make_lakes(np.random.default_rng(SEED), town)
    return {
        "lakes.gpkg": lakes,
        "patches.geojson": make_patches(np.random.default_rng(SEED + 1), lakes, town),
        "parcels.gpkg": make_parcels(np.random.default_rng(SEED + 2)),
    }


if __name__ == "__main__":
    for name, frame in make_all().items():
        path = HERE / name
        path.unlink(missing_ok=True)
        options = {"RFC7946": "YES", "COORDINATE_PRECISION": "7"} if name.endswith("geojson") else {}
        frame.to_file(path, **options)
        print(f"{name}: {len(frame)} rows")
