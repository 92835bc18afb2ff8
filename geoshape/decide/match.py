"""Match outlines to templates: how alike they are at the best turn and first point, and which template is nearest."""

from __future__ import annotations

from collections import Counter
from collections.abc import Sequence
from dataclasses import dataclass
from enum import StrEnum

import numpy as np
from numpy.typing import NDArray

from geoshape.decide.alignment import TIE, find_peaks, highest_gain
from geoshape.decide.outlines import Outlines
from geoshape.errors import GeometryError, OptionError
from geoshape.formulas.arclength import ComplexArray
from geoshape.rings import BoolArray, FloatArray, IntArray

ObjectArray = NDArray[np.object_]

BLOCK_OUTLINES = 512
"""Outlines matched at a time, so that their grids of shifts stay in cache."""

COARSE_HARMONICS = 16
"""Harmonics by which templates are ruled out; only those that may be nearest are laid on with all."""

NO_AREA = 1e-9
"""Area over pi times the squared size below which a template is flat."""

NAMED_IN_ERRORS = 5


class Mirror(StrEnum):
    """Whether a template may be mirrored before it is laid on an outline."""

    NO = "no"
    YES = "yes"
    ONLY = "only"


class Likeness(StrEnum):
    """What is compared: the outlines themselves, or only the amplitudes of their spectra."""

    OUTLINE = "outline"
    SPECTRUM = "spectrum"


@dataclass(frozen=True, kw_only=True)
class MatchOptions:
    """What counts as alike.

    Attributes
    ----------
    mirror : Mirror
        ``"yes"`` takes the better of the template and its mirror image, ``"only"`` the mirror image. The template is
        mirrored left to right (east to west) and then turned.
    by : Likeness
        ``"spectrum"`` compares the amplitudes |Z_k| alone. It is quick, but different outlines may have the same
        amplitudes.
    keep_direction : bool
        Hold the turn at 0: the direction of a shape matters.
    keep_size : bool
        Do not scale: the size of a shape matters. Distances are then in units of the template's size.

    Raises
    ------
    OptionError
        A value is not known, or amplitudes are asked for what they cannot tell: turn or mirror image.
    """

    mirror: Mirror = Mirror.NO
    by: Likeness = Likeness.OUTLINE
    keep_direction: bool = False
    keep_size: bool = False

    def __post_init__(self) -> None:
        for name, kind in (("mirror", Mirror), ("by", Likeness)):
            value = getattr(self, name)
            if value not in set(kind):
                raise OptionError(f"{name} = {value!r} is not known; use one of: {', '.join(kind)}")
            object.__setattr__(self, name, kind(value))
        if self.by is Likeness.SPECTRUM and (self.keep_direction or self.mirror is not Mirror.NO):
            wish = "keep_direction" if self.keep_direction else f"mirror = {str(self.mirror)!r}"
            raise OptionError(f"{wish} says nothing to amplitudes, which have no direction; use by = 'outline'")


@dataclass(frozen=True, eq=False)
class Templates:
    """Named outlines to match with.

    Attributes
    ----------
    names : tuple of str
    outlines : Outlines
        A row a name.
    """

    names: tuple[str, ...]
    outlines: Outlines

    def __len__(self) -> int:
        return len(self.names)


def make_templates(names: Sequence[str], outlines: Outlines) -> Templates:
    """Check templates and give them their names.

    Parameters
    ----------
    names : sequence of str
        One for each outline.
    outlines : Outlines

    Returns
    -------
    Templates

    Raises
    ------
    OptionError
        There is no template, or names repeat.
    GeometryError
        A template has no outline, no area, or runs clockwise.
    """
    if not names:
        raise OptionError("0 templates were given, and there is nothing to match with; give one polygon or more")
    repeated = [name for name, count in Counter(names).items() if count > 1]
    if repeated:
        shown = ", ".join(repr(name) for name in repeated[:NAMED_IN_ERRORS])
        raise OptionError(f"the template name {shown} is there more than once; give each template its own name")
    without = [name for name, size in zip(names, outlines.size_m, strict=True) if np.isnan(size)]
    if without:
        shown = ", ".join(repr(name) for name in without[:NAMED_IN_ERRORS])
        raise GeometryError(f"the template {shown} has no ring to match with; take it out, or give it a polygon")
    flat = [name for name, share in zip(names, _area_share(outlines), strict=True) if not share > NO_AREA]
    if flat:
        shown = ", ".join(repr(name) for name in flat[:NAMED_IN_ERRORS])
        raise GeometryError(f"the template {shown} encloses no area; take it out, or give it a polygon with an area")
    return Templates(tuple(names), outlines)


