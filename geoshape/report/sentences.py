"""What stands out, in sentences computed from the columns."""

from __future__ import annotations

from collections import Counter
from dataclasses import dataclass

import numpy as np

from geoshape.columns import MEASURED
from geoshape.decide.circular import mean_directions
from geoshape.report.data import View
from geoshape.report.sampling import is_flagged
from geoshape.report.wording import area_text, compass, count_text, number_text, share_text, whole_text
from geoshape.rings import FloatArray

PREVAILS_BELOW = 0.05
"""Probability, if directions were even, below which one is said to prevail."""

STATUS_WORDS = {
    "ok": "measured as read",
    "repaired": "repaired, then measured",
    "empty": "empty geometry",
    "missing": "no geometry",
    "not_polygon": "no polygon",
    "collapsed": "no area",
    "invalid": "could not be measured",
}


@dataclass(frozen=True)
class Finding:
    """A shape that stands out.

    Attributes
    ----------
    title : str
        What it is most of.
    row : int
        Row of the table.
    label : str
        Its name.
    text : str
        The sentence.
    """

    title: str
    row: int
    label: str
    text: str


@dataclass(frozen=True)
class StatusCount:
    """How many rows came to what.

    Attributes
    ----------
    status, meaning : str
    count : int
    share : str
        Of all rows, in per cent.
    is_measured : bool
    """

    status: str
    meaning: str
    count: int
    share: str
    is_measured: bool


def status_counts(view: View) -> tuple[StatusCount, ...]:
    """Count rows by status, most first; empty where the layer has no status."""
    name = view.named("shape_status")
    if name is None:
        return ()
    counts = Counter(view.texts(name))
    measured = {str(status) for status in MEASURED}
    return tuple(
        StatusCount(
            status or "unknown",
            STATUS_WORDS.get(str(status), ""),
            count,
            share_text(count, view.data.n_rows),
            status in measured,
        )
        for status, count in counts.most_common()
    )


def opening(view: View) -> str:
    """Say what was measured, and how many."""
    lineage = view.data.lineage
    n = view.data.n_rows
    place = f" of {lineage['input']}" if lineage.get("input") else ""
    layer = f"The layer {lineage['layer']}{place}" if lineage.get("layer") else "The layer"
    measured = sum(entry.count for entry in status_counts(view) if entry.is_measured)
    text = f"{layer} has {count_text(n, 'row')}"
    if view.named("shape_status"):
        text += f"; {whole_text(measured) if measured < n else 'all'} of them could be measured"
    area = view.bare("area_m2")
    if area is not None and not np.isnan(area).all():
        text += f". Together the shapes cover {area_text(float(np.nansum(area)))}, half of them less than "
        text += f"{area_text(float(np.nanmedian(area)))} each"
    return f"{text}."


def findings(view: View) -> tuple[Finding, ...]:
    """Name the least compact, the most elongated and the most complex shape, as far as the columns tell."""
    return tuple(found for found in (_least_compact(view), _most_elongated(view), _most_complex(view)) if found)


def _known(values: FloatArray | None) -> FloatArray | None:
    return None if values is None or np.isnan(values).all() else values


def _least_compact(view: View) -> Finding | None:
    compactness = _known(view.bare("polsby_popper"))
    if compactness is None:
        return None
    row = int(np.nanargmin(compactness))
    label, value = view.label(row), float(compactness[row])
    longer = number_text(1.0 / np.sqrt(value), 2)
    text = (
        f"Its boundary is {longer} times as long as that of a circle of the same area (Polsby\u2013Popper "
        f"{number_text(value, 2)}; the layer\u2019s median is {number_text(float(np.nanmedian(compactness)), 2)})."
    )
    return Finding("Least compact", row, label, text)


