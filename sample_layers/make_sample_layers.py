"""Make the sample layers: lakes in two surveys, habitat patches and parcels of Skarnbeck, an invented valley.

Run as ``python sample_layers/make_sample_layers.py``; the same seed gives the same layers. Nothing here exists: names,
shores, owners and values are made up, and so is the valley, which lies where its CRSs say only so that maps agree.
"""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path

import geopandas as gpd
import habitats
import lakes
import numpy as np
import pyogrio
import river
import shapely
import terrain
import town
from shapely import Polygon

SEED = 4711
HERE = Path(__file__).parent
VALLEY_CRS, PATCH_CRS, PARCEL_CRS = "EPSG:32633", "EPSG:4326", "EPSG:3006"
ORIGIN = (448_000.0, 6_812_000.0)
"""South-western corner of the valley in its CRS."""

TOWN_ACROSS_M = -104.0
"""How far left of the valley's axis the town begins; the river passes to the right of it."""

QUAY_M = 24.0
WRITTEN = "2025-03-01T00:00:00.000Z"
"""Time that GeoPackages carry, so that the same layer is the same file."""

UPPER_DAM = lakes.Dam((25_600.0, 11_200.0), 118.0, 4_600.0, 352.0, 384.0, 381.5)
NEW_DAM = lakes.Dam((8_900.0, 3_900.0), 250.0, 2_300.0, 470.0, 487.0, 0.0)
"""Built between the surveys: no water earlier."""


@dataclass(frozen=True, eq=False)
class Valley:
    """What the layers are drawn from."""

    ground: terrain.Grid
    river: river.River
    lots: list[town.Lot]
    limits: Polygon
    stories: list[lakes.Story]


def make_valley() -> Valley:
    """Raise the ground, let the river run, build the town and fill the lakes."""
    ground = terrain.make_terrain(np.random.default_rng(SEED))
    stream = river.grow_river(np.random.default_rng(SEED + 1))
    lots, limits = build_town(np.random.default_rng(SEED + 2), stream)
    rng = np.random.default_rng(SEED + 3)
    shore = lakes.Shore(shapely.buffer(limits, 150.0))
    stories = list(lakes.oxbows(rng, stream, shore, limits, 6))
    shore.taken = shapely.union(shore.taken, river.channel(stream.course, 90.0))

    def add(*found: lakes.Story) -> None:
        for story in found:
            shore.take(story)
            stories.append(story)

    add(*lakes.troughs(rng, ground))
    add(*(lakes.reservoir(np.random.default_rng(SEED + 4), dam) for dam in (UPPER_DAM, NEW_DAM)))
    add(lakes.joined(rng, ground, shore, rising=True))
    add(lakes.joined(rng, ground, shore, rising=False))
    areas = np.exp(np.linspace(np.log(2.4e4), np.log(1.5e6), 13))
    stories += lakes.tarns(rng, ground, shore, areas)
    ponds = list(lakes.kettles(rng, shore, 13))
    # One pond was drained.
    stories += [*ponds[:-1], lakes.Story(ponds[-1].earlier, ())]
    return Valley(ground, stream, lots, limits, stories)


def build_town(rng: np.random.Generator, stream: river.River) -> tuple[list[town.Lot], Polygon]:
    """Build the town beside the river; gives its lots, in the valley's coordinates, and its limits."""
    width, depth = town.town_size()
    foot, ahead = river.in_valley(
        np.array([(river.TOWN_STATION_M, TOWN_ACROSS_M), (river.TOWN_STATION_M + 10.0, TOWN_ACROSS_M)])
    )
    along = (ahead - foot) / np.hypot(*(ahead - foot))
    turn = np.array([along, (-along[1], along[0])])

    def place(points: np.ndarray) -> np.ndarray:
        return foot + (points - (width / 2.0, 0.0)) @ turn

    def unplace(points: np.ndarray) -> np.ndarray:
        return (points - foot) @ turn.T + (width / 2.0, 0.0)

    bank = shapely.transform(river.channel(stream.course, river.WIDTH_M + 2.0 * QUAY_M), unplace)
    lots = town.make_lots(rng, bank)
    placed = [
        town.Lot(shapely.transform(lot.shape, place), lot.column, lot.row, lot.block) for lot in lots
    ]  # fmt: skip
    limits = shapely.transform(shapely.box(-20.0, -20.0, width + 20.0, depth + 20.0), place)
    return placed, limits


ROOTS = ("Skarn", "Velda", "Morru", "Hulde", "Drevje", "Tvinna", "Jorma", "Osker", "Fjuk", "Brask", "Knaver", "Silta",
         "Rasmel", "Vamba", "Lunke", "Grysa", "Tolmi", "Hevla", "Aspra", "Nolke", "Ruska", "Stimmer", "Ormla",
         "Bjarva")  # fmt: skip
