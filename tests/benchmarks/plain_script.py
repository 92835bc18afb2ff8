"""The script that a capable person would write: the same numbers, one polygon at a time.

``python -m tests.benchmarks.plain_script INPUT OUTPUT [ROWS]``
"""

from __future__ import annotations

import sys

import cv2
import geopandas as gpd
import numpy as np
import shapely


def describe(polygon: shapely.Geometry) -> dict[str, float]:
    """Measure one polygon on its plane."""
    area, perimeter = polygon.area, polygon.length
    hull = polygon.convex_hull
    rectangle = polygon.minimum_rotated_rectangle
    radius = shapely.minimum_bounding_radius(polygon)
    largest = max(getattr(polygon, "geoms", [polygon]), key=lambda part: part.area)
    ring = largest.exterior
    corners = np.asarray(hull.exterior.coords)
    spans = np.hypot(*(corners[:, None, :] - corners[None, :, :]).transpose(2, 0, 1))
    row = {
        "area": area,
        "perimeter": perimeter,
        "feret_max": spans.max(),
        "polsby_popper": 4 * np.pi * area / perimeter**2,
        "perimeter_ratio": perimeter / (2 * np.sqrt(np.pi * area)),
        "reock": area / (np.pi * radius**2),
        "convexity": area / hull.area,
        "rectangularity": area / rectangle.area,
    }
    centre = polygon.centroid
    local = np.asarray(ring.coords) - (centre.x, centre.y)
    moments = cv2.moments(local.astype(np.float32))
    row |= {f"hu_{i + 1}": value for i, value in enumerate(cv2.HuMoments(moments).ravel())}
    matrix = np.array([[moments["mu20"], moments["mu11"]], [moments["mu11"], moments["mu02"]]]) / moments["m00"]
    values, vectors = np.linalg.eigh(matrix)
    row |= {
        "major": 4 * np.sqrt(max(values[1], 0.0)),
        "minor": 4 * np.sqrt(max(values[0], 0.0)),
        "azimuth": np.degrees(np.arctan2(vectors[0, 1], vectors[1, 1])) % 180.0,
    }
    points = shapely.line_interpolate_point(ring, np.arange(256) / 256, normalized=True)
    z = shapely.get_x(points) + 1j * shapely.get_y(points)
    spectrum = np.abs(np.fft.fft(z) / 256)
    for k in range(2, 9):
        row[f"fd_p{k:02d}"] = spectrum[k] / spectrum[1]
    for k in range(1, 9):
        row[f"fd_n{k:02d}"] = spectrum[-k] / spectrum[1]
    return row


def main() -> None:
    """Read, project, measure one by one, write."""
    source, target = sys.argv[1:3]
    layer = gpd.read_file(source, rows=int(sys.argv[3]) if len(sys.argv) > 3 else None)
    flat = layer.to_crs(3035)
    valid = flat.geometry.make_valid()
    rows = [describe(polygon) for polygon in valid]
    result = layer.assign(**{name: [row[name] for row in rows] for name in rows[0]})
    result.to_file(target, driver="GPKG")


if __name__ == "__main__":
    main()
