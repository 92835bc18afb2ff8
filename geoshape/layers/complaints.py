"""What GDAL and Arrow raise and complain of, as one line of text."""

from __future__ import annotations

import contextlib
import warnings
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

import pyarrow as pa
import pyogrio

from geoshape.errors import GeoshapeWarning

MEASURED = "Measured (M) geometry types are not supported"
"""Said by pyogrio of layers with measures, which it reads all the same."""

# GDAL's warnings are ascribed to whoever called pyogrio: us, a context manager, or pyogrio itself.
_CALLERS = (str(Path(__file__).parent), contextlib.__file__, str(Path(pyogrio.__file__).parent))

Failure = (RuntimeError, OSError, ValueError, pa.ArrowException)
"""What reading or writing a layer may raise."""


def one_line(error: BaseException | str) -> str:
    """Give an error's text as one line."""
    return " ".join(str(error).split()).rstrip(".;")


@contextmanager
def quiet() -> Iterator[list[str]]:
    """Collect what GDAL complains of, instead of having it printed; other warnings are passed on at the end."""
    texts: list[str] = []
    others: dict[tuple[type[Warning], str], warnings.WarningMessage] = {}
    with warnings.catch_warnings(record=True) as caught:
        warnings.simplefilter("always")
        try:
            yield texts
        finally:
            for item in caught:
                text = one_line(str(item.message))
                if item.filename.startswith(_CALLERS) and not issubclass(item.category, GeoshapeWarning):
                    texts.append(text)
                else:
                    others.setdefault((item.category, text), item)
    for item in others.values():
        warnings.warn_explicit(item.message, item.category, item.filename, item.lineno)
