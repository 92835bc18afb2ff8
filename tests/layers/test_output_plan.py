"""What stops an output before anything is read, and what it says."""

import os
import zipfile
from pathlib import Path

import pyarrow as pa
import pytest

from geoshape.errors import ColumnNameError, WriteError
from geoshape.layers.plan import LayerContent, plan_output
from geoshape.layers.read import open_layer
from geoshape.layers.write import write_batches
from tests.layers import samples


def message(target: Path | str, content: LayerContent | None = None, **options: object) -> str:
    with pytest.raises(WriteError) as caught:
        plan_output(target, content or samples.plain_content(), **options)  # type: ignore[arg-type]
    text = str(caught.value)
    assert "\n" not in text
    return text.replace(str(Path(target).parent), "DIR") if os.sep in str(target) else text


def test_unknown_extension(tmp_path: Path) -> None:
    assert message(tmp_path / "out.xyz") == (
        "DIR/out.xyz: extension '.xyz' says no format that can be written; use one of: .gpkg (GeoPackage), "
        ".parquet .geoparquet (GeoParquet), .fgb (FlatGeobuf), .shp (Shapefile), .geojson .json (GeoJSON), "
        ".geojsonl .geojsons .ndjson (GeoJSON text sequence), .csv (CSV), or - for CSV"
    )
    assert message(tmp_path / "out").startswith("DIR/out: no extension says no format")


def test_existing_file(tmp_path: Path) -> None:
    for suffix, rest in [(".parquet", ""), (".gpkg", "; its other layers stay")]:
        path = tmp_path / f"out{suffix}"
        path.touch()
        assert message(path) == (
            f"DIR/out{suffix}: exists already; use --overwrite to replace it{rest}, or write to another file"
        )
        assert plan_output(path, samples.plain_content(), overwrite=True).path == path


def test_folder_missing(tmp_path: Path) -> None:
    assert message(tmp_path / "no" / "out.gpkg") == "DIR/out.gpkg: the folder DIR does not exist; make it first"


def test_folder_closed(public_path: Path) -> None:
    folder = public_path / "closed"
    folder.mkdir(mode=0o555)
    with samples.as_nobody():
        text = message(folder / "out.gpkg")
    assert text == "DIR/out.gpkg: nothing can be written in DIR; choose another folder"


def test_folder_not_to_be_entered(public_path: Path) -> None:
    folder = public_path / "closed"
    (folder / "inner").mkdir(parents=True)
    folder.chmod(0o000)
    try:
        with samples.as_nobody():
            text = message(folder / "inner" / "out.gpkg")
    finally:
        folder.chmod(0o755)
    assert text == "DIR/out.gpkg: the folder DIR may not be entered; choose another folder"


def test_target_is_a_folder(tmp_path: Path) -> None:
    folder = tmp_path / "out.gpkg"
    folder.mkdir()
    assert message(folder, overwrite=True) == "DIR/out.gpkg: is a folder; name a file in it"


@pytest.mark.parametrize("target", ["/vsizip/a.zip/out.gpkg", "https://example.org/out.gpkg"])
def test_target_is_no_plain_file(target: str) -> None:
    with pytest.raises(WriteError, match=r"only plain files can be written; name a file in a folder$"):
        plan_output(target, samples.plain_content())


def test_layer_name_where_the_format_has_none(tmp_path: Path) -> None:
    assert message(tmp_path / "out.parquet", output_layer="lakes") == (
        "DIR/out.parquet: a layer in GeoParquet is called as its file; leave out --output-layer"
    )
    assert plan_output(tmp_path / "out.gpkg", samples.plain_content(), output_layer="lakes").layer == "lakes"
    assert plan_output(tmp_path / "out.gpkg", samples.plain_content()).layer == "out"


def make_source(path: Path) -> Path:
    write_batches(plan_output(path, samples.plain_content()), [samples.numbered(samples.POLYGON)])
    return path


SAME = "is the input as well; write to another file"


def test_input_equals_output(tmp_path: Path) -> None:
    source = make_source(tmp_path / "in.gpkg")
    info = open_layer(source)
    assert message(source, overwrite=True, sources=[info]) == f"DIR/in.gpkg: {SAME}"
    link = tmp_path / "link.gpkg"
    link.symlink_to(source)
    assert message(link, overwrite=True, sources=[info]) == f"DIR/link.gpkg: {SAME}"
    assert message(source, overwrite=True, sources=[open_layer(link)]) == f"DIR/in.gpkg: {SAME}"
    hard = tmp_path / "hard.gpkg"
    hard.hardlink_to(source)
    assert message(hard, overwrite=True, sources=[info]) == f"DIR/hard.gpkg: {SAME}"
    assert message(source, overwrite=True, output_layer="other", sources=[info]) == f"DIR/in.gpkg: {SAME}"


