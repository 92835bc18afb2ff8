"""Colours of the page and its figures.

Numbers take cividis (Nunez, Anderton & Renslow 2018, PLOS ONE 13), perceptually even with and without colour
blindness. Classes take the colours of Okabe & Ito (2008), Color Universal Design, its black left to the outlines.
"""

from __future__ import annotations

import numpy as np
from bokeh.palettes import Cividis256
from numpy.typing import NDArray

from geoshape.rings import FloatArray

ObjectArray = NDArray[np.object_]

RAMP: tuple[str, ...] = tuple(Cividis256)
CLASSES = ("#0072b2", "#e69f00", "#009e73", "#cc79a7", "#56b4e9", "#d55e00", "#f0e442", "#7b6a58")
OTHER = "#b9b4a6"
"""Classes beyond the palette."""

PAPER = "#fbfaf5"
INK = "#1c2b2d"
QUIET = "#5a6462"
RULE = "#d9d5c8"
NULL_FILL = "#efece2"
SEAL = "#a3341f"
"""What is selected."""

KELP = "#1d5a57"


def ramp_colours(values: FloatArray, low: float, high: float) -> ObjectArray:
    """Colour values along the ramp.

    Parameters
    ----------
    values : (n,) float64
    low, high : float
        Values at the ramp's ends.

    Returns
    -------
    (n,) object of str or None
        None where null.
    """
    span = high - low
    place = np.full(len(values), 0.5) if not span > 0 else (values - low) / span
    known = ~np.isnan(values)
    colours = np.full(len(values), None, dtype=object)
    index = np.clip(np.nan_to_num(place) * (len(RAMP) - 1), 0, len(RAMP) - 1).astype(np.int64)
    colours[known] = np.array(RAMP, dtype=object)[index[known]]
    return colours
