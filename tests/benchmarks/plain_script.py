"""The script that one would write by hand: the same numbers, one polygon at a time.

Run as ``python -m tests.benchmarks.plain_script INPUT OUTPUT [ROWS]``; prints the seconds that reading, measuring and
writing took, as JSON. It projects to one equal-area CRS and lets OpenCV make the moments.
"""

from __future__ import annotations

import json
import sys
import time

import cv2
import geopandas as gpd
import numpy as np
import shapely

EQUAL_AREA = "EPSG:3035"
SAMPLES, HARMONICS, ALL_HARMONICS = 256, 8, 32
SHARES = np.arange(SAMPLES) / SAMPLES
RAW = ("m00", "m10", "m01", "m20", "m11", "m02", "m30", "m21", "m12", "m03")


def measure(shape: shapely.Geometry) -> dict[str, float]:
    """Measure one polygon."""
    area, perimeter = shape.area, shape.length
    hull = shape.convex_hull
    circle_area = np.pi * shapely.minimum_bounding_radius(shape) ** 2
    rectangle = shapely.get_coordinates(hull.minimum_rotated_rectangle)
    sides = np.hypot(*np.diff(rectangle[:3], axis=0).T)
    parts = shapely.get_parts(shape)
    row = {
        "area_m2": area,
        "perimeter_m": perimeter,
        "outline_m": sum(part.exterior.length for part in parts),
        "part_count": len(parts),
        "hole_count": sum(len(part.interiors) for part in parts),
        "vertex_count": shapely.get_num_coordinates(shape) - sum(1 + len(part.interiors) for part in parts),
        "long_side_m": sides.max(),
        "short_side_m": sides.min(),
        "polsby_popper": 4.0 * np.pi * area / perimeter**2,
        "perimeter_ratio": perimeter / (2.0 * np.sqrt(np.pi * area)),
        "reock": area / circle_area,
        "convexity": area / hull.area,
        "rectangularity": area / (sides[0] * sides[1]),
    }
    row |= moments(shape, parts)
    largest = max(parts, key=lambda part: part.area)
    row |= spectrum(shapely.get_coordinates(largest.exterior))
    return row


def moments(shape: shapely.Geometry, parts: np.ndarray) -> dict[str, float]:
    """Sum OpenCV's moments over the rings, and take axes and Hu's invariants from them."""
    centre = shapely.get_coordinates(shape.centroid)[0]
    raw = dict.fromkeys(RAW, 0.0)
    for part in parts:
        for number, ring in enumerate((part.exterior, *part.interiors)):
            contour = (shapely.get_coordinates(ring)[:-1] - centre).astype(np.float32)
            # OpenCV's moments do not know which way a ring turns.
            found, sign = cv2.moments(contour[:, None, :]), 1.0 if number == 0 else -1.0
            for name in RAW:
                raw[name] += sign * found[name]
    m00 = raw["m00"]
    x, y = raw["m10"] / m00, raw["m01"] / m00
    mu20, mu02, mu11 = raw["m20"] - x * raw["m10"], raw["m02"] - y * raw["m01"], raw["m11"] - x * raw["m01"]
    mu30 = raw["m30"] - 3 * x * raw["m20"] + 2 * x * x * raw["m10"]
    mu21 = raw["m21"] - 2 * x * raw["m11"] - y * raw["m20"] + 2 * x * x * raw["m01"]
    mu12 = raw["m12"] - 2 * y * raw["m11"] - x * raw["m02"] + 2 * y * y * raw["m10"]
    mu03 = raw["m03"] - 3 * y * raw["m02"] + 2 * y * y * raw["m01"]
    central = {"mu20": mu20, "mu11": mu11, "mu02": mu02, "mu30": mu30, "mu21": mu21, "mu12": mu12, "mu03": mu03}
    eta = {
        name.replace("mu", "nu"): mu / m00 ** (1.0 + (int(name[2]) + int(name[3])) / 2.0)
        for name, mu in central.items()
    }
    hu = cv2.HuMoments({**raw, **central, **eta}).ravel()
    spread = np.hypot(mu20 - mu02, 2.0 * mu11)
    major, minor = (4.0 * np.sqrt(max(mu20 + mu02 + s * spread, 0.0) / (2.0 * m00)) for s in (1.0, -1.0))
    affine_1 = (mu20 * mu02 - mu11**2) / m00**4
    ellipticity = 16.0 * np.pi**2 * affine_1
    return {
        **{f"hu_{i}": value for i, value in enumerate(hu, start=1)},
        "major_axis_m": major,
        "minor_axis_m": minor,
        "axis_ratio": minor / major,
        "axis_azimuth_deg": (90.0 - np.degrees(0.5 * np.arctan2(2.0 * mu11, mu20 - mu02))) % 180.0,
        "inertia_compactness": m00**2 / (2.0 * np.pi * (mu20 + mu02)),
        "affine_1": affine_1,
        "ellipticity": min(ellipticity, 1.0 / ellipticity),
    }


def spectrum(ring: np.ndarray) -> dict[str, float]:
    """Resample an outline at equal arc length and take its amplitudes."""
    at = np.concatenate(([0.0], np.cumsum(np.hypot(*np.diff(ring, axis=0).T))))
    where = at[-1] * SHARES
    z = np.interp(where, at, ring[:, 0]) + 1j * np.interp(where, at, ring[:, 1])
    amplitude = np.abs(np.fft.fft(z)) / SAMPLES
    if not shapely.is_ccw(shapely.linearrings(ring)):
        amplitude[1:] = amplitude[:0:-1]
    row = {f"fd_p{k:02d}": amplitude[k] / amplitude[1] for k in range(2, HARMONICS + 1)}
    row |= {f"fd_n{k:02d}": amplitude[-k] / amplitude[1] for k in range(1, HARMONICS + 1)}
    rest = np.concatenate((amplitude[2 : ALL_HARMONICS + 1], amplitude[-ALL_HARMONICS:]))
    share = rest**2 / (rest**2).sum()
    pairs = np.arange(1, ALL_HARMONICS + 1) ** 2 * (
        amplitude[1:][:ALL_HARMONICS] ** 2 + amplitude[::-1][:ALL_HARMONICS] ** 2
    )
    row["fd_departure"] = np.sqrt((rest**2).sum()) / amplitude[1]
    row["fd_entropy"] = -(share * np.log2(share, where=share > 0, out=np.zeros_like(share))).sum()
    row["fd_harmonics_95"] = int(np.searchsorted(np.cumsum(pairs), 0.95 * pairs.sum())) + 1
    return row


def main(source: str, target: str, rows: int | None) -> dict[str, float]:
    """Measure a layer, or its first rows; gives the seconds that each step took."""
    clock = [time.perf_counter()]
    layer = gpd.read_file(source, rows=rows).to_crs(EQUAL_AREA)
    clock.append(time.perf_counter())
    found = [measure(shape) for shape in layer.geometry]
    clock.append(time.perf_counter())
    gpd.GeoDataFrame({**layer.drop(columns="geometry"), **_columns(found)}, geometry=layer.geometry).to_file(target)
    clock.append(time.perf_counter())
    read, measured, written = np.diff(clock)
    return {"rows": len(layer), "read_s": read, "measure_s": measured, "write_s": written}


def _columns(found: list[dict[str, float]]) -> dict[str, list[float]]:
    return {name: [row[name] for row in found] for name in found[0]}


if __name__ == "__main__":
    print(json.dumps(main(sys.argv[1], sys.argv[2], int(sys.argv[3]) if len(sys.argv) > 3 else None)))
