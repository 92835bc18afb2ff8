"""What a worker process does with a batch; imports no more than that takes, since every process pays for it."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace

from geoshape.geometry import read_wkb
from geoshape.ground.equal_area import GroundPlan
from geoshape.ground.place import open_ground
from geoshape.measuring import Measured, measure_geometries, wkb_of
from geoshape.options import MeasureOptions

Sent = tuple[list[bytes | None], int]


def prepare(settings: tuple[GroundPlan, MeasureOptions]) -> Callable[[Sent], Measured]:
    """Open the ground once in a process.

    Parameters
    ----------
    settings : (GroundPlan, MeasureOptions)

    Returns
    -------
    callable
        Takes the WKB of a batch's rows and the number of its first row, and measures them; split parts come back as
        WKB too.
    """
    plan, options = settings
    ground = open_ground(plan)

    def work(sent: Sent) -> Measured:
        values, first_row = sent
        geometries, unreadable = read_wkb(values)
        measured = measure_geometries(geometries, ground, options, unreadable=unreadable, first_row=first_row)
        if measured.geometry is None:
            return measured
        return replace(measured, geometry=wkb_of(measured.geometry))

    return work
