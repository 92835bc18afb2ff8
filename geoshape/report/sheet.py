"""The contact sheet: small outlines of the extremes and the typical of each column, and of each group."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import shapely

from geoshape.report.data import View
from geoshape.report.encoding import extents, simplified_rings
from geoshape.report.placing import CloseUps
from geoshape.report.wording import count_text, formula_text, length_text, plain_name, unit_text, value_text
from geoshape.rings import IntArray, RingBatch

HALF = 90
"""Half the side of the square that a small outline fills, in the units of its drawing."""

COARSE = 1.0
"""Tolerance of simplification in the same units: a small outline is some 100 pixels wide."""

MEMBERS = 5
MAX_GROUPS = 12

KEY_COLUMNS = (
    "area_m2",
    "polsby_popper",
    "axis_ratio",
    "convexity",
    "inertia_compactness",
    "fd_departure",
    "fd_entropy",
    "divider_dimension",
)


@dataclass(frozen=True)
class Tile:
    """A small outline.

    Attributes
    ----------
    index : int
        Place of the shape among the shapes drawn on the page.
    label : str
        Name of the shape.
    value : str
        What is told under it.
    path : str
        Its outline, y downwards, within -90 ... 90.
    scale : float
        Its extent over that of the largest of its row.
    place : str
        ``"lowest"``, ``"typical"``, ``"highest"``, ``"prototype"``, ``"member"`` or ``"flagged"``.
    """

    index: int
    label: str
    value: str
    path: str
    scale: float
    place: str


@dataclass(frozen=True)
class SheetRow:
    """A row of small outlines.

    Attributes
    ----------
    title, note : str
        Heading and what it means.
    width : str
        Length that the width of a tile stands for where all are drawn to one scale.
    tiles : tuple of Tile
    """

    title: str
    note: str
    width: str
    tiles: tuple[Tile, ...]


@dataclass(frozen=True, eq=False)
class Sheet:
    """Makes rows of small outlines from the shapes on the page.

    Attributes
    ----------
    view : View
    rows : (m,) int64
        Rows of the table that are on the page, ascending.
    shapes : CloseUps
        Their shapes.
    """

    view: View
    rows: IntArray
    shapes: CloseUps

    def of_columns(self) -> tuple[SheetRow, ...]:
        """Give the extremes and the typical of the key columns."""
        names = [name for name in (self.view.named(bare) for bare in KEY_COLUMNS) if name]
        found = [self.of_column(name) for name in names]
        return tuple(row for row in found if row.tiles)

    def of_column(self, name: str) -> SheetRow:
        """Give the extremes and the typical of one column; all of them are on the page."""
        field = self.view.by_name[name]
        values = self.view.numbers(name)
        kinds = zip(("lowest", "typical", "highest"), self.view.ends(name), strict=True)
        chosen = [(int(row), place) for place, rows in kinds for row in rows]
        captions = {row: value_text(float(values[row]), field, 3) for row, _ in chosen}
        title = plain_name(field, self.view.prefix)
        unit = unit_text(field.unit)
        note = f"{field.name}{f', {unit}' if unit else ''}: {formula_text(field.meaning)}"
        return self._row(title[:1].upper() + title[1:], note, chosen, captions)

    def of_groups(self) -> tuple[SheetRow, ...]:
        """Give the prototype of each group and members from near to far; empty without groups."""
        name = self.view.named("group")
        if name is None:
            return ()
        groups = np.array(self.view.texts(name), dtype=object)
        levels = self.view.levels(name) or list(dict.fromkeys(text for text in groups.tolist() if text is not None))
        sizes = {level: int(np.count_nonzero(groups == level)) for level in levels}
        levels.sort(key=lambda level: -sizes[level])
        return tuple(self._of_group(level, np.flatnonzero(groups == level)) for level in levels[:MAX_GROUPS])

    def of_flagged(self, rows: IntArray, reasons: list[str]) -> SheetRow:
        """Give flagged shapes with the reasons."""
        captions = {int(row): reason for row, reason in zip(rows, reasons, strict=True)}
        return self._row("Flagged", "", [(int(row), "flagged") for row in rows], captions)

    def _of_group(self, level: str, members: IntArray) -> SheetRow:
        distance = self.view.bare("group_distance")
        here = members[np.isin(members, self.rows)]
        ordered = here if distance is None else here[np.argsort(np.nan_to_num(distance[here], nan=np.inf))]
        prototype = self._prototypes(ordered)
        others = ordered[~np.isin(ordered, prototype)]
        spread = others[np.unique(np.linspace(0, len(others) - 1, MEMBERS).astype(np.int64))] if len(others) else others
        chosen = [(int(row), "prototype") for row in prototype] + [(int(row), "member") for row in spread]
        captions = {row: "prototype" if place == "prototype" else self._distance_text(row) for row, place in chosen}
        return self._row(f"Group {level}", count_text(len(members), "shape"), chosen, captions)

    def _prototypes(self, rows: IntArray) -> IntArray:
        name = self.view.named("is_prototype")
        if name is None:
            return rows[:0]
        is_prototype = np.array([text in {"yes", "1"} for text in self.view.texts(name, rows)], dtype=np.bool_)
        return rows[is_prototype][:1]

    def _distance_text(self, row: int) -> str:
        name = self.view.named("group_distance")
        if name is None:
            return ""
        return f"distance {value_text(float(self.view.numbers(name)[row]), self.view.by_name[name], 2)}"

    def _row(self, title: str, note: str, chosen: list[tuple[int, str]], captions: dict[int, str]) -> SheetRow:
        on_page = set(self.rows.tolist())
        chosen = [(row, place) for row, place in chosen if row in on_page]
        index = np.searchsorted(self.rows, [row for row, _ in chosen]).astype(np.int64)
        size = extents(self.shapes.outline)[index] if len(index) else np.zeros(0)
        largest = float(size.max()) if len(size) and size.max() > 0 else 1.0
        paths = small_paths(self.shapes.outline, index)
        tiles = tuple(
            Tile(int(at), self.view.label(row), captions[row], path, float(own / largest), place)
            for at, (row, place), path, own in zip(index, chosen, paths, size, strict=True)
            if path
        )
        return SheetRow(title, note, length_text(largest * 100.0 / HALF), tiles)


def small_paths(outline: RingBatch, chosen: IntArray, half: int = HALF) -> list[str]:
    """Draw some features as SVG paths of whole numbers, each filling the square of a small outline.

    Parameters
    ----------
    outline : RingBatch
        North up, y upwards.
    chosen : (m,) int64
        Features.
    half : int
        Half the side of that square in the units of the drawing: the larger, the finer.

    Returns
    -------
    list of str
        Empty for a feature without rings.

    Examples
    --------
    >>> from geoshape.geometry import ring_batch
    >>> square = ring_batch(shapely.box([10.0], 0.0, 12.0, 2.0))
    >>> small_paths(square, np.array([0]))
    ['M90,90V-90H-90V90z']
    """
    size = extents(outline)
    paths = []
    for feature in chosen.tolist():
        rings = np.flatnonzero(outline.ring_feature == feature)
        paths.append("".join(_ring_paths(outline, rings, 2.0 * half / float(size[feature] or 1.0))))
    return paths


def _ring_paths(outline: RingBatch, rings: IntArray, factor: float) -> list[str]:
    pieces = []
    spans = [slice(outline.ring_start[ring], outline.ring_start[ring + 1]) for ring in rings]
    if not spans:
        return []
    x = np.concatenate([outline.x[span] for span in spans])
    y = np.concatenate([outline.y[span] for span in spans])
    middle_x, middle_y = 0.5 * (x.min() + x.max()), 0.5 * (y.min() + y.max())
    for span in spans:
        corners = np.column_stack(((outline.x[span] - middle_x) * factor, (middle_y - outline.y[span]) * factor))
        pieces.append(path_of(corners, COARSE))
    return pieces


def path_of(corners: np.ndarray, tolerance: float) -> str:
    """Write a closed ring as an SVG path of whole numbers, simplified; empty where nothing is left to see."""
    rings = simplified_rings(np.asarray(shapely.linearrings(corners[None])), np.array([tolerance]))
    points = np.rint(shapely.get_coordinates(rings)[:-1]).astype(np.int64)
    keep = np.any(points != np.roll(points, 1, axis=0), axis=1)
    points = points[keep]
    if len(points) < 3:
        return ""
    text = [f"M{points[0, 0]},{points[0, 1]}"]
    for (x0, y0), (x1, y1) in zip(points[:-1].tolist(), points[1:].tolist(), strict=True):
        if x0 == x1:
            text.append(f"V{y1}")
        elif y0 == y1:
            text.append(f"H{x1}")
        else:
            text.append(f"L{x1},{y1}")
    return "".join(text) + "z"