def _most_elongated(view: View) -> Finding | None:
    ratio = _known(view.bare("axis_ratio"))
    if ratio is None:
        return None
    row = int(np.nanargmin(ratio))
    median = float(np.nanmedian(ratio))
    times = number_text(1.0 / float(ratio[row]), 2) if ratio[row] > 0 else "countless"
    text = f"Its long axis is {times} times its short one (axis ratio {number_text(float(ratio[row]), 2)}; "
    return Finding(
        "Most elongated", row, view.label(row), text + f"the layer\u2019s median is {number_text(median, 2)})."
    )


def _most_complex(view: View) -> Finding | None:
    harmonics = _known(view.bare("fd_harmonics_95"))
    if harmonics is None:
        return _least_convex(view)
    entropy = view.bare("fd_entropy")
    tie = np.zeros(len(harmonics)) if entropy is None else np.nan_to_num(entropy, nan=-1.0)
    row = int(np.lexsort((tie, np.nan_to_num(harmonics, nan=-1.0)))[-1])
    text = (
        f"It takes {count_text(int(harmonics[row]), 'pair')} of harmonics to carry 95 % of its outline\u2019s bending "
        f"energy; the layer\u2019s median is {number_text(float(np.nanmedian(harmonics)), 2)}."
    )
    return Finding("Most complex", row, view.label(row), text)


def _least_convex(view: View) -> Finding | None:
    convexity = _known(view.bare("convexity"))
    if convexity is None:
        return None
    row = int(np.nanargmin(convexity))
    share, median = 100.0 * float(convexity[row]), 100.0 * float(np.nanmedian(convexity))
    text = f"It fills {share:.0f} % of its convex hull; the layer\u2019s median is {median:.0f} %."
    return Finding("Most indented", row, view.label(row), text)


def flag_sentence(view: View) -> str | None:
    """Say what share is flagged; None where the layer has no flags."""
    flagged = is_flagged(view)
    if flagged is None:
        return None
    count, n = int(np.count_nonzero(flagged)), view.data.n_rows
    if not count:
        return f"None of the {count_text(n, 'shape')} is flagged."
    verb = "is" if count == 1 else "are"
    return f"{count_text(count, 'shape')} of {whole_text(n)} {verb} flagged ({share_text(count, n)})."


@dataclass(frozen=True)
class Prevailing:
    """What the long axes have in common.

    Attributes
    ----------
    count : int
        Shapes with a direction.
    mean_deg : float
        Mean axial direction, clockwise from north, in [0, 180); NaN where the directions cancel out.
    length : float
        Length of the mean vector of doubled angles: 0 even, 1 all alike.
    probability : float
        Of so long a vector, were no direction preferred.
    """

    count: int
    mean_deg: float
    length: float
    probability: float

    @property
    def is_clear(self) -> bool:
        """Whether one direction can be said to prevail."""
        return self.probability < PREVAILS_BELOW


def prevailing(view: View) -> Prevailing | None:
    """Test the long axes for a preferred direction; None where too few have one."""
    azimuth = view.bare("axis_azimuth_deg")
    if azimuth is None:
        return None
    found = mean_directions(azimuth, np.zeros(len(azimuth), dtype=np.int64), 1)
    if np.isnan(found.rayleigh_p[0]):
        return None
    count = int(np.count_nonzero(~np.isnan(azimuth)))
    return Prevailing(count, float(found.mean_deg[0]), float(found.resultant_length[0]), float(found.rayleigh_p[0]))


def direction_sentence(view: View) -> str | None:
    """Say whether the long axes prefer a direction; None where too few have one."""
    result = prevailing(view)
    if result is None:
        return None
    p = "p < 0.001" if result.probability < 0.001 else f"p = {number_text(result.probability, 2)}"
    test = f"Rayleigh test on doubled angles, R = {result.length:.2f}, n = {whole_text(result.count)}, {p}"
    if not result.is_clear:
        return f"The long axes prefer no direction ({test})."
    mean = f"{compass(result.mean_deg)}, {result.mean_deg:.0f}\u00b0 on average"
    return f"The long axes prefer one direction: {mean} ({test})."
