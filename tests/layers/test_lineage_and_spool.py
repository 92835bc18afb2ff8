"""Lineage where each format keeps it, and rows kept aside."""

import json
import re
import sqlite3
from pathlib import Path

import pyarrow as pa
import pyarrow.parquet as pq
import pytest

from geoshape.errors import WriteError
from geoshape.layers.lineage import lineage_path, read_lineage, store_in_geopackage, versions
from geoshape.layers.plan import plan_output
from geoshape.layers.spool import Spool
from geoshape.layers.write import write_batches
from tests.layers import samples


def test_versions_are_versions() -> None:
    found = versions()
    assert list(found) == ["geoshape", "shapely", "GEOS", "GDAL", "PROJ", "pyarrow", "numpy"]
    assert all(re.match(r"\d+\.\d+", version) for version in found.values())


def test_json_holds_everything() -> None:
    found = json.loads(samples.lineage().to_json())
    assert found == {
        "command": "measure",
        "input": "seen.gpkg",
        "layer": "seen",
        "crs": None,
        "options": {"ground": "centred", "samples": 256},
        "rows_by_status": {"ok": 5},
        "ground": "a plane for each feature",
        "warnings": ["one"],
        "started": "2025-01-02T03:04:05+00:00",
        "seconds": 1.25,
        "versions": versions(),
    }


def test_lineage_may_be_settled_before_or_after_the_rows(tmp_path: Path) -> None:
    for given in (samples.lineage(), samples.lineage):
        path = tmp_path / "a.gpkg"
        plan = plan_output(path, samples.plain_content(), overwrite=True)
        write_batches(plan, [samples.numbered(samples.POLYGON)], given)
        assert read_lineage(path, "a") == json.loads(samples.lineage().to_json())


def test_lineage_is_asked_for_after_the_last_row(tmp_path: Path) -> None:
    for suffix in (".gpkg", ".parquet", ".csv"):
        seen: list[str] = []

        def batches(seen: list[str] = seen) -> object:
            yield samples.numbered(samples.POLYGON)
            seen.append("rows")

        def lineage(seen: list[str] = seen) -> object:
            seen.append("lineage")
            return samples.lineage()

        plan = plan_output(tmp_path / f"a{suffix}", samples.plain_content())
        write_batches(plan, batches(), lineage)  # type: ignore[arg-type]
        assert seen == ["rows", "lineage"]


@pytest.mark.parametrize("suffix", [".gpkg", ".parquet", ".fgb"])
def test_no_lineage(tmp_path: Path, suffix: str) -> None:
    path = tmp_path / f"a{suffix}"
    assert read_lineage(path) is None
    write_batches(plan_output(path, samples.plain_content()), [])
    assert read_lineage(path) is None
    path.write_bytes(b"rubbish")
    assert read_lineage(path) is None


@pytest.mark.parametrize("text", ["{", "[1]", "3"])
def test_text_that_is_no_lineage(tmp_path: Path, text: str) -> None:
    path = tmp_path / "a.fgb"
    path.touch()
    lineage_path(path).write_text(text)
    assert read_lineage(path) is None


def test_geopackage_keeps_metadata_of_others(tmp_path: Path) -> None:
    path = tmp_path / "a.gpkg"
    write_batches(plan_output(path, samples.plain_content()), [], samples.lineage)
    with sqlite3.connect(path) as connection:
        connection.execute(
            "INSERT INTO gpkg_metadata (md_standard_uri, mime_type, metadata) VALUES ('urn:x', 'text/xml', '<a/>')"
        )
        connection.execute(
            "INSERT INTO gpkg_metadata_reference (reference_scope, table_name, md_file_id) VALUES ('table', 'a', 2)"
        )
    connection.close()
    store_in_geopackage(path, "A", samples.lineage("late").to_json())
    with sqlite3.connect(path) as connection:
        rows = connection.execute("SELECT md_standard_uri FROM gpkg_metadata ORDER BY id").fetchall()
        registered = connection.execute(
            "SELECT count(*) FROM gpkg_extensions WHERE extension_name = 'gpkg_metadata'"
        ).fetchone()
    connection.close()
    assert rows == [("urn:x",), ("urn:geoshape:lineage:1",)]
    assert registered == (2,)
    found = read_lineage(path, "a")
    assert found is not None
    assert found["rows_by_status"] == {"late": 5}
    assert read_lineage(path, "b") is None


