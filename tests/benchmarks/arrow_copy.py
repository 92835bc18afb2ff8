"""Copy a layer through Arrow and do nothing else: the least that reading and writing it can cost.

Run as ``python -m tests.benchmarks.arrow_copy INPUT OUTPUT``.
"""

from __future__ import annotations

import sys
from pathlib import Path

from pyogrio.raw import open_arrow, write_arrow


def copy(source: Path, target: Path) -> None:
    """Copy a layer, batch by batch."""
    with open_arrow(source, use_pyarrow=False) as (meta, stream):
        write_arrow(
            stream,
            target,
            driver="GPKG",
            layer="copy",
            geometry_name=meta["geometry_name"] or "wkb_geometry",
            geometry_type=meta["geometry_type"],
            crs=meta["crs"],
        )


if __name__ == "__main__":
    copy(Path(sys.argv[1]), Path(sys.argv[2]))