ENDINGS = {
    "trough": ("vattnet", "sj\u00f6n"), "tarn": ("tj\u00e4rnen", "sj\u00f6n"), "kettle": ("g\u00f6len", "pottan"),
    "oxbow": ("loken", "sv\u00e4ngen"), "reservoir": ("magasinet",),
}  # fmt: skip
BEFORE = ("Stora ", "Lilla ", "\u00d6vre ", "Nedre ", "V\u00e4stra ", "\u00d6stra ")


def name_lakes(rng: np.random.Generator, kinds: list[str]) -> list[str]:
    """Make up a name for each lake."""
    names: list[str] = []
    for kind in kinds:
        name = ""
        while not name or name in names:
            before = rng.choice(BEFORE) if rng.random() < 0.25 else ""
            name = f"{before}{rng.choice(ROOTS)}{rng.choice(ENDINGS[kind])}"
        names.append(name)
    return names


def make_lakes(valley: Valley) -> tuple[gpd.GeoDataFrame, gpd.GeoDataFrame]:
    """Tabulate the lakes of the later and of the earlier survey; a lake has the same number and name in both."""
    rng = np.random.default_rng(SEED + 5)
    # Numbered from west to east, as a register would be; a part split off or swallowed has a number of its own.
    stories = sorted(valley.stories, key=lambda story: (story.later or story.earlier)[0].outline.centroid.x)
    longest = [max(story.later, story.earlier, key=len) for story in stories]
    names = name_lakes(rng, [lake.kind for group in longest for lake in group])
    rows: dict[str, list[dict[str, object]]] = {"later": [], "earlier": []}
    number = 0
    for story, group in zip(stories, longest, strict=True):
        survey = {"later": int(rng.choice([2021, 2022, 2023])), "earlier": int(rng.choice([1986, 1987]))}
        for when, found in (("later", story.later), ("earlier", story.earlier)):
            for i, lake in enumerate(found):
                rows[when].append(_lake_row(f"SK{number + i + 1:03d}", names[number + i], lake, survey[when]))
        number += len(group)
    later, earlier = (gpd.GeoDataFrame(rows[when], geometry="geometry") for when in ("later", "earlier"))
    earlier.geometry = [_coarser(rng, shape) for shape in earlier.geometry]
    return _in_valley(later), _in_valley(earlier)


def _lake_row(lake_id: str, name: str, lake: lakes.Lake, year: int) -> dict[str, object]:
    centre = lake.outline.centroid
    return {
        "lake_id": lake_id,
        "name": name,
        "basin": "upper" if centre.x < 15_500.0 else "lower",
        "lake_type": lake.kind,
        "elevation_m": round(lake.level_m, 1),
        "max_depth_m": round(lake.depth_m, 1),
        "survey_year": year,
        "geometry": lake.outline,
    }


def _coarser(rng: np.random.Generator, shape: Polygon) -> Polygon:
    """Digitise an outline as from a small-scale map: fewer points, none of them exact, small islands left out."""
    tolerance = float(np.clip(0.012 * np.sqrt(shape.area), 2.0, 14.0))
    rings = [shape.exterior, *(hole for hole in shape.interiors if Polygon(hole).area > 8.0 * tolerance**2)]
    drawn = []
    for ring in rings:
        points = shapely.get_coordinates(shapely.simplify(ring, tolerance))[:-1]
        points = points + rng.normal(0.0, 0.3 * tolerance, points.shape)
        drawn.append(Polygon(points))
    shell = max(shapely.get_parts(shapely.make_valid(drawn[0])).tolist(), key=lambda part: part.area)
    return max(shapely.get_parts(shell.difference(shapely.union_all(drawn[1:]))).tolist(), key=lambda part: part.area)