def test_geoparquet_key(tmp_path: Path) -> None:
    path = tmp_path / "a.parquet"
    write_batches(plan_output(path, samples.plain_content()), [], samples.lineage)
    assert json.loads(pq.read_metadata(path).metadata[b"geoshape"])["command"] == "measure"


# --- spool -----------------------------------------------------------------------------------------------------------


def filled(spool: Spool, n_batches: int = 3) -> None:
    for i in range(n_batches):
        batch = samples.numbered(samples.POLYGON, None, samples.MULTI, first=3 * i)
        spool.write(
            pa.record_batch({"row": batch.attributes.column(0), "wkb": pa.array(["a", None, "c"])}), batch.geometry
        )


SCHEMA = pa.schema([("row", pa.int64()), ("wkb", pa.string())])


def test_rows_come_back_as_often_as_asked(tmp_path: Path) -> None:
    with Spool(SCHEMA, tmp_path) as spool:
        filled(spool)
        assert spool.n_rows == 9
        for _ in range(2):
            batches = list(spool.batches())
            assert [batch.first_row for batch in batches] == [0, 3, 6]
            assert [v for batch in batches for v in batch.attributes.column(0).to_pylist()] == list(range(9))
            assert batches[1].geometry.equals(samples.wkb(samples.POLYGON, None, samples.MULTI))
            assert batches[1].attributes.schema == SCHEMA
        assert spool.read_columns(["wkb", "row", "wkb"]).to_pylist()[0] == {"wkb": "a", "row": 0}
        assert spool.read_columns(["row"]).to_pydict() == {"row": list(range(9))}
        assert spool.read_columns([]).num_columns == 0
        with pytest.raises(KeyError, match="nothing"):
            spool.read_columns(["nothing"])
    assert list(tmp_path.iterdir()) == []


def test_columns_read_outlive_the_file(tmp_path: Path) -> None:
    with Spool(SCHEMA, tmp_path) as spool:
        filled(spool)
        table = spool.read_columns(["row"])
        batches = list(spool.batches())
    assert table.column("row").to_pylist() == list(range(9))
    assert batches[2].geometry.to_pylist()[1] is None


def test_no_rows(tmp_path: Path) -> None:
    with Spool(SCHEMA, tmp_path) as spool:
        assert list(spool.batches()) == []
        assert spool.read_columns(["wkb"]).num_rows == 0


def test_no_attributes(tmp_path: Path) -> None:
    with Spool(pa.schema([]), tmp_path) as spool:
        spool.write(pa.RecordBatch.from_arrays([], schema=pa.schema([])), samples.wkb(samples.POLYGON, None))
        (batch,) = spool.batches()
        assert (batch.n_rows, batch.attributes.num_columns) == (2, 0)


def test_closing_removes_the_file_whenever(tmp_path: Path) -> None:
    spool = Spool(SCHEMA, tmp_path)
    filled(spool)
    spool.close()
    assert list(tmp_path.iterdir()) == []
    spool.close()


def test_rows_after_reading_are_refused(tmp_path: Path) -> None:
    with Spool(SCHEMA, tmp_path) as spool:
        filled(spool)
        list(spool.batches())
        with pytest.raises(WriteError, match="cannot be added to a spool that is being read; write all rows first"):
            filled(spool)


def test_folder_that_is_not_there(tmp_path: Path) -> None:
    with pytest.raises(
        WriteError, match=r"no temporary file can be made .*; set TMPDIR to a folder with room"
    ) as caught:
        Spool(SCHEMA, tmp_path / "no")
    assert "\n" not in str(caught.value)
