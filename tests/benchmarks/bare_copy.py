"""Copy a layer through Arrow and nothing else: ``python -m tests.benchmarks.bare_copy INPUT OUTPUT``."""

from __future__ import annotations

import sys
from pathlib import Path

from pyogrio.raw import open_arrow, write_arrow


def main() -> None:
    """Stream every batch from one GeoPackage into another."""
    source, target = sys.argv[1:3]
    Path(target).unlink(missing_ok=True)
    with open_arrow(source, use_pyarrow=True) as (meta, reader):
        write_arrow(
            reader,
            target,
            driver="GPKG",
            crs=meta["crs"],
            geometry_type="Unknown",
            geometry_name=meta["geometry_name"] or "wkb_geometry",
        )


if __name__ == "__main__":
    main()