def test_input_equals_output_whatever_the_path(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    source = make_source(tmp_path / "in.gpkg")
    info = open_layer(source)
    monkeypatch.chdir(tmp_path)
    with pytest.raises(WriteError, match=SAME):
        plan_output("in.gpkg", samples.plain_content(), sources=[info], overwrite=True)
    with pytest.raises(WriteError, match=SAME):
        plan_output("../" + tmp_path.name + "/in.gpkg", samples.plain_content(), sources=[info], overwrite=True)


def test_input_in_the_archive_that_is_the_output(tmp_path: Path) -> None:
    source = make_source(tmp_path / "in.gpkg")
    archive = tmp_path / "out.gpkg"
    with zipfile.ZipFile(archive, "w") as file:
        file.write(source, "in.gpkg")
    info = open_layer(f"/vsizip/{{{archive}}}/in.gpkg")
    assert message(archive, overwrite=True, sources=[info]) == f"DIR/out.gpkg: {SAME}"


def test_shapefile_parts_of_the_input(tmp_path: Path) -> None:
    source = make_source(tmp_path / "in.shp")
    dbf = open_layer(source.with_suffix(".dbf"))
    assert message(source, overwrite=True, sources=[dbf]) == f"DIR/in.shp: {SAME}"
    folder = open_layer(tmp_path)
    assert message(tmp_path / "new.shp", sources=[folder]) == f"DIR/new.shp: {SAME}"


def test_other_inputs_do_not_matter(tmp_path: Path) -> None:
    info = open_layer(samples.WORLD)
    assert plan_output(tmp_path / "world.gpkg", samples.plain_content(), sources=[info]).layer == "world"


def test_names_that_clash_stop() -> None:
    schema = pa.schema([("Area_M2", pa.float64()), ("name", pa.string()), ("SHAPE_NOTE", pa.string())])
    with pytest.raises(ColumnNameError) as caught:
        plan_output("-", LayerContent(schema, samples.COLUMNS))
    assert str(caught.value) == (
        "'SHAPE_NOTE', 'Area_M2' would be written twice: the layer has them already; give new columns a --prefix"
    )


@pytest.mark.parametrize("name", ["fid", "FID", "geom", "Geometry", "ogc_fid", "wkb_geometry"])
def test_reserved_names_stop(tmp_path: Path, name: str) -> None:
    content = LayerContent(pa.schema([]), (samples.text_column(name),))
    assert message(tmp_path / "out.csv", content) == (
        f"{name!r}: reserved for ids and geometries; give new columns a --prefix"
    )


def test_attributes_that_differ_in_case_stop_where_case_is_ignored(tmp_path: Path) -> None:
    content = LayerContent(pa.schema([("Area", pa.float64()), ("area", pa.float64())]))
    assert message(tmp_path / "out.gpkg", content) == (
        "columns 'Area' and 'area' are one to GeoPackage, which ignores case; write .parquet or .fgb, or rename one"
    )
    assert plan_output(tmp_path / "out.fgb", content).written_names == ("Area", "area")
    assert plan_output(tmp_path / "out.shp", content).written_names == ("Area", "area_1")


def test_attributes_of_the_same_name_stop(tmp_path: Path) -> None:
    content = LayerContent(pa.schema([("a", pa.float64()), ("a", pa.float64())]))
    assert message(tmp_path / "out.fgb", content) == "the layer has several columns called a; rename them first"


def test_too_many_columns(tmp_path: Path) -> None:
    schema = pa.schema([(f"c{i}", pa.int64()) for i in range(251)])
    content = LayerContent(schema, samples.COLUMNS)
    assert message(tmp_path / "out.shp", content) == (
        "DIR/out.shp: 256 columns, but Shapefile holds 255; choose fewer --families, or write .gpkg or .parquet"
    )
    assert len(plan_output(tmp_path / "out.gpkg", content).written_names) == 256
    fits = LayerContent(pa.schema(list(schema)[:250]), samples.COLUMNS)
    assert len(set(plan_output(tmp_path / "out.shp", fits).written_names)) == 255


def test_long_names_are_announced(tmp_path: Path) -> None:
    content = LayerContent(pa.schema([("population_2010", pa.int64()), ("name", pa.string())]))
    plan = plan_output(tmp_path / "out.shp", content)
    assert plan.warnings == ("names of population_2010 are cut to 10 characters; the file beside says how",)


def test_single_parts_of_a_shapefile_become_multiple() -> None:
    info = open_layer(samples.WILDERNESS)
    assert info.geometry_type == "Polygon"
    assert LayerContent.like(info, ()).geometry_type == "MultiPolygon"
    world = open_layer(samples.WORLD)
    assert LayerContent.like(world, samples.COLUMNS).columns == samples.COLUMNS


def test_damaged_geopackage_is_not_written_into(tmp_path: Path) -> None:
    path = make_source(tmp_path / "out.gpkg")
    path.write_bytes(path.read_bytes()[:5000])
    plan = plan_output(path, samples.plain_content(), overwrite=True)
    with pytest.raises(WriteError) as caught:
        write_batches(plan, [])
    assert str(caught.value) == (
        f"{path}: the GeoPackage that is there is damaged (database disk image is malformed); "
        "remove it, or write to another file"
    )


def test_a_file_that_is_no_geopackage_is_replaced_as_a_whole(tmp_path: Path) -> None:
    path = tmp_path / "out.gpkg"
    path.write_text("not a database")
    plan = plan_output(path, samples.plain_content(), overwrite=True)
    assert not plan.keeps_layers
    write_batches(plan, [samples.numbered(samples.POLYGON)])
    assert open_layer(path).row_count == 1
