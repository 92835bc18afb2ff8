"""Which CRS a layer is taken to be in."""

import pyproj
import pytest

from geoshape.errors import GroundError, OptionError
from geoshape.ground.layer_crs import resolve_crs
from geoshape.options import MeasureOptions

UTM = pyproj.CRS(32632)


def test_own_crs_stands_where_nothing_is_assumed():
    assert resolve_crs(UTM, MeasureOptions()) is UTM
    assert resolve_crs(None, MeasureOptions()) is None


@pytest.mark.parametrize("own", [None, UTM])
def test_assumed_crs_fills_a_gap_or_confirms(own):
    assert resolve_crs(own, MeasureOptions(assume_crs="EPSG:32632")) == UTM


def test_another_crs_is_not_overruled():
    with pytest.raises(
        GroundError, match=r"the layer is in WGS 84 / UTM zone 32N, not in WGS 84; leave out --assume-crs"
    ):
        resolve_crs(UTM, MeasureOptions(assume_crs="EPSG:4326"))


def test_an_unknown_crs_is_named():
    with pytest.raises(OptionError, match=r"assume_crs = 'EPSG:0' is no CRS that PROJ knows .*; give an EPSG code"):
        resolve_crs(None, MeasureOptions(assume_crs="EPSG:0"))
