"""Groups of alike shapes: planted families come back, whatever the order of rows, and the answer is explained."""

import numpy as np
import pytest
import shapely
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.spatial.distance import cdist
from shapely import affinity
from sklearn.decomposition import PCA
from sklearn.metrics import adjusted_rand_score, silhouette_score

from geoshape.decide import clusters
from geoshape.decide.clusters import find_clusters, nearest
from geoshape.decide.group import GroupOptions, group
from geoshape.decide.scaling import DRAWN_IN, fit_scaling, principal_components
from geoshape.errors import OptionError
from geoshape.options import Family
from tests.formulas.plane import columns_of

COLUMNS = (
    "polsby_popper",
    "convexity",
    "rectangularity",
    "axis_ratio",
    "hu_1",
    "fd_p02",
    "fd_n01",
    "fd_n03",
    "area_m2",
)


def rough(ring, noise, rng):
    """Cut the edges of a ring in four and move every point by noise, relative to the ring's size."""
    line = shapely.LineString([*ring, ring[0]])
    points = shapely.get_coordinates(shapely.segmentize(line, line.length / 24))[:-1]
    size = np.sqrt(shapely.Polygon(ring).area)
    return shapely.Polygon(points + rng.normal(scale=noise * size, size=points.shape))


FAMILY_RINGS = {
    "rounds": [(np.cos(t), np.sin(t)) for t in np.linspace(0, 2 * np.pi, 24, endpoint=False)],
    "strips": [(0, 0), (8, 0), (8, 1), (0, 1)],
    "hooks": [(0, 0), (4, 0), (4, 1), (1, 1), (1, 4), (0, 4)],
    "stars": [(r * np.cos(t), r * np.sin(t)) for t, r in zip(np.arange(10) * np.pi / 5, [1, 0.4] * 5, strict=True)],
}


@pytest.fixture(scope="module")
def families():
    """Four kinds of shapes, each in any size, turn and place, and their measured columns."""
    rng = np.random.default_rng(7)
    polygons, kind = [], []
    for number, ring in enumerate(FAMILY_RINGS.values()):
        for _ in range(60 - 10 * number):
            polygon = affinity.rotate(rough(ring, 0.02, rng), rng.uniform(0, 360))
            size = np.exp(rng.normal(scale=0.7))
            polygons.append(affinity.scale(polygon, size, size))
            kind.append(number)
    measured = columns_of(*polygons, families=tuple(Family))
    return np.column_stack([measured[name] for name in COLUMNS]), np.array(kind)


SHAPE_COLUMNS = COLUMNS[:-1]


# Planted families


@pytest.mark.parametrize("count", [4, None])
def test_planted_families_come_back(families, count):
    values, kind = families
    groups = group(values[:, :-1], GroupOptions(columns=SHAPE_COLUMNS, count=count))
    assert groups.count == 4
    assert adjusted_rand_score(kind, groups.group) >= 0.95
    # Numbered by falling size: 60, 50, 40, 30 were planted.
    assert groups.size.tolist() == sorted(groups.size, reverse=True)
    assert groups.silhouette > 0.5
    assert groups.variance_explained > 0.7


@pytest.mark.parametrize("seed", [0, 1, 2])
def test_any_seed_finds_families_that_stand_apart(families, seed):
    values, kind = families
    groups = group(values[:, :-1], GroupOptions(columns=SHAPE_COLUMNS, seed=seed))
    assert adjusted_rand_score(kind, groups.group) >= 0.95


def test_groups_tell_what_is_typical_and_what_sets_them_apart(families):
    values, kind = families
    groups = group(values[:, :-1], GroupOptions(columns=SHAPE_COLUMNS, count=4))
    of_kind = [int(np.median(groups.group[kind == number])) - 1 for number in range(4)]
    rounds, strips = of_kind[0], of_kind[1]
    ratio = groups.columns.index("axis_ratio")
    assert groups.typical[strips, ratio] == pytest.approx(1 / 8, abs=0.02)
    assert groups.typical[rounds, ratio] > 0.9
    for i in range(4):
        np.testing.assert_allclose(groups.typical[i], np.median(values[groups.group == i + 1][:, :-1], axis=0))
    strongest = dict(groups.set_apart_by(strips + 1, most=9))
    assert strongest["axis_ratio"] < -1
    effects = [abs(effect) for effect in strongest.values()]
    assert effects == sorted(effects, reverse=True)
    assert len(groups.set_apart_by(1)) == 3


