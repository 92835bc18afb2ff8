"""Numbers, units and names as people read them."""

from __future__ import annotations

import math
import re
from datetime import datetime

from geoshape.columns import Column, Kind

NARROW_SPACE = "\u202f"
MINUS = "\u2212"
NULL = "\u2013"

_UNITS = {"m2": "m\u00b2", "deg": "\u00b0", "1": "", "": "", "bit": "bits"}

_SHORT_NAMES = {
    "polsby_popper": "Polsby\u2013Popper",
    "reock": "Reock",
    "fd_departure": "departure from a circle",
    "fd_entropy": "spectral entropy",
    "fd_harmonics_95": "harmonics for 95 %",
}


def unit_text(unit: str) -> str:
    """Write a unit with its signs.

    Examples
    --------
    >>> unit_text("m2"), unit_text("1"), unit_text("m")
    ('m\u00b2', '', 'm')
    """
    return _UNITS.get(unit, unit)


def formula_text(text: str) -> str:
    """Write a formula in the registry's ASCII with its signs.

    Examples
    --------
    >>> formula_text("4 pi A / P^2"), formula_text("sqrt(mu20 + n02)")
    ('4\u00a0\u03c0\u00a0A\u00a0/\u00a0P\u00b2', '\u221a(\u03bc\u2082\u2080 + \u03b7\u2080\u2082)')
    """
    for pattern, sign in _SIGNS:
        text = re.sub(pattern, sign, text)
    return re.sub(r"([\u03bc\u03b7\u03bb])(\d+)", lambda found: found[1] + found[2].translate(_SUBSCRIPTS), text)


_SIGNS = (
    (r"\b4 pi A / P\^2", "4\u00a0\u03c0\u00a0A\u00a0/\u00a0P\u00b2"),
    (r"\bpi\b", "\u03c0"),
    (r"\^2", "\u00b2"),
    (r"\^3", "\u00b3"),
    (r"\bsqrt\(", "\u221a("),
    (r"\bsum\b", "\u2211"),
    (r"\bmu(?=\d)", "\u03bc"),
    (r"\bn(?=\d\d\b)", "\u03b7"),
    (r"\bl(?=[12]\b)", "\u03bb"),
    (r"\+-k", "\u00b1k"),
    (r" - ", " \u2212 "),
)
_SUBSCRIPTS = str.maketrans("0123456789", "".join(chr(0x2080 + digit) for digit in range(10)))


def plain_name(column: Column, prefix: str = "") -> str:
    """Turn a column's name into words.

    Examples
    --------
    >>> from geoshape.columns import columns_for
    >>> from geoshape.options import MeasureOptions
    >>> [plain_name(column) for column in columns_for(MeasureOptions())][3:5]
    ['area', 'perimeter']
    """
    bare = column.name.removeprefix(prefix)
    if bare in _SHORT_NAMES:
        return _SHORT_NAMES[bare]
    for suffix in ("_m2", "_m", "_deg"):
        if unit_text(column.unit) and bare.endswith(suffix):
            bare = bare.removesuffix(suffix)
    return bare.replace("_", " ").strip() or column.name


def number_text(value: float, digits: int = 4) -> str:
    """Write a number to so many significant digits, never cutting digits before the point.

    Examples
    --------
    >>> number_text(1234567.8), number_text(0.123456), number_text(0.0), number_text(-1.5e-9), number_text(float("nan"))
    ('1\u202f234\u202f568', '0.1235', '0', '\u22121.5e\u22129', '\u2013')
    """
    if not math.isfinite(value):
        return NULL
    if value == 0:
        return "0"
    size = math.floor(math.log10(abs(value)))
    if size < -4 or size >= 15:
        mantissa, _, exponent = f"{value:.{digits - 1}e}".partition("e")
        mantissa = mantissa.rstrip("0").rstrip(".") if "." in mantissa else mantissa
        text = f"{mantissa}e{int(exponent)}"
    else:
        decimals = max(digits - 1 - size, 0)
        text = f"{value:,.{decimals}f}"
        text = text.rstrip("0").rstrip(".") if "." in text else text
    return text.replace(",", NARROW_SPACE).replace("-", MINUS)


def tick_text(value: float) -> str:
    """Write a number for an axis, large ones as powers of ten.

    Examples
    --------
    >>> tick_text(2500.0), tick_text(1e8), tick_text(2e6)
    ('2\u202f500', '10\u2078', '2\u00d710\u2076')
    """
    if not 1e6 <= abs(value) < 1e15:
        return number_text(value, 3)
    power = math.floor(math.log10(abs(value)))
    mantissa = number_text(value / 10.0**power, 3)
    raised = "10" + str(power).translate(_SUPERSCRIPTS)
    return raised if mantissa == "1" else f"{mantissa}\u00d7{raised}"


