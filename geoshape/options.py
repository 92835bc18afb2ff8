"""Options of a measurement, and where it reads and writes: frozen, typed, checked when built."""

from __future__ import annotations

from dataclasses import dataclass
from enum import StrEnum
from math import inf
from pathlib import Path
from typing import TypeVar

from geoshape.errors import OptionError


class Family(StrEnum):
    """A family of columns that is computed together."""

    EXTENT = "extent"
    COMPACTNESS = "compactness"
    AXES = "axes"
    MOMENTS = "moments"
    SPECTRUM = "spectrum"


class Edges(StrEnum):
    """What an edge is: straight in the layer's own coordinates, or straight on the ground's plane."""

    SOURCE = "source"
    PLANE = "plane"


class Spectrum(StrEnum):
    """How Fourier coefficients are had: FFT of samples, or the closed form of the polygon."""

    SAMPLED = "sampled"
    EXACT = "exact"


class Parts(StrEnum):
    """One row per feature, or one row per part."""

    WHOLE = "whole"
    SPLIT = "split"


class Holes(StrEnum):
    """Holes are kept, or filled before anything is measured."""

    KEEP = "keep"
    FILL = "fill"


class Invalid(StrEnum):
    """What happens to an invalid geometry: repaired, given nulls, or the run stops."""

    REPAIR = "repair"
    NULL = "null"
    STOP = "stop"


DEFAULT_FAMILIES = (Family.EXTENT, Family.COMPACTNESS, Family.AXES, Family.MOMENTS, Family.SPECTRUM)

GROUND_CENTRED = "centred"
GROUND_LAYER = "layer"
GROUND_PLANE = "plane"

MIN_SAMPLES = 16
MAX_SAMPLES = 65_536

MAX_ERROR_RUNS = 10_000
MAX_SEED = 2**63 - 1

_E = TypeVar("_E", bound=StrEnum)


def _member(kind: type[_E], value: str, option: str) -> _E:
    try:
        return kind(value)
    except ValueError:
        valid = ", ".join(kind)
        raise OptionError(f"{option} = {value!r} is not known; use one of: {valid}") from None


@dataclass(frozen=True, kw_only=True)
class MeasureOptions:
    """Everything that decides what is measured and how.

    Text is accepted wherever an enumeration is expected (``edges="plane"``) and turned into its member.

    Attributes
    ----------
    ground : str
        ``"centred"`` (an equal-area plane for each feature), ``"layer"`` (one equal-area CRS chosen for the
        layer), ``"plane"`` (coordinates as they are), or any CRS that PROJ understands.
    assume_crs : str or None
        CRS to use where the layer has none; an error where the layer has another one.
    edges : Edges
        Whether edges are straight in the layer's own coordinates or on the plane.
    families : tuple of Family
        Families of columns to compute, in the registry's order whatever order is given.
    samples : int
        Points at equal arc length along the outline, an even number from 16 to 65 536.
    harmonics : int
        Highest harmonic that gets its own columns, from 2 to ``samples`` / 2 - 1.
    spectrum : Spectrum
        FFT of the samples, or the closed-form series of the polygon.
    parts : Parts
        One row a feature or one row a part.
    holes : Holes
        Holes kept or filled.
    invalid : Invalid
        What to do with an invalid geometry.
    log_moments : bool
        Add the signed log10 of the Hu invariants.
    prefix : str
        Put before the name of every new column.
    position_error_m : float or None
        Standard deviation of each coordinate of a vertex; gives every measured number its standard error.
    error_length_m : float or None
        Distance along the outline over which errors are alike, 0 for independent ones; each feature's own median
        edge length where None.
    error_runs : int
        Disturbed outlines that a standard error is taken from, from 2 to 10 000.
    seed : int
        What the errors are drawn from, not negative: the same seed gives the same numbers.

    Raises
    ------
    OptionError
        A value is outside its range or not known.
    """

    ground: str = GROUND_CENTRED
    assume_crs: str | None = None
    edges: Edges = Edges.SOURCE
    families: tuple[Family, ...] = DEFAULT_FAMILIES
    samples: int = 256
    harmonics: int = 8
    spectrum: Spectrum = Spectrum.SAMPLED
    parts: Parts = Parts.WHOLE
    holes: Holes = Holes.KEEP
    invalid: Invalid = Invalid.REPAIR
    log_moments: bool = False
    prefix: str = ""
    position_error_m: float | None = None
    error_length_m: float | None = None
    error_runs: int = 64
    seed: int = 0

    def __post_init__(self) -> None:
        for name, kind in _ENUM_FIELDS.items():
            object.__setattr__(self, name, _member(kind, getattr(self, name), name))
        chosen = {_member(Family, family, "families") for family in self.families}
        if not chosen:
            raise OptionError("families is empty; name at least one of: " + ", ".join(Family))
        object.__setattr__(self, "families", tuple(family for family in Family if family in chosen))
        if not MIN_SAMPLES <= self.samples <= MAX_SAMPLES or self.samples % 2:
            raise OptionError(
                f"samples = {self.samples} cannot be used; give an even number from {MIN_SAMPLES} to {MAX_SAMPLES}"
            )
        if not 2 <= self.harmonics <= self.samples // 2 - 1:
            raise OptionError(
                f"harmonics = {self.harmonics} cannot be had from {self.samples} samples; "
                f"give a number from 2 to {self.samples // 2 - 1}, or more samples"
            )
        if not self.ground.strip():
            raise OptionError("ground is empty; use centred, layer, plane, or a CRS such as EPSG:6933")
        self._check_errors()

    def _check_errors(self) -> None:
        sigma, length = self.position_error_m, self.error_length_m
        if sigma is not None and not 0 < sigma < inf:
            raise OptionError(f"position_error_m = {sigma} is no error; give metres greater than 0, or leave it out")
        if length is not None and not 0 <= length < inf:
            raise OptionError(f"error_length_m = {length} is no length; give metres, 0 for independent errors")
        if not 2 <= self.error_runs <= MAX_ERROR_RUNS:
            raise OptionError(f"error_runs = {self.error_runs} cannot be used; give 2 to {MAX_ERROR_RUNS}")
        if not 0 <= self.seed <= MAX_SEED:
            raise OptionError(f"seed = {self.seed} cannot be used; give a whole number from 0 to {MAX_SEED}")


_ENUM_FIELDS: dict[str, type[StrEnum]] = {
    "edges": Edges,
    "spectrum": Spectrum,
    "parts": Parts,
    "holes": Holes,
    "invalid": Invalid,
}


Bounds = tuple[float, float, float, float]


@dataclass(frozen=True, kw_only=True)
class Source:
    """A layer to read, or a part of it.

    Attributes
    ----------
    path : str or Path
        File, archive or anything else that GDAL opens.
    layer : str or None
        Name of the layer; needed where the file holds several.
    where : str or None
        Condition in SQL, as GDAL takes it.
    bbox : (west, south, east, north) or None
        Only features that touch this box, in the layer's CRS.
    """

    path: str | Path
    layer: str | None = None
    where: str | None = None
    bbox: Bounds | None = None


@dataclass(frozen=True, kw_only=True)
class Target:
    """Where a result goes.

    Attributes
    ----------
    path : str or Path
        File to write; its extension decides the format. ``-`` is CSV on standard output.
    layer : str or None
        Name of the new layer; the file's name where left out.
    overwrite : bool
        Whether a file or layer that is there may be replaced.
    """

    path: str | Path
    layer: str | None = None
    overwrite: bool = False
