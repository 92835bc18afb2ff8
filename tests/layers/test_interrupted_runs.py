"""Whatever goes wrong while a file is written, the old one stays as it was and nothing is left behind."""

import errno
import os
import signal
import sqlite3
import subprocess
import sys
import time
from collections.abc import Iterator
from contextlib import contextmanager, suppress
from pathlib import Path

import numpy as np
import pyarrow as pa
import pyogrio
import pytest
import shapely

from geoshape.errors import GeometryError, WriteError
from geoshape.layers.lineage import read_lineage
from geoshape.layers.plan import LayerContent, plan_output
from geoshape.layers.spool import Spool
from geoshape.layers.staging import copy_database, has_room, remove_litter, staging_folder
from geoshape.layers.write import OutputBatch, write_batches
from tests.layers import samples

SUFFIXES = [".gpkg", ".parquet", ".fgb", ".shp", ".geojson", ".geojsonl", ".csv"]
ERRORS = [GeometryError("row 2 is invalid"), KeyboardInterrupt(), ZeroDivisionError("oops"), MemoryError()]


def files(folder: Path) -> dict[str, bytes]:
    return {str(path.relative_to(folder)): path.read_bytes() for path in folder.rglob("*") if path.is_file()}


@pytest.fixture
def old(tmp_path: Path, request: pytest.FixtureRequest) -> Path:
    path = tmp_path / f"out{request.param}"
    write_batches(plan_output(path, samples.plain_content()), [samples.numbered(samples.POLYGON)], samples.lineage)
    return path


@pytest.mark.parametrize("old", SUFFIXES, indirect=True)
@pytest.mark.parametrize("error", ERRORS, ids=lambda error: type(error).__name__)
@pytest.mark.parametrize("rows", [0, 2])
def test_what_the_producer_raises_comes_back(old: Path, error: BaseException, rows: int) -> None:
    before = files(old.parent)
    plan = plan_output(old, samples.plain_content(), overwrite=True)
    with pytest.raises(type(error)) as caught:
        write_batches(plan, samples.failing(error, rows), samples.lineage)
    assert caught.value is error
    assert files(old.parent) == before
    assert [path.name for path in old.parent.iterdir() if path.is_dir()] == []


@pytest.mark.parametrize("old", SUFFIXES, indirect=True)
def test_overwrite_replaces_all_of_it(old: Path) -> None:
    plan = plan_output(old, samples.content("Polygon"), overwrite=True)
    write_batches(plan, [samples.batch(plan)])
    assert read_lineage(old) is None
    assert {path.suffix for path in old.parent.iterdir()} <= {old.suffix, ".shx", ".dbf", ".prj", ".cpg", ".csv"}


CHILD = """
import os, sys, time
from geoshape.layers.plan import LayerContent, plan_output
from geoshape.layers.write import OutputBatch, write_batches
from tests.layers import samples

def batches():
    for i in range(1000):
        yield samples.numbered(*[samples.POLYGON] * 500, first=500 * i)
        if i == 20:
            print("writing", flush=True)
            time.sleep(60)

plan = plan_output(sys.argv[1], samples.plain_content(), overwrite=True)
write_batches(plan, batches())
"""


@pytest.mark.parametrize("old", [".gpkg", ".parquet", ".shp"], indirect=True)
def test_killed_run(old: Path) -> None:
    before = files(old.parent)
    root = Path(__file__).parents[2]
    with subprocess.Popen([sys.executable, "-c", CHILD, old], cwd=root, stdout=subprocess.PIPE, text=True) as child:
        assert child.stdout is not None
        assert child.stdout.readline() == "writing\n"
        child.send_signal(signal.SIGKILL)
    litter = [path for path in old.parent.iterdir() if path.is_dir()]
    assert [path.name for path in litter] == [f".geoshape-{old.name}-{child.pid}"]
    assert {name: data for name, data in files(old.parent).items() if os.sep not in name} == before
    plan = plan_output(old, samples.plain_content(), overwrite=True)
    write_batches(plan, [samples.numbered(samples.POLYGON, None)])
    assert [path for path in old.parent.iterdir() if path.is_dir()] == []
    assert pyogrio.read_info(old)["features"] == 2 if old.suffix != ".parquet" else old.exists()


def test_interrupt_from_the_keyboard_while_gdal_writes(tmp_path: Path) -> None:
    path = tmp_path / "out.gpkg"
    # A shell that starts the tests in the background has them ignore interrupts.
    before = signal.signal(signal.SIGINT, signal.default_int_handler)

    def batches() -> object:
        for i in range(10_000):
            if i == 3:
                os.kill(os.getpid(), signal.SIGINT)
            yield samples.numbered(samples.POLYGON, first=i)

    try:
        with pytest.raises(KeyboardInterrupt):
            write_batches(plan_output(path, samples.plain_content()), batches())  # type: ignore[arg-type]
    finally:
        signal.signal(signal.SIGINT, before)
    assert list(tmp_path.iterdir()) == []