def _area_share(outlines: Outlines) -> FloatArray:
    """Take the area inside the outline over pi times its squared size: sum k |Z_k|^2."""
    orders = np.arange(-outlines.highest, outlines.highest + 1)
    power = outlines.coefficients.real**2 + outlines.coefficients.imag**2
    return np.asarray(power @ orders)


@dataclass(frozen=True, eq=False)
class Fits:
    """How pairs of outlines lie upon each other at their best.

    Attributes
    ----------
    distance : (m,) float64
        0 for the same shape; at most sqrt(2) where size is left free. NaN where an outline is missing.
    turn_deg : (m,) float64
        Turn that lays the second outline on the first, in (-180, 180], clockwise, so that it adds to azimuths. NaN
        where amplitudes alone are compared.
    scale : (m,) float64
        Size of the first outline over that of the second.
    """

    distance: FloatArray
    turn_deg: FloatArray
    scale: FloatArray


def fit_pairs(outlines: Outlines, models: Outlines, options: MatchOptions) -> Fits:
    """Lay each model on the outline of the same row; mirror images are not tried.

    Parameters
    ----------
    outlines, models : Outlines
        As many of the one as of the other, with the same harmonics.
    options : MatchOptions

    Returns
    -------
    Fits

    Notes
    -----
    The distance is the norm of the residual P - exp(i theta) Q(shifted), which equals sqrt(2 - 2 rho) but keeps its
    digits near 0. Of turns that are equally good, as for a square, the smallest is given. Where size is kept, the
    residual is taken before scaling and divided by the size of the model.

    References
    ----------
    .. [1] Kuhl, F. P., Giardina, C. R. (1982). Elliptic Fourier features of a closed contour.
           Computer Graphics and Image Processing 18, 236-258.

    Examples
    --------
    >>> import shapely
    >>> from geoshape.decide.outlines import prepare_rings
    >>> from geoshape.geometry import ring_batch
    >>> small, large = shapely.box(0, 0, 2, 1), shapely.box(5, 5, 8, 11)
    >>> shapes = prepare_rings(ring_batch([large, small]))
    >>> fits = fit_pairs(shapes.take([0]), shapes.take([1]), MatchOptions())
    >>> bool(fits.distance[0] < 1e-12), abs(fits.turn_deg).round(6), fits.scale.round(6)
    (True, array([90.]), array([3.]))
    """
    _check_harmonics(outlines, models)
    scale = outlines.size_m / models.size_m
    distance, turn_deg = np.full(len(scale), np.nan), np.full(len(scale), np.nan)
    known = np.flatnonzero(np.isfinite(scale))
    for begin in range(0, len(known), BLOCK_OUTLINES):
        rows = known[begin : begin + BLOCK_OUTLINES]
        # Where size is kept, the outline stands in units of the model's size.
        stretch = scale[rows, None] if options.keep_size else np.ones((len(rows), 1))
        p, q = outlines.coefficients[rows], models.coefficients[rows]
        if options.by is Likeness.SPECTRUM:
            distance[rows] = np.sqrt(((stretch * np.abs(p) - np.abs(q)) ** 2).sum(axis=1))
        else:
            distance[rows], turn_deg[rows] = _best_fit(p, q, stretch, keep_direction=options.keep_direction)
    return Fits(distance, turn_deg, scale)


