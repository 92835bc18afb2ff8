"""Real outlines: the states of Mexico find themselves, however they are turned, scaled and begun."""

from pathlib import Path

import geopandas as gpd
import numpy as np
import pytest
import shapely
from shapely import affinity

from geoshape.decide.match import MatchOptions, make_templates, match_outlines, rank
from geoshape.decide.outlines import prepare_rings
from geoshape.decide.redraw import RedrawOptions, redraw_rings
from geoshape.geometry import ring_batch

LAYER = Path(__file__).parents[1] / "data" / "mexico_states" / "mexicojoin.shp"
ALBERS = "+proj=aea +lat_1=17.5 +lat_2=29.5 +lat_0=23 +lon_0=-102 +datum=WGS84 +units=m"


@pytest.fixture(scope="module")
def states():
    layer = gpd.read_file(LAYER).set_crs("EPSG:4326", allow_override=True).to_crs(ALBERS)
    return layer["NAME"].tolist(), np.array(layer.geometry, dtype=object)


def redrawn_copy(state, azimuth_deg, scale, first):
    """Turn, scale and begin a state at another vertex."""
    largest = max(shapely.get_parts(state), key=shapely.area)
    ring = list(largest.exterior.coords)[:-1]
    ring = ring[first % len(ring) :] + ring[: first % len(ring)]
    return affinity.scale(affinity.rotate(shapely.Polygon(ring), -azimuth_deg), scale, scale)


def test_turned_states_find_themselves(states):
    names, polygons = states
    rng = np.random.default_rng(0)
    azimuth = rng.uniform(-180, 180, len(names))
    scale = np.exp(rng.normal(size=len(names)))
    first = rng.integers(0, 1000, len(names))
    copies = [redrawn_copy(*values) for values in zip(polygons, azimuth, scale, first, strict=True)]
    templates = make_templates(names, prepare_rings(ring_batch(polygons)))
    columns = match_outlines(prepare_rings(ring_batch(copies)), templates, MatchOptions(mirror="yes"))
    assert columns["match_template"].tolist() == names
    assert columns["match_distance"].max() < 1e-6
    np.testing.assert_allclose(columns["match_turn_deg"], azimuth, atol=1e-5)
    np.testing.assert_allclose(columns["match_scale"], scale, rtol=1e-9)
    assert not columns["match_mirrored"].any()


def test_ranks_of_a_layer(states):
    names, polygons = states
    outlines = prepare_rings(ring_batch(polygons))
    template = make_templates(names[:1], outlines.take(np.array([0])))
    columns = match_outlines(outlines, template, MatchOptions())
    order = rank(columns["match_distance"])
    assert order[0] == 1
    assert sorted(order) == list(range(1, len(names) + 1))


def test_redrawn_states_come_nearer_with_every_harmonic(states):
    batch = ring_batch(states[1])
    errors = [
        np.median(np.abs(redraw_rings(batch, RedrawOptions(harmonics=harmonics)).area_error))
        for harmonics in (2, 8, 32, 128)
    ]
    assert errors == sorted(errors, reverse=True)
    assert errors[-1] < 1e-3
