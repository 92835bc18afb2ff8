"""One equal-area plane for two layers, so that what covers the same ground lies upon each other."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
import pyproj
import shapely
from numpy.typing import NDArray
from pyproj.transformer import TransformerGroup

from geoshape.errors import GroundError
from geoshape.ground.crs_parts import geodetic, horizontal, length_unit_m, meridian_deg, unfolded
from geoshape.ground.equal_area import GroundKind, GroundPlan, plan_ground
from geoshape.ground.place import Placed
from geoshape.options import GROUND_CENTRED, GROUND_LAYER, GROUND_PLANE, Bounds, MeasureOptions
from geoshape.rings import RingBatch

ObjectArray = NDArray[np.object_]

EDGE_POINTS = 21
"""Points along each side of an extent by which it is brought into another CRS."""


@dataclass(frozen=True)
class JointPlan:
    """How two layers come onto one plane.

    Attributes
    ----------
    first, second : GroundPlan
        Of the same plane, each from its layer's own coordinates; the second from those of the first layer where a shift
        of datum lies between.
    shift : pyproj.Transformer or None
        Brings the second layer's coordinates into the first's CRS; None where both lie on one datum.
    warnings : tuple of str
        That the shift of datum is a rough one, and what the plan itself warns of.
    """

    first: GroundPlan
    second: GroundPlan
    shift: pyproj.Transformer | None
    warnings: tuple[str, ...]

    def shifted(self, geometries: ObjectArray) -> ObjectArray:
        """Bring the second layer's geometries into the coordinates that `second` is planned from."""
        if self.shift is None:
            return geometries
        shift = self.shift
        return np.asarray(shapely.transform(geometries, lambda points: np.column_stack(shift.transform(*points.T))))


def plan_joint_ground(
    crs: tuple[pyproj.CRS | None, pyproj.CRS | None],
    bounds: tuple[Bounds | None, Bounds | None],
    options: MeasureOptions,
) -> JointPlan:
    """Plan one plane for two layers.

    Parameters
    ----------
    crs : (pyproj.CRS or None, pyproj.CRS or None)
        Of the layers.
    bounds : (bounds or None, bounds or None)
        Their extents, each in its own CRS.
    options : MeasureOptions
        ``ground``: the layers' coordinates as they are for ``plane``, the CRS named where one is, else an equal-area
        projection chosen for both extents.

    Returns
    -------
    JointPlan

    Raises
    ------
    GroundError
        A layer has no CRS, or coordinates as they are would be those of two CRSs.
    """
    if options.ground == GROUND_PLANE:
        return _as_they_are(crs, bounds, options)
    if crs[0] is None or crs[1] is None:
        side = "before" if crs[0] is None else "after"
        raise GroundError(
            f"the layer {side} has no CRS, so nobody knows where it lies upon the other; say which with --assume-crs, "
            "or compare coordinates as they are with --ground plane"
        )
    own, other = horizontal(crs[0]), horizontal(crs[1])
    named = options.ground not in {GROUND_LAYER, GROUND_CENTRED}
    joint = _joint_bounds(own, other, bounds)
    first = plan_ground(own, joint, options if named else replace(options, ground=GROUND_LAYER))
    if geodetic(own).equals(geodetic(other), ignore_axis_order=True):
        second = plan_ground(other, bounds[1], replace(options, ground=str(first.target_wkt)))
        second = replace(second, label=first.label)
        return JointPlan(first, second, None, tuple(dict.fromkeys((*first.warnings, *second.warnings))))
    shift, texts = _datum_shift(other, own)
    return JointPlan(first, first, shift, (*first.warnings, *texts))


def _as_they_are(
    crs: tuple[pyproj.CRS | None, pyproj.CRS | None],
    bounds: tuple[Bounds | None, Bounds | None],
    options: MeasureOptions,
) -> JointPlan:
    first, second = (plan_ground(own, box, options) for own, box in zip(crs, bounds, strict=True))
    if crs[0] is not None and crs[1] is not None and not crs[0].equals(crs[1], ignore_axis_order=True):
        raise GroundError(
            f"the layers are in {crs[0].name} and {crs[1].name}, whose coordinates do not compare as they are; "
            "leave out --ground plane"
        )
    return JointPlan(first, second, None, tuple(dict.fromkeys((*first.warnings, *second.warnings))))


def _joint_bounds(own: pyproj.CRS, other: pyproj.CRS, bounds: tuple[Bounds | None, Bounds | None]) -> Bounds | None:
    """Take the extent of both layers in the first's CRS."""
    boxes = [bounds[0]] if bounds[0] is not None else []
    if bounds[1] is not None:
        transformer = pyproj.Transformer.from_crs(other, own, always_xy=True)
        moved = transformer.transform_bounds(*bounds[1], densify_pts=EDGE_POINTS)
        if np.isfinite(moved).all():
            boxes.append(moved)
    if not boxes:
        return None
    west, south, east, north = zip(*boxes, strict=True)
    return min(west), min(south), max(east), max(north)


def _datum_shift(source: pyproj.CRS, target: pyproj.CRS) -> tuple[pyproj.Transformer, tuple[str, ...]]:
    """Find the best way from one datum to another that this machine knows, and say if it is a rough one."""
    group = TransformerGroup(source, target, always_xy=True)
    if not group.transformers:
        raise GroundError(
            f"PROJ knows no way from {source.name} to {target.name}, so the layers cannot be laid upon each other; "
            "reproject one of them"
        )
    best = group.transformers[0]
    if "ballpark" in best.description.lower():
        text = (
            f"{source.name} and {target.name} lie on different datums, and only a ballpark shift between them is "
            "known: places may be off by some 100 m, and so may be shifts of centroids and shared areas"
        )
        return best, (text,)
    if not group.best_available and group.unavailable_operations:
        grids = ", ".join(grid.short_name for grid in group.unavailable_operations[0].grids)
        reached = f"within {best.accuracy:g} m" if best.accuracy >= 0 else "to an accuracy that is not known"
        return best, (f"{source.name} is brought to {target.name} {reached}; a finer shift needs {grids} for PROJ",)
    return best, ()


def on_plane(placed: Placed, plan: GroundPlan) -> RingBatch:
    """Give placed features their places on the plane that they share.

    Parameters
    ----------
    placed : Placed
        By a ground of `plan`: about each feature's own centre.
    plan : GroundPlan
        Shared, or of the coordinates as they are.

    Returns
    -------
    RingBatch
        Its origins are the features' centres on the plane, in metres.
    """
    if plan.kind is GroundKind.PLANE:
        return replace(placed.batch, origin=plan.unit_m * placed.batch.origin)
    target, source = pyproj.CRS(plan.target_wkt), pyproj.CRS(plan.source_wkt)
    east, north = unfolded(plan.target_wkt)(placed.centre_deg[:, 0] + meridian_deg(source), placed.centre_deg[:, 1])
    return replace(placed.batch, origin=length_unit_m(target) * np.column_stack((east, north)))