def test_prototypes_are_nearest_to_their_centres(families):
    values, _ = families
    groups = group(values[:, :-1], GroupOptions(columns=SHAPE_COLUMNS, count=4))
    assert groups.is_prototype.sum() == 4
    for number in range(1, 5):
        own = groups.group == number
        chosen = groups.distance[own & groups.is_prototype]
        assert chosen.tolist() == [groups.distance[own].min()]


# The order of rows


@pytest.mark.parametrize("count", [4, None])
def test_the_order_of_rows_changes_nothing(families, count):
    values, _ = families
    options = GroupOptions(columns=COLUMNS, count=count)
    straight = group(values, options)
    for seed in range(3):
        order = np.random.default_rng(seed).permutation(len(values))
        shuffled = group(values[order], options)
        np.testing.assert_array_equal(shuffled.group, straight.group[order])
        np.testing.assert_array_equal(shuffled.distance, straight.distance[order])
        np.testing.assert_array_equal(shuffled.is_prototype, straight.is_prototype[order])
        np.testing.assert_array_equal(shuffled.typical, straight.typical)


@settings(max_examples=25)
@given(
    st.lists(st.lists(st.integers(0, 9), min_size=2, max_size=2), min_size=5, max_size=30),
    st.randoms(use_true_random=False),
)
def test_the_order_of_rows_changes_nothing_where_values_repeat(rows, random):
    values = np.array(rows, dtype=float)
    if len(np.unique(values, axis=0)) < 3:
        return
    options = GroupOptions(columns=("a", "b"), count=2)
    order = list(range(len(rows)))
    random.shuffle(order)
    straight, shuffled = group(values, options), group(values[order], options)
    np.testing.assert_array_equal(shuffled.group, straight.group[order])
    np.testing.assert_array_equal(shuffled.distance, straight.distance[order])


def test_the_same_seed_gives_the_same_groups(families):
    values, _ = families
    options = GroupOptions(columns=COLUMNS, seed=3)
    first, second = group(values, options), group(values, options)
    np.testing.assert_array_equal(first.group, second.group)
    np.testing.assert_array_equal(first.distance, second.distance)


# Samples


def test_more_rows_than_are_fitted(monkeypatch):
    """Families are found from a sample, and every row is assigned to the nearest centre."""
    monkeypatch.setattr(clusters, "FIT_ROWS", 300)
    monkeypatch.setattr(clusters, "SILHOUETTE_ROWS", 100)
    rng = np.random.default_rng(0)
    kind = rng.integers(0, 3, 5000)
    values = np.array([[0, 0], [9, 0], [0, 9]])[kind] + rng.normal(size=(5000, 2))
    groups = group(values, GroupOptions(columns=("a", "b")))
    assert adjusted_rand_score(kind, groups.group) >= 0.95
    order = rng.permutation(5000)
    np.testing.assert_array_equal(group(values[order], GroupOptions(columns=("a", "b"))).group, groups.group[order])


@pytest.mark.slow
def test_200_000_rows():
    rng = np.random.default_rng(1)
    kind = rng.integers(0, 5, 200_000)
    centres = rng.normal(scale=6, size=(5, 12))
    values = centres[kind] + rng.normal(size=(200_000, 12))
    groups = group(values, GroupOptions(columns=tuple("abcdefghijkl")))
    assert adjusted_rand_score(kind, groups.group) >= 0.95


# The steps against other ways