_SUPERSCRIPTS = str.maketrans("0123456789", "\u2070\u00b9\u00b2\u00b3\u2074\u2075\u2076\u2077\u2078\u2079")


def value_text(value: float, column: Column, digits: int = 4) -> str:
    """Write a value with its unit.

    Examples
    --------
    >>> from geoshape.columns import columns_for
    >>> from geoshape.options import MeasureOptions
    >>> value_text(2500.0, columns_for(MeasureOptions())[3])
    '2\u202f500 m\u00b2'
    """
    text = whole_text(value) if column.kind is Kind.COUNT else number_text(value, digits)
    unit = unit_text(column.unit)
    if not math.isfinite(value) or not unit:
        return text
    return text + unit if unit == "\u00b0" else f"{text} {unit}"


def whole_text(value: float) -> str:
    """Write a whole number with its thousands apart.

    Examples
    --------
    >>> whole_text(200000)
    '200\u202f000'
    """
    if not math.isfinite(value):
        return NULL
    return f"{value:,.0f}".replace(",", NARROW_SPACE).replace("-", MINUS)


def count_text(count: int, one: str, several: str | None = None) -> str:
    """Write a count with its noun.

    Examples
    --------
    >>> count_text(1, "shape"), count_text(1200, "shape"), count_text(2, "class", "classes")
    ('1 shape', '1\u202f200 shapes', '2 classes')
    """
    return f"{whole_text(count)} {one if count == 1 else several or one + 's'}"


def share_text(part: int, whole: int) -> str:
    """Write a share in per cent, never rounded to none or all.

    Examples
    --------
    >>> share_text(1, 3), share_text(1, 100_000), share_text(99_999, 100_000), share_text(0, 5), share_text(5, 5)
    ('33 %', 'under 0.1 %', 'over 99.9 %', '0 %', '100 %')
    """
    if whole == 0 or part == 0:
        return "0 %"
    if part == whole:
        return "100 %"
    percent = 100.0 * part / whole
    if percent < 0.1:
        return "under 0.1 %"
    if percent > 99.9:
        return "over 99.9 %"
    return f"{percent:.1f} %" if percent < 10.0 or percent > 99.0 else f"{percent:.0f} %"


def area_text(area_m2: float) -> str:
    """Write an area in square metres, hectares or square kilometres, whichever reads best.

    Examples
    --------
    >>> area_text(950.0), area_text(25_000.0), area_text(7.25e7)
    ('950 m\u00b2', '2.5 ha', '72.5 km\u00b2')
    """
    if area_m2 < 1e4:
        return f"{number_text(area_m2, 3)} m\u00b2"
    if area_m2 < 1e7:
        return f"{number_text(area_m2 / 1e4, 3)} ha"
    return f"{number_text(area_m2 / 1e6, 3)} km\u00b2"


def length_text(length_m: float) -> str:
    """Write a length in metres or kilometres.

    Examples
    --------
    >>> length_text(250.0), length_text(12_500.0)
    ('250 m', '12.5 km')
    """
    return f"{number_text(length_m, 3)} m" if length_m < 1e4 else f"{number_text(length_m / 1e3, 3)} km"


def bar_text(length: float, unit: str) -> str:
    """Write the length of a scale bar.

    Examples
    --------
    >>> bar_text(5000.0, "m"), bar_text(200.0, "units")
    ('5 km', '200 units')
    """
    if unit == "m" and length >= 1000.0:
        return f"{number_text(length / 1000.0)} km"
    return f"{number_text(length)} {unit}"


def compass(azimuth_deg: float) -> str:
    """Name an axial direction by both of its ends.

    Examples
    --------
    >>> compass(0.0), compass(47.0), compass(91.0), compass(170.0)
    ('north\u2013south', 'north-east\u2013south-west', 'east\u2013west', 'north\u2013south')
    """
    names = (
        "north\u2013south",
        "north-north-east\u2013south-south-west",
        "north-east\u2013south-west",
        "east-north-east\u2013west-south-west",
        "east\u2013west",
        "east-south-east\u2013west-north-west",
        "south-east\u2013north-west",
        "south-south-east\u2013north-north-west",
    )
    return names[round(azimuth_deg / 22.5) % 8]


def date_text(stamp: str | None) -> str | None:
    """Write the day of an ISO 8601 stamp; None where it is none.

    Examples
    --------
    >>> date_text("2026-03-09T10:00:00+00:00"), date_text("soon")
    ('9 March 2026', None)
    """
    try:
        moment = datetime.fromisoformat(str(stamp))
    except ValueError:
        return None
    return f"{moment.day} {_MONTHS[moment.month - 1]} {moment.year}"


_MONTHS = (
    "January",
    "February",
    "March",
    "April",
    "May",
    "June",
    "July",
    "August",
    "September",
    "October",
    "November",
    "December",
)
