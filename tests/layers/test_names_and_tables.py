"""Names of columns, and measured values as typed columns."""

from pathlib import Path

import numpy as np
import pyarrow as pa
import pyogrio
import pytest
from hypothesis import given
from hypothesis import strategies as st

from geoshape.columns import columns_for
from geoshape.errors import ColumnNameError
from geoshape.layers.names import check_case, check_new_names, free_name, short_names
from geoshape.layers.plan import LayerContent, plan_output
from geoshape.layers.tables import COMMENT, add_columns, column_fields, columns_to_arrow
from geoshape.layers.write import OutputBatch, write_batches
from geoshape.options import Family, MeasureOptions
from tests.layers import samples

ALL = columns_for(MeasureOptions(families=tuple(Family), harmonics=40, log_moments=True))


def test_a_clash_names_all_columns_and_the_remedy() -> None:
    with pytest.raises(ColumnNameError) as caught:
        check_new_names(["Hu_1"], ALL)
    assert str(caught.value) == ("'Hu_1' would be written twice: the layer has it already; give new columns a --prefix")
    check_new_names(["hu_1"], columns_for(MeasureOptions(prefix="gs_")))


def test_case_of_letters_beyond_ascii(tmp_path: Path) -> None:
    rows = pa.record_batch({"\u00c4rea": [1], "\u00e4rea": [2]})
    check_case(rows.schema.names, "GeoPackage")
    path = tmp_path / "a.gpkg"
    write_batches(plan_output(path, LayerContent(rows.schema)), [OutputBatch(rows, samples.wkb(None))])
    assert list(pyogrio.read_info(path)["fields"]) == rows.schema.names


def test_free_names() -> None:
    assert free_name("fid", ["FID", "fid_1", "x"]) == "fid_2"
    assert free_name("fid", ["x"]) == "fid"


def test_short_names_of_the_registry_are_kept() -> None:
    assert list(short_names([], ALL).values()) == [column.short_name for column in ALL]


def test_short_names_that_a_prefix_makes_alike() -> None:
    columns = columns_for(MeasureOptions(prefix="my_own_prefix_", families=("extent",)))
    found = list(short_names(["my_own_pre"], columns).values())
    assert found[:3] == ["my_own_pre", "my_own_p_1", "my_own_p_2"]
    assert len(set(found)) == len(found)


names = st.lists(st.text("abAB_\u00e9\u65e5", min_size=1, max_size=14), unique=True, max_size=40)


@given(names)
def test_short_names_are_short_and_different(existing: list[str]) -> None:
    found = short_names(existing, ALL)
    assert list(found) == [*existing, *(column.name for column in ALL)]
    assert all(len(name.encode()) <= 10 for name in found.values())
    assert len({name.casefold() for name in found.values()}) == len(found)
    assert found == short_names(existing, ALL)
    folded = [name.casefold() for name in existing]
    for name in existing:
        if len(name.encode()) <= 10 and folded.count(name.casefold()) == 1:
            assert found[name] == name


def test_values_become_typed_columns() -> None:
    arrays = columns_to_arrow(samples.COLUMNS, samples.MEASURES)
    assert [array.type for array in arrays] == [pa.string(), pa.string(), pa.float64(), pa.int64(), pa.float64()]
    found = {column.name: array.to_pylist() for column, array in zip(samples.COLUMNS, arrays, strict=True)}
    assert found == samples.EXPECTED_MEASURES


@pytest.mark.parametrize(
    "counts", [np.array([1, 2, 2**53 + 1]), np.array([1, 2, 3], np.int32), np.array([1.0, 2.0, 3.0])]
)
def test_counts_of_any_number_type(counts: np.ndarray) -> None:
    (column,) = (column for column in samples.COLUMNS if column.name == "part_count")
    (array,) = columns_to_arrow([column], {"part_count": counts})
    assert array.to_pylist() == counts.astype(np.int64).tolist()


def test_text_with_nan_is_null() -> None:
    (array,) = columns_to_arrow([samples.text_column("t")], {"t": np.array(["a", None, float("nan")], dtype=object)})
    assert array.to_pylist() == ["a", None, None]


def test_missing_values_are_an_error() -> None:
    with pytest.raises(KeyError, match="shape_status"):
        columns_to_arrow(samples.COLUMNS, {})


def test_no_rows() -> None:
    arrays = columns_to_arrow(samples.COLUMNS, {column.name: [] for column in samples.COLUMNS})
    assert [len(array) for array in arrays] == [0] * 5
    assert [array.type for array in arrays] == [field.type for field in column_fields(samples.COLUMNS)]


def test_fields_carry_unit_and_meaning() -> None:
    comments = [field.metadata[COMMENT].decode() for field in column_fields(samples.COLUMNS)]
    assert comments[2] == "area, holes excluded [m2]"
    assert comments[3] == "parts, as read"


def test_columns_stand_behind_the_attributes() -> None:
    schema = pa.schema([*samples.attributes().schema, *column_fields(samples.COLUMNS)])
    batch = add_columns(samples.attributes(), samples.COLUMNS, samples.MEASURES, schema)
    assert batch.schema.names == [*samples.ATTRIBUTES, *samples.EXPECTED_MEASURES]
    assert batch.num_rows == 5
