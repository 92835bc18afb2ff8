"""Outlines laid on the ground as a measurement lays them: screened, made whole, repaired, placed."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from geoshape import geometry
from geoshape.columns import Status
from geoshape.decide.outlines import Outlines, prepare_rings
from geoshape.formulas.arclength import edge_lengths
from geoshape.geometry import ObjectArray, Verdicts
from geoshape.ground.place import Ground, Placed
from geoshape.ground.seams import rejoin
from geoshape.measuring import NO_AREA
from geoshape.options import Holes, MeasureOptions
from geoshape.rings import IntArray


@dataclass(frozen=True, eq=False)
class Laid:
    """Polygons of a batch on the ground.

    Attributes
    ----------
    placed : Placed
        Those that can be measured; the others have no rings.
    frames : (n,) int64
        Frame of each feature's coordinates, from `Ground.unwrap`.
    verdicts : Verdicts
    """

    placed: Placed
    frames: IntArray
    verdicts: Verdicts

    def record(self) -> dict[str, object]:
        """Give the columns that say what became of each row, by name."""
        notes = self.verdicts.notes
        measured = self.verdicts.is_measured()
        return {
            "shape_status": [str(status) for status in self.verdicts.status],
            "shape_note": [notes.get(row) for row in range(len(measured))],
            "ground_distortion": np.where(measured, self.placed.distortion_deg, np.nan),
        }

    def outlines(self) -> Outlines:
        """Prepare the outlines for matching, y to true north."""
        outlines = prepare_rings(self.placed.batch)
        turn = np.exp(-1j * np.radians(self.placed.convergence_deg))
        return replace(outlines, coefficients=outlines.coefficients * turn[:, None])


def lay(
    geometries: ObjectArray,
    unreadable: dict[int, str],
    ground: Ground,
    options: MeasureOptions,
    *,
    first_row: int = 0,
) -> Laid:
    """Lay polygons on the ground.

    Parameters
    ----------
    geometries : (n,) object of shapely geometries or None
        In the CRS that the ground was planned for.
    unreadable : dict of int to str
        Rows that held something which is no geometry, with the reason.
    ground : Ground
    options : MeasureOptions
        ``invalid`` and ``holes`` decide.
    first_row : int
        Row of the layer that the batch begins with, for messages.

    Returns
    -------
    Laid

    Raises
    ------
    GeometryError
        A geometry is invalid and ``options.invalid`` is ``stop``.
    """
    geometries = ground.in_degrees(geometries)
    polygons, verdicts = geometry.screen(geometries, unreadable, is_geographic=ground.plan.is_geographic)
    polygons, frames, is_cut = ground.unwrap(polygons)
    polygons = geometry.repair(rejoin(polygons, is_cut), verdicts, options.invalid, first_row)
    if options.holes is Holes.FILL:
        polygons = geometry.filled(polygons)
    source = geometry.ring_batch(polygons)
    placed = ground.place(source, frames)
    expected = verdicts.is_measured()
    has_rings = np.bincount(source.ring_feature, minlength=source.n_features) > 0
    for row, fault in placed.faults.items():
        if expected[row] and has_rings[row]:
            verdicts.mark(np.array([row]), Status.INVALID, fault)
    batch = placed.batch
    area = batch.sum_ring_values(batch.ring_signed_area)
    with np.errstate(invalid="ignore", over="ignore"):
        is_flat = ~(area > NO_AREA * batch.sum_features(edge_lengths(batch)) ** 2)
    verdicts.mark(np.flatnonzero(verdicts.is_measured() & is_flat), Status.COLLAPSED, "no area")
    keep = verdicts.is_measured()
    return Laid(replace(placed, batch=batch.take_rings(keep[batch.ring_feature])), frames, verdicts)