def _best_fit(
    p: ComplexArray, q: ComplexArray, stretch: FloatArray, *, keep_direction: bool
) -> tuple[FloatArray, FloatArray]:
    peaks = find_peaks(p * q.conj(), keep_direction=keep_direction)
    highest = p.shape[1] // 2
    wave = np.exp(2j * np.pi * peaks.shift[:, None] * np.arange(highest + 1))
    laid = q[peaks.pair]
    laid[:, highest:] *= wave
    laid[:, :highest] *= wave[:, :0:-1].conj()
    laid *= np.exp(1j * peaks.turn_rad)[:, None]
    residual = stretch[peaks.pair] * p[peaks.pair] - laid
    distance = np.sqrt((residual.real**2 + residual.imag**2).sum(axis=1))
    turn_deg = -np.degrees(peaks.turn_rad) + 0.0
    turn_deg[turn_deg <= -180.0] = 180.0
    best = _first_of_best(peaks.pair, distance, (np.abs(turn_deg),))
    return distance[best], turn_deg[best]


def _first_of_best(
    owner: IntArray, distance: FloatArray, preferences: Sequence[FloatArray | IntArray | BoolArray]
) -> IntArray:
    """Pick for each owner the entry of least distance; among equals the one of least preference, the first counts most.

    Every owner from 0 on has an entry, and ``owner`` does not decrease.
    """
    first = np.flatnonzero(np.diff(owner, prepend=-1))
    least = np.minimum.reduceat(distance, first) if len(first) else distance
    is_worse = distance > least[owner] + TIE
    order = np.lexsort((*reversed(preferences), is_worse, owner))
    return order[first]


def match_outlines(
    outlines: Outlines, templates: Templates, options: MatchOptions
) -> dict[str, FloatArray | ObjectArray]:
    """Find for each outline the template that is most like it.

    Parameters
    ----------
    outlines : Outlines
    templates : Templates
    options : MatchOptions

    Returns
    -------
    dict of str to (n,) array
        ``match_template`` (str), ``match_distance`` (see `Fits`), ``match_turn_deg`` (clockwise turn of the template
        that lays it on the outline, after mirroring; NaN by spectrum), ``match_scale`` (size over that of the
        template) and ``match_mirrored`` (bool; None by spectrum). Null where a feature has no outline. Ties go to
        the template that was given first, and to the template itself before its mirror image.

    Raises
    ------
    OptionError
        Outlines and templates were prepared with different numbers of harmonics.

    Examples
    --------
    >>> import shapely
    >>> from geoshape.decide.outlines import prepare_rings
    >>> from geoshape.geometry import ring_batch
    >>> shapes = prepare_rings(ring_batch([shapely.box(0, 0, 2, 2), shapely.box(0, 0, 5, 1), None]))
    >>> templates = make_templates(["square", "strip"], shapes.take([0, 1]))
    >>> match_outlines(shapes, templates, MatchOptions())["match_template"].tolist()
    ['square', 'strip', None]
    """
    _check_harmonics(outlines, templates.outlines)
    n = len(outlines)
    bank, template_of, is_mirrored = _bank(templates, options.mirror)
    template = np.full(n, None, dtype=object)
    mirrored = np.full(n, None, dtype=object)
    distance, turn, scale = (np.full(n, np.nan) for _ in range(3))
    known = np.flatnonzero(np.isfinite(outlines.size_m))
    names = np.array(templates.names, dtype=object)
    for begin in range(0, len(known), BLOCK_OUTLINES):
        rows = known[begin : begin + BLOCK_OUTLINES]
        block = outlines.take(rows)
        row, model = np.nonzero(_may_be_nearest(block, bank, options))
        fits = fit_pairs(block.take(row), bank.take(model), options)
        best = _first_of_best(row, fits.distance, (template_of[model], is_mirrored[model]))
        template[rows] = names[template_of[model[best]]]
        distance[rows], turn[rows], scale[rows] = fits.distance[best], fits.turn_deg[best], fits.scale[best]
        if options.by is Likeness.OUTLINE:
            mirrored[rows] = is_mirrored[model[best]]
    return {
        "match_template": template,
        "match_distance": distance,
        "match_turn_deg": turn,
        "match_scale": scale,
        "match_mirrored": mirrored,
    }