def test_components_agree_with_scikit_learn():
    rng = np.random.default_rng(4)
    scaled = rng.normal(size=(200, 6)) @ rng.normal(size=(6, 6))
    components, kept = principal_components(scaled, 0.9)
    other = PCA(n_components=components.shape[1]).fit(scaled)
    assert kept == pytest.approx(other.explained_variance_ratio_.sum())
    assert kept >= 0.9
    assert PCA(n_components=components.shape[1] - 1).fit(scaled).explained_variance_ratio_.sum() < 0.9
    np.testing.assert_allclose(np.abs(components), np.abs(other.transform(scaled)), atol=1e-9)


def test_nearest_centres_agree_with_scipy():
    rng = np.random.default_rng(4)
    points, centres = rng.normal(size=(50, 3)), rng.normal(size=(7, 3))
    label, distance = nearest(points, centres)
    every = cdist(points, centres)
    np.testing.assert_array_equal(label, every.argmin(axis=1))
    np.testing.assert_allclose(distance, every.min(axis=1))


def test_silhouettes_are_those_of_all_rows_where_they_are_few():
    rng = np.random.default_rng(4)
    points = np.concatenate((rng.normal(size=(40, 2)), rng.normal(size=(40, 2)) + 6))
    found = find_clusters(points, None, 0)
    assert set(found.silhouettes) == set(range(2, 13))
    assert found.silhouette == max(found.silhouettes.values()) == pytest.approx(silhouette_score(points, found.label))
    between = sum(
        np.sum(found.label == i) * np.sum((points[found.label == i].mean(axis=0) - points.mean(axis=0)) ** 2)
        for i in range(len(found.centre))
    )
    assert found.explained == pytest.approx(between / np.sum((points - points.mean(axis=0)) ** 2))


# Scales


def test_scales_are_medians_and_quartiles():
    """Of 1 ... 5 the median is 3 and the quartiles 2 and 4: 5 lies 2 * 1.349 / 2 robust standard deviations above."""
    values = np.arange(1.0, 6.0)[:, None]
    scaling = fit_scaling(values, ["a"])
    z = 2 * 1.3489795 / 2
    assert scaling.apply(values)[-1, 0] == pytest.approx(DRAWN_IN * np.arcsinh(z / DRAWN_IN))
    assert scaling.apply(values)[2, 0] == 0


def test_one_wild_value_moves_no_scale():
    tame = np.random.default_rng(0).normal(size=(101, 1))
    wild = tame.copy()
    wild[np.argmax(wild)] = 1e12
    before, after = (fit_scaling(values, ["a"], logs=False) for values in (tame, wild))
    assert (before.centre, before.scale) == (after.centre, after.scale)
    assert after.apply(wild).max() < 3 * np.log(1e12)


def test_long_upper_tails_are_logged():
    rng = np.random.default_rng(0)
    normal = rng.normal(size=500)
    values = np.column_stack((np.exp(2 * normal), 10 + normal, -np.exp(2 * normal), np.exp(2 * normal) * (normal > 0)))
    names = ["areas", "even", "negative", "zeros"]
    assert fit_scaling(values, names).logged == ("areas",)
    assert fit_scaling(values, names, logs=False).logged == ()
    # The unit of a logged column changes nothing.
    metres, feet = values.copy(), values * [3.28, 1, 1, 1]
    np.testing.assert_allclose(
        fit_scaling(metres, names).apply(metres)[:, 0], fit_scaling(feet, names).apply(feet)[:, 0], atol=1e-9
    )


def test_tails_that_logarithms_would_make_worse_are_left():
    """Half of the values are equal: logarithms leave the lower tail at 0."""
    column = np.array([1.0] * 60 + [2.0, 3, 4, 5, 6, 7, 8, 9, 10, 1000] * 4)[:, None]
    scaling = fit_scaling(column, ["a"])
    assert scaling.logged == ()
    assert np.all(np.isfinite(scaling.apply(column)))


def test_columns_where_half_of_the_values_are_equal_have_a_scale():
    column = np.array([0.0] * 90 + [1.0] * 10)[:, None]
    scaling = fit_scaling(column, ["a"])
    assert scaling.scale[0] == pytest.approx(0.3)


