"""Options are checked when built, and say what is wrong in one line: value, reason, remedy."""

from dataclasses import FrozenInstanceError

import pytest

from geoshape.errors import GeoshapeError, OptionError
from geoshape.options import (
    DEFAULT_FAMILIES,
    MAX_SAMPLES,
    MIN_SAMPLES,
    Edges,
    Family,
    Holes,
    Invalid,
    MeasureOptions,
    Parts,
    Source,
    Spectrum,
    Target,
)

MESSAGES = [
    ({"edges": "curved"}, "edges = 'curved' is not known; use one of: source, plane"),
    ({"spectrum": "fft"}, "spectrum = 'fft' is not known; use one of: sampled, exact"),
    ({"parts": "each"}, "parts = 'each' is not known; use one of: whole, split"),
    ({"holes": "drop"}, "holes = 'drop' is not known; use one of: keep, fill"),
    ({"invalid": "fix"}, "invalid = 'fix' is not known; use one of: repair, null, stop"),
    ({"parts": "WHOLE"}, "parts = 'WHOLE' is not known; use one of: whole, split"),
    (
        {"families": ("extent", "size")},
        "families = 'size' is not known; use one of: extent, compactness, axes, moments, spectrum",
    ),
    (
        {"families": ()},
        "families is empty; name at least one of: extent, compactness, axes, moments, spectrum",
    ),
    ({"samples": 14}, "samples = 14 cannot be used; give an even number from 16 to 65536"),
    ({"samples": 65_538}, "samples = 65538 cannot be used; give an even number from 16 to 65536"),
    ({"samples": 257}, "samples = 257 cannot be used; give an even number from 16 to 65536"),
    ({"samples": -256}, "samples = -256 cannot be used; give an even number from 16 to 65536"),
    (
        {"harmonics": 1},
        "harmonics = 1 cannot be had from 256 samples; give a number from 2 to 127, or more samples",
    ),
    (
        {"harmonics": 128},
        "harmonics = 128 cannot be had from 256 samples; give a number from 2 to 127, or more samples",
    ),
    (
        {"harmonics": 8, "samples": 16},
        "harmonics = 8 cannot be had from 16 samples; give a number from 2 to 7, or more samples",
    ),
    ({"ground": ""}, "ground is empty; use centred, layer, plane, or a CRS such as EPSG:6933"),
    ({"ground": "  "}, "ground is empty; use centred, layer, plane, or a CRS such as EPSG:6933"),
]


@pytest.mark.parametrize(("options", "message"), MESSAGES, ids=[str(case[0]) for case in MESSAGES])
def test_what_cannot_be_used_is_refused(options, message):
    with pytest.raises(OptionError) as caught:
        MeasureOptions(**options)
    assert str(caught.value) == message
    assert isinstance(caught.value, GeoshapeError)
    assert caught.value.__cause__ is None


def test_defaults():
    options = MeasureOptions()
    assert options.ground == "centred"
    assert options.families == DEFAULT_FAMILIES == tuple(Family)
    assert (options.samples, options.harmonics, options.spectrum) == (256, 8, Spectrum.SAMPLED)
    assert (options.edges, options.parts) == (Edges.SOURCE, Parts.WHOLE)
    assert (options.holes, options.invalid) == (Holes.KEEP, Invalid.REPAIR)
    assert (options.prefix, options.log_moments, options.assume_crs) == ("", False, None)


def test_text_becomes_members():
    options = MeasureOptions(
        edges="plane", spectrum="exact", parts="split", holes="fill", invalid="stop", families=["axes"]
    )
    assert options.edges is Edges.PLANE
    assert options.spectrum is Spectrum.EXACT
    assert options.parts is Parts.SPLIT
    assert options.holes is Holes.FILL
    assert options.invalid is Invalid.STOP
    assert options.families == (Family.AXES,)
    assert all(isinstance(family, Family) for family in options.families)


def test_families_stand_in_the_order_of_the_registry_and_once():
    options = MeasureOptions(families=("spectrum", "extent", "spectrum", Family.AXES))
    assert options.families == (Family.EXTENT, Family.AXES, Family.SPECTRUM)


@pytest.mark.parametrize(
    ("samples", "harmonics"), [(MIN_SAMPLES, 2), (MIN_SAMPLES, 7), (256, 127), (MAX_SAMPLES, 32_767), (100, 49)]
)
def test_ends_of_ranges_can_be_used(samples, harmonics):
    options = MeasureOptions(samples=samples, harmonics=harmonics)
    assert (options.samples, options.harmonics) == (samples, harmonics)


@pytest.mark.parametrize(
    ("made", "name"), [(MeasureOptions(), "samples"), (Source(path="a"), "path"), (Target(path="b"), "path")]
)
def test_options_do_not_change(made, name):
    with pytest.raises(FrozenInstanceError):
        setattr(made, name, 512)


def test_equal_options_are_equal_whatever_they_were_made_from():
    assert MeasureOptions(parts="split") == MeasureOptions(parts=Parts.SPLIT)
    assert hash(MeasureOptions(families=("axes", "extent"))) == hash(MeasureOptions(families=("extent", "axes")))


@pytest.mark.parametrize("kind", [MeasureOptions, Source, Target])
def test_options_go_by_name(kind):
    with pytest.raises(TypeError):
        kind("centred")