def _bank(templates: Templates, mirror: Mirror) -> tuple[Outlines, IntArray, BoolArray]:
    """Line up the templates, and their mirror images where they are wanted."""
    plain = templates.outlines
    # x turned into -x, and the direction turned round to be counter-clockwise again.
    mirrored = Outlines(-plain.coefficients.conj(), plain.size_m)
    index = np.arange(len(templates))
    if mirror is Mirror.NO:
        return plain, index, np.zeros(len(index), dtype=np.bool_)
    if mirror is Mirror.ONLY:
        return mirrored, index, np.ones(len(index), dtype=np.bool_)
    both = Outlines(
        np.concatenate((plain.coefficients, mirrored.coefficients)), np.concatenate((plain.size_m, mirrored.size_m))
    )
    return both, np.concatenate((index, index)), np.repeat([False, True], len(index))


def _may_be_nearest(block: Outlines, bank: Outlines, options: MatchOptions) -> BoolArray:
    """Tell which models may be nearest to each outline, from the grid of shifts alone."""
    if options.by is Likeness.SPECTRUM or len(bank) == 1:
        return np.ones((len(block), len(bank)), dtype=np.bool_)
    p, p_rest = _coarse(block)
    q, q_rest = _coarse(bank)
    likely, least = np.empty((len(block), len(bank))), np.empty((len(block), len(bank)))
    for model in range(len(bank)):
        gain, slack = highest_gain(p * q[model].conj(), keep_direction=options.keep_direction)
        stretch = block.size_m / bank.size_m[model] if options.keep_size else np.ones(len(block))
        # What the harmonics left out can add to the agreement or take from it, by Cauchy's inequality.
        rest = p_rest * q_rest[model]
        for found, most, target in ((gain, -rest, likely), (gain + slack, rest, least)):
            rho = found if options.keep_direction else np.sqrt(np.maximum(found, 0.0))
            target[:, model] = 1.0 + stretch * stretch - 2.0 * stretch * (rho + most)
    return np.asarray(least <= likely.min(axis=1, keepdims=True) + TIE)


def _coarse(outlines: Outlines) -> tuple[ComplexArray, FloatArray]:
    """Take the low harmonics, and the root of the power that the others hold."""
    middle, low = outlines.highest, min(COARSE_HARMONICS, outlines.highest)
    power = outlines.coefficients.real**2 + outlines.coefficients.imag**2
    rest = power[:, : middle - low].sum(axis=1) + power[:, middle + low + 1 :].sum(axis=1)
    return outlines.coefficients[:, middle - low : middle + low + 1], np.sqrt(rest)


def _check_harmonics(outlines: Outlines, models: Outlines) -> None:
    if outlines.highest != models.highest:
        raise OptionError(
            f"outlines have {outlines.highest} harmonics and templates {models.highest}; prepare both with as many"
        )


def rank(distance: FloatArray) -> FloatArray:
    """Rank features over a whole layer by their distance, 1 for the most alike.

    Parameters
    ----------
    distance : (n,) float64
        NaN where there is none.

    Returns
    -------
    (n,) float64
        Equal distances share the lowest of their ranks; NaN where there is no distance.

    Examples
    --------
    >>> rank(np.array([0.3, 0.1, np.nan, 0.3, 0.7]))
    array([ 2.,  1., nan,  2.,  4.])
    """
    known = np.isfinite(distance)
    ordered = np.sort(distance[known])
    ranks = np.full(len(distance), np.nan)
    ranks[known] = np.searchsorted(ordered, distance[known], side="left") + 1
    return ranks