def make_patches(valley: Valley) -> gpd.GeoDataFrame:
    """Map the habitat patches and tabulate them, from north to south."""
    rng = np.random.default_rng(SEED + 6)
    water = shapely.union_all([lake.outline for story in valley.stories for lake in story.later])
    stream = river.channel(valley.river.course, river.WIDTH_M + 4.0)
    cover = habitats.Cover(shapely.buffer(water, 6.0), stream, shapely.buffer(valley.limits, 15.0))
    patches = [
        *habitats.wet_meadows(rng, valley.river, cover, 36),
        *habitats.woodlands(rng, valley.ground, cover, 48),
        *habitats.heaths(rng, valley.ground, cover, 36),
        *habitats.scrubs(rng, valley.ground, cover, 34),
    ]
    patches.sort(key=lambda patch: -patch.shape.centroid.y)
    odds = {
        "woodland": (0.5, 0.4, 0.1),
        "wet meadow": (0.25, 0.4, 0.35),
        "heath": (0.4, 0.4, 0.2),
        "scrub": (0.2, 0.5, 0.3),
    }
    first = np.datetime64("2024-05-13")
    frame = gpd.GeoDataFrame(
        {
            "patch_id": np.arange(1, len(patches) + 1),
            "habitat": [patch.habitat for patch in patches],
            "condition": [str(rng.choice(["good", "fair", "poor"], p=odds[patch.habitat])) for patch in patches],
            # Field work went from north to south, a few patches a day.
            "surveyed": [str(first + np.timedelta64(int(i // 2.2), "D")) for i in range(len(patches))],
        },
        geometry=[patch.shape for patch in patches],
    )
    frame = _in_valley(frame).to_crs(PATCH_CRS)
    return frame.set_geometry(gpd.GeoSeries(shapely.set_precision(frame.geometry.to_numpy(), 1e-7), crs=PATCH_CRS))


def make_parcels(valley: Valley) -> gpd.GeoDataFrame:
    """Tabulate the parcels, and plant what real layers bring along."""
    rng = np.random.default_rng(SEED + 7)
    numbers: dict[int, int] = {}
    rows = []
    for lot in valley.lots:
        numbers[lot.block] = numbers.get(lot.block, 0) + 1
        rows.append({"parcel_id": f"{lot.block:02d}-{numbers[lot.block]:03d}", **_parcel_values(rng, lot)})
    frame = _in_valley(gpd.GeoDataFrame(rows, geometry=[lot.shape for lot in valley.lots])).to_crs(PARCEL_CRS)
    shapes = _rounded(frame.geometry.to_numpy(), 3)
    square = shapely.area(shapes) / shapely.area(shapely.minimum_rotated_rectangle(shapes))
    ordinary = np.flatnonzero((shapely.area(shapes) > 350.0) & (square > 0.98))
    bow_tie, empty, missing, doubled = ordinary[[len(ordinary) * k // 9 for k in (1, 3, 6, 8)]]
    shapes[bow_tie] = town.with_corners_swapped(shapes[bow_tie])
    shapes[empty], shapes[missing] = Polygon(), None
    frame = frame.set_geometry(gpd.GeoSeries(shapes, crs=PARCEL_CRS))
    order = np.insert(np.arange(len(frame)), doubled + 1, doubled)
    return frame.iloc[order].reset_index(drop=True)


# By zone: land uses with their odds, and the value of a square metre.
ZONES = {
    "C": ({"shop": 0.6, "office": 0.25, "dwelling": 0.1, "vacant": 0.05}, 310.0),
    "R1": ({"dwelling": 0.93, "vacant": 0.07}, 150.0),
    "R2": ({"dwelling": 0.95, "vacant": 0.05}, 215.0),
    "M": ({"works": 0.7, "yard": 0.3}, 70.0),
    "P": ({"public": 1.0}, 40.0),
}


def _parcel_values(rng: np.random.Generator, lot: town.Lot) -> dict[str, object]:
    zone = town.zone_of(lot)
    uses, value = ZONES[zone]
    use = str(rng.choice(list(uses), p=list(uses.values())))
    if lot.shape.area < 150.0 and zone in {"R1", "C"}:
        use = "verge"
    odds = [0.86, 0.11, 0.03] if zone.startswith("R") else [0.3, 0.65, 0.05]
    owner = str(rng.choice(["private", "company", "parish"], p=odds))
    if zone == "P" or use == "verge":
        owner = "parish"
    # Value grows more slowly than area; what cannot be built on is worth little.
    worth = value * 700.0 * (lot.shape.area / 700.0) ** 0.75 * rng.lognormal(0.0, 0.16)
    assessed = worth * {"vacant": 0.45, "verge": 0.03}.get(use, 1.0)
    return {"zone": zone, "land_use": use, "owner_type": owner, "assessed_value": float(np.round(assessed, -2))}


def _rounded(shapes: np.ndarray, digits: int) -> np.ndarray:
    # Point by point: what neighbours share stays shared.
    return shapely.transform(shapes, lambda points: np.round(points, digits))


def _in_valley(frame: gpd.GeoDataFrame) -> gpd.GeoDataFrame:
    moved = shapely.transform(frame.geometry.to_numpy(), lambda points: np.round(points + ORIGIN, 2))
    return frame.set_geometry(gpd.GeoSeries(moved, crs=VALLEY_CRS))


def make_all() -> dict[str, gpd.GeoDataFrame]:
    """Make the layers, by file name."""
    valley = make_valley()
    later, earlier = make_lakes(valley)
    return {
        "lakes.gpkg": later,
        "lakes_earlier.gpkg": earlier,
        "patches.geojson": make_patches(valley),
        "parcels.gpkg": make_parcels(valley),
    }


def write(frame: gpd.GeoDataFrame, path: Path) -> None:
    """Write a layer, the same bytes for the same layer."""
    path.unlink(missing_ok=True)
    pyogrio.set_gdal_config_options({"OGR_CURRENT_DATE": WRITTEN})
    options = {"RFC7946": "YES", "COORDINATE_PRECISION": "7"} if path.suffix == ".geojson" else {}
    try:
        frame.to_file(path, layer=path.stem, engine="pyogrio", **options)
    finally:
        pyogrio.set_gdal_config_options({"OGR_CURRENT_DATE": None})


if __name__ == "__main__":
    for file_name, made in make_all().items():
        write(made, HERE / file_name)
        print(f"{file_name}: {len(made)} rows")