def test_litter_of_the_living_stays(tmp_path: Path) -> None:
    target = tmp_path / "out.gpkg"
    alive = tmp_path / f".geoshape-out.gpkg-{os.getppid()}"
    dead = tmp_path / ".geoshape-out.gpkg-999999999"
    own = staging_folder(target)
    others = [tmp_path / ".geoshape-other.gpkg-999999999", tmp_path / ".geoshape-out.gpkg-x", tmp_path / "out.gpkg-1"]
    for folder in (alive, dead, own, *others):
        folder.mkdir()
    (dead / "out.gpkg").touch()
    remove_litter(target)
    assert {path.name for path in tmp_path.iterdir()} == {alive.name, *(path.name for path in others)}


def test_litter_where_signals_interrupt(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    target = tmp_path / "out.gpkg"
    young, aged = tmp_path / ".geoshape-out.gpkg-1", tmp_path / ".geoshape-out.gpkg-2"
    young.mkdir()
    aged.mkdir()
    os.utime(aged, (0, time.time() - 90_000))
    monkeypatch.setattr("geoshape.layers.staging._SIGNAL_0_ASKS", False)
    remove_litter(target)
    assert [path.name for path in tmp_path.iterdir()] == [young.name]


def test_litter_of_a_folder_that_is_not_there(tmp_path: Path) -> None:
    remove_litter(tmp_path / "no" / "out.gpkg")
    assert list(tmp_path.iterdir()) == []


def noise(rng: np.random.Generator) -> OutputBatch:
    """Rows of about 160 kB that cannot be packed."""
    shapes = shapely.polygons(rng.random((100, 100, 2)))
    texts = [rng.bytes(200).hex() for _ in range(100)]
    rows = pa.record_batch({"row": pa.array(rng.integers(1 << 60, size=100)), "text": pa.array(texts)})
    return OutputBatch(rows, pa.array(shapely.to_wkb(shapes), pa.binary()))


FULL = "the disk is full; make room and run again (what was there is untouched)"


@pytest.mark.parametrize("suffix", SUFFIXES)
def test_full_disk(tmp_path: Path, suffix: str) -> None:
    with small_disk(tmp_path / "disk") as disk:
        target = disk / f"out{suffix}"
        write_batches(plan_output(target, samples.plain_content()), [samples.numbered(samples.POLYGON)])
        before = files(disk)
        content = LayerContent(pa.schema([("row", pa.int64()), ("text", pa.string())]), (), None, "Polygon")
        plan = plan_output(target, content, overwrite=True)
        rng = np.random.default_rng(1)
        with pytest.raises(WriteError) as caught:
            write_batches(plan, (noise(rng) for _ in range(20)))
        assert str(caught.value) == f"{target}: {FULL}"
        assert files(disk) == before


@pytest.mark.parametrize(
    "error",
    [
        OSError(errno.ENOSPC, "No space left on device"),
        sqlite3.OperationalError("database or disk is full"),
        RuntimeError("sqlite3_step() failed: database or disk is full"),
    ],
)
def test_full_disk_however_it_is_said(tmp_path: Path, monkeypatch: pytest.MonkeyPatch, error: Exception) -> None:
    def fail(*_: object) -> None:
        raise error

    monkeypatch.setattr("geoshape.layers.write.write_vector", fail)
    with pytest.raises(WriteError, match="the disk is full"):
        write_batches(plan_output(tmp_path / "out.gpkg", samples.plain_content()), [])
    assert list(tmp_path.iterdir()) == []


def test_what_the_format_refuses(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    def fail(*_: object) -> None:
        raise RuntimeError("no\nsuch thing.")

    monkeypatch.setattr("geoshape.layers.write.write_vector", fail)
    with pytest.raises(WriteError) as caught:
        write_batches(plan_output(tmp_path / "out.fgb", samples.plain_content()), [])
    assert str(caught.value) == (
        f"{tmp_path}/out.fgb: cannot be written as FlatGeobuf (no such thing); try another format "
        "(what was there is untouched)"
    )


def test_staging_folder_that_cannot_be_made(tmp_path: Path) -> None:
    folder = tmp_path / "folder"
    folder.mkdir()
    plan = plan_output(folder / "out.gpkg", samples.plain_content())
    folder.rmdir()
    with pytest.raises(WriteError, match=r"nothing can be written in .* choose another folder$"):
        write_batches(plan, [])


def test_broken_pipe_comes_back(monkeypatch: pytest.MonkeyPatch) -> None:
    class Closed:
        closed = False

        def write(self, data: bytes) -> int:
            raise BrokenPipeError(errno.EPIPE, "Broken pipe")

        def flush(self) -> None: ...

    class Stdout:
        buffer = Closed()

        def flush(self) -> None: ...

    monkeypatch.setattr("geoshape.layers.write.sys.stdout", Stdout())
    with pytest.raises(BrokenPipeError):
        write_batches(plan_output("-", samples.plain_content()), [samples.numbered(samples.POLYGON)])


def test_link_stays_a_link(tmp_path: Path) -> None:
    real, link = tmp_path / "real.parquet", tmp_path / "link.parquet"
    real.touch()
    link.symlink_to(real)
    plan = plan_output(link, samples.plain_content(), overwrite=True)
    write_batches(plan, [samples.numbered(samples.POLYGON)])
    assert link.is_symlink()
    assert real.stat().st_size > 0


def make_layer(path: Path, name: str, rows: int, status: str) -> None:
    plan = plan_output(path, samples.plain_content(), output_layer=name, overwrite=True)
    write_batches(plan, [samples.numbered(*[samples.POLYGON] * rows)], samples.lineage(status))


def test_geopackage_keeps_other_layers(tmp_path: Path) -> None:
    path = tmp_path / "out.gpkg"
    make_layer(path, "roads", 1, "one")
    make_layer(path, "lakes", 2, "two")
    make_layer(path, "Roads", 3, "three")
    layers = {str(name): pyogrio.read_info(path, layer=name)["features"] for name, _ in pyogrio.list_layers(path)}
    assert layers == {"lakes": 2, "Roads": 3}
    for layer, status in [("lakes", "two"), ("ROADS", "three"), (None, "two")]:
        found = read_lineage(path, layer)
        assert found is not None
        assert found["rows_by_status"] == {status: 5}
    with sqlite3.connect(path) as connection:
        assert connection.execute("SELECT count(*) FROM gpkg_metadata").fetchone() == (2,)
        assert connection.execute("PRAGMA integrity_check").fetchone() == ("ok",)
    connection.close()


def test_geopackage_with_changes_in_its_journal(tmp_path: Path) -> None:
    path = tmp_path / "out.gpkg"
    make_layer(path, "roads", 1, "one")
    user = sqlite3.connect(path)
    user.execute("PRAGMA journal_mode = WAL")
    user.execute("CREATE TABLE notes (text TEXT)")
    user.execute("INSERT INTO notes VALUES ('kept')")
    user.commit()
    assert path.with_name("out.gpkg-wal").exists()
    make_layer(path, "lakes", 2, "two")
    user.close()
    with sqlite3.connect(path) as connection:
        assert connection.execute("SELECT text FROM notes").fetchone() == ("kept",)
    connection.close()
    assert sorted(str(name) for name, _ in pyogrio.list_layers(path)) == ["lakes", "notes", "roads"]


@contextmanager
def small_disk(folder: Path) -> Iterator[Path]:
    folder.mkdir()
    mount = ["mount", "-t", "tmpfs", "-o", "size=600k", "tmpfs", str(folder)]
    try:
        mounted = subprocess.run(mount, capture_output=True, check=False).returncode == 0
    except FileNotFoundError:
        mounted = False
    if not mounted:
        pytest.skip("a small disk can be made by the superuser only")
    try:
        yield folder
    finally:
        subprocess.run(["umount", str(folder)], check=True)


def test_rows_kept_aside_on_a_full_disk(tmp_path: Path) -> None:
    rng = np.random.default_rng(1)
    batch = noise(rng)
    with small_disk(tmp_path / "disk") as disk:
        with Spool(batch.attributes.schema, disk) as spool:
            text = ""
            for _ in range(20):
                try:
                    spool.write(batch.attributes, batch.geometry)
                except WriteError as error:
                    text = str(error)
        assert "rows cannot be kept aside" in text
        assert text.endswith("; make room on the disk")
        assert list(disk.iterdir()) == []


def test_last_rows_kept_aside_on_a_full_disk(tmp_path: Path) -> None:
    batch = samples.numbered(samples.POLYGON)
    with small_disk(tmp_path / "disk") as disk:
        with Spool(batch.attributes.schema, disk) as spool:
            spool.write(batch.attributes, batch.geometry)
            with suppress(OSError):
                (disk / "big").write_bytes(b"x" * 700_000)
            for i in range(10_000):
                try:
                    (disk / str(i)).write_bytes(b"x")
                except OSError:
                    break
            with suppress(WriteError):
                for _ in range(1000):
                    spool.write(batch.attributes, batch.geometry)
            with pytest.raises(WriteError, match="make room on the disk"):
                list(spool.batches())
        assert not [path for path in disk.iterdir() if path.is_dir()]


def test_room_on_a_disk_that_is_not_there(tmp_path: Path) -> None:
    assert has_room(tmp_path / "no")
    assert has_room(tmp_path)


def test_litter_of_others_who_live(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    def forbid(pid: int, signal: int) -> None:
        raise PermissionError

    monkeypatch.setattr("geoshape.layers.staging.os.kill", forbid)
    (tmp_path / ".geoshape-out.gpkg-1").mkdir()
    remove_litter(tmp_path / "out.gpkg")
    assert len(list(tmp_path.iterdir())) == 1


def test_copy_that_fails_is_no_damage(tmp_path: Path) -> None:
    path = tmp_path / "a.gpkg"
    make_layer(path, "a", 1, "ok")
    with pytest.raises(sqlite3.OperationalError):
        copy_database(path, tmp_path / "no" / "b.gpkg")
