"""Output is made in a folder beside its target and moved there when it is whole."""

from __future__ import annotations

import os
import re
import shutil
import sqlite3
import time
from collections.abc import Iterator, Sequence
from contextlib import closing, contextmanager, suppress
from pathlib import Path

from geoshape.errors import WriteError

_PREFIX = ".geoshape-"
# On Windows signal 0 is not a question but an interrupt.
_SIGNAL_0_ASKS = os.name != "nt"
_STALE_SECONDS = 86_400.0
# What a driver could not write is not told; where less than this is free, the disk is what failed.
_NO_ROOM_BYTES = 1_000_000
# Parts of a shapefile besides itself: an older one's index, say, would be wrong beside a new one.
_SHAPEFILE_PARTS = (".shx", ".dbf", ".prj", ".cpg", ".qix", ".sbn", ".sbx", ".fbn", ".fbx", ".ain", ".aih", ".shp.xml")
_JOURNALS = ("-wal", "-shm", "-journal")


def staging_folder(target: Path) -> Path:
    """Name the folder in which this process makes a target."""
    return target.parent / f"{_PREFIX}{target.name}-{os.getpid()}"


@contextmanager
def staged(target: Path) -> Iterator[Path]:
    """Make a folder beside a target, and remove it whatever happens.

    Parameters
    ----------
    target : Path

    Yields
    ------
    Path
        The folder; left-overs of killed runs for the same target are removed first.

    Raises
    ------
    WriteError
        The folder cannot be made.
    """
    remove_litter(target)
    folder = staging_folder(target)
    try:
        folder.mkdir()
    except OSError as error:
        raise WriteError(
            f"{target}: nothing can be written in {target.parent} ({error.strerror}); choose another folder"
        ) from None
    try:
        yield folder
    finally:
        shutil.rmtree(folder, ignore_errors=True)


def remove_litter(target: Path) -> None:
    """Remove what killed runs left of their attempts at the same target."""
    pattern = re.compile(re.escape(f"{_PREFIX}{target.name}-") + r"(\d+)")
    try:
        entries = list(os.scandir(target.parent))
    except OSError:
        return
    for entry in entries:
        match = pattern.fullmatch(entry.name)
        if match and entry.is_dir(follow_symlinks=False) and _is_abandoned(int(match[1]), Path(entry.path)):
            shutil.rmtree(entry.path, ignore_errors=True)


def _is_abandoned(pid: int, folder: Path) -> bool:
    # A folder of our own number was left by an earlier process: in a container every run may have the same.
    if pid == os.getpid():
        return True
    if not _SIGNAL_0_ASKS:
        # Wait until nobody can still be at it.
        return time.time() - folder.stat().st_mtime > _STALE_SECONDS
    try:
        os.kill(pid, 0)
    except ProcessLookupError:
        return True
    except OSError:
        return False
    return False


def publish(folder: Path, target: Path, stale: Sequence[Path]) -> list[str]:
    """Move finished files from the staging folder to the target's, the target itself last.

    Parameters
    ----------
    folder : Path
        Holds the target, under its name, and what belongs to it.
    target : Path
    stale : sequence of Path
        Files of an older output that would be wrong beside the new one; those that are written anew stay.

    Returns
    -------
    list of str
        Names of the files moved, sorted.

    Raises
    ------
    OSError
        A file cannot be moved.
    """
    names = sorted(entry.name for entry in folder.iterdir())
    if target.suffix.lower() == ".gpkg":
        _settle_journal(target)
    for name in sorted(names, key=lambda name: name == target.name):
        (folder / name).replace(target.parent / name)
    for path in [*stale, *_old_parts(target)]:
        if path.name not in names:
            with suppress(FileNotFoundError):
                path.unlink()
    return names


def _old_parts(target: Path) -> list[Path]:
    match target.suffix.lower():
        case ".shp":
            return [target.with_suffix(ending) for ending in _SHAPEFILE_PARTS]
        case ".gpkg":
            return [target.with_name(target.name + ending) for ending in _JOURNALS]
        case _:
            return []


def _settle_journal(target: Path) -> None:
    """Bring changes that wait in a journal into their file, lest they be replayed into the one that replaces it."""
    if not target.with_name(target.name + _JOURNALS[0]).exists():
        return
    with suppress(sqlite3.Error), closing(sqlite3.connect(target)) as connection:
        connection.execute("PRAGMA wal_checkpoint(TRUNCATE)")


def has_room(folder: Path) -> bool:
    """Whether a folder's disk has room for anything worth mentioning."""
    try:
        return shutil.disk_usage(folder).free >= _NO_ROOM_BYTES
    except OSError:
        return True


def copy_database(source: Path, copy: Path) -> None:
    """Copy a GeoPackage, changes that wait in its journal included.

    Raises
    ------
    WriteError
        It is damaged.
    sqlite3.Error
        The copy cannot be written.
    """
    with (
        closing(sqlite3.connect(f"{source.absolute().as_uri()}?mode=ro", uri=True)) as old,
        closing(sqlite3.connect(copy)) as new,
    ):
        try:
            old.backup(new)
        except sqlite3.DatabaseError as error:
            if isinstance(error, sqlite3.OperationalError):
                raise
            raise WriteError(
                f"{source}: the GeoPackage that is there is damaged ({error}); remove it, or write to another file"
            ) from None