# Faults of data


def test_rows_with_nulls_have_no_group(families):
    values = families[0].copy()
    values[::10, 3] = np.nan
    values[5, 0] = np.inf
    groups = group(values, GroupOptions(columns=COLUMNS, count=3))
    missing = np.isnan(groups.group)
    assert missing.sum() == len(values[::10]) + 1
    np.testing.assert_array_equal(np.isnan(groups.distance), missing)
    columns = groups.column_values()
    assert list(columns) == ["group", "group_distance", "is_prototype"]
    assert [value is None for value in columns["is_prototype"]] == missing.tolist()
    assert sum(value is True for value in columns["is_prototype"]) == 3
    assert groups.size.sum() == (~missing).sum()


def test_constant_columns_are_left_out_and_named():
    rng = np.random.default_rng(0)
    values = np.column_stack((rng.normal(size=40), np.full(40, 7.0), 5e6 + rng.normal(size=40) * 1e-6))
    groups = group(values, GroupOptions(columns=("a", "parts", "noise"), count=2))
    assert (groups.columns, groups.left_out) == (("a",), ("parts", "noise"))
    assert groups.typical.shape == (2, 1)


@pytest.mark.parametrize(
    ("values", "options", "message"),
    [
        (np.ones((1, 1)), {}, "1 of 1 rows have a value in each of a, and grouping needs 3; take other columns"),
        (np.zeros((0, 1)), {}, "0 of 0 rows have a value"),
        (np.full((50, 1), np.nan), {}, "0 of 50 rows have a value in each of a"),
        (np.ones((50, 1)), {}, "a have the same value in all 50 rows, and nothing sets them apart; take other columns"),
        (
            np.arange(6.0)[:, None] % 2,
            {"count": 3},
            "count = 3 groups cannot be made of 2 different rows; ask for fewer",
        ),
    ],
)
def test_rows_that_cannot_be_grouped(values, options, message):
    with pytest.raises(OptionError, match=message):
        group(values, GroupOptions(columns=("a",), **options))


def test_one_row_in_the_sample_again_and_again_cannot_be_grouped(monkeypatch):
    monkeypatch.setattr(clusters, "FIT_ROWS", 10)
    values = np.zeros((10_000, 1))
    values[0] = 1.0
    with pytest.raises(OptionError, match="count = 2 groups cannot be made of 1 different rows; take other columns"):
        group(values, GroupOptions(columns=("a",)))


def test_two_different_rows_are_two_groups():
    groups = group(np.array([[0.0], [1.0], [1.0]]), GroupOptions(columns=("a",)))
    assert groups.group.tolist() == [2, 1, 1]
    assert groups.is_prototype.tolist() == [True, True, False]
    assert groups.silhouettes == {2: groups.silhouette}


def test_each_row_may_be_its_own_group():
    groups = group(np.array([[0.0], [10.0], [5.0]]), GroupOptions(columns=("a",), count=3))
    assert sorted(groups.group) == [1, 2, 3]
    assert np.isnan(groups.silhouette)
    assert groups.variance_explained == pytest.approx(1)


@pytest.mark.parametrize(
    ("options", "message"),
    [
        ({"columns": ()}, "columns is empty, and there is nothing to group by"),
        ({"columns": ("a", "b", "a")}, "columns names a more than once; name each column once"),
        ({"columns": ("axis_azimuth_deg", "a")}, "columns names axis_azimuth_deg, whose values run in a circle"),
        (
            {"columns": ("a",), "count": 0},
            "count = 0 sets nothing apart; give 2 groups or more, or leave the number open",
        ),
        ({"columns": ("a",), "count": 1}, "count = 1 sets nothing apart"),
        ({"columns": ("a",), "seed": -1}, "seed = -1 cannot be used; give a whole number from 0 on"),
    ],
)
def test_options_that_cannot_be_used(options, message):
    with pytest.raises(OptionError, match=message):
        GroupOptions(**options)
