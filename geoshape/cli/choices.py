"""Arguments and options that several commands share, each declared once.

A bundle gathers the values of its options into one frozen object, so that a command takes a source, a target, options
of measuring and a manner of working instead of two dozen loose values.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from functools import wraps
from typing import Any

import click

from geoshape.options import (
    DEFAULT_FAMILIES,
    GROUND_CENTRED,
    Edges,
    Family,
    Holes,
    Invalid,
    MeasureOptions,
    Parts,
    Source,
    Spectrum,
    Target,
)

Function = Callable[..., Any]
Decorator = Callable[[Function], Function]


@dataclass(frozen=True)
class Manner:
    """How a command works and reports.

    Attributes
    ----------
    jobs : int
        Processes that measure.
    as_json : bool
        Whether the summary goes to standard output as JSON.
    quiet, verbose : bool
        Whether only errors are shown, or more than usual.
    """

    jobs: int
    as_json: bool
    quiet: bool
    verbose: bool


def bundle(name: str, build: Callable[[dict[str, Any]], object], *parameters: Decorator) -> Decorator:
    """Make one decorator of several parameters, whose values reach the command as one object.

    Parameters
    ----------
    name : str
        Argument of the command that takes the object.
    build : callable
        Makes it from the parameters' values by name.
    *parameters : decorators
        As click's ``option`` and ``argument`` make them.
    """

    def decorate(command: Function) -> Function:
        @wraps(command)
        def gathered(**values: Any) -> Any:
            own = {key: values.pop(key) for key in keys}
            values[name] = build(own)
            return command(**values)

        before = {parameter.name for parameter in getattr(command, "__click_params__", [])}
        decorated: Function = gathered
        for parameter in reversed(parameters):
            decorated = parameter(decorated)
        keys = [
            str(parameter.name)
            for parameter in decorated.__click_params__  # type: ignore[attr-defined]
            if parameter.name not in before and parameter.expose_value
        ]
        return decorated

    return decorate


class FamilyList(click.ParamType[tuple[Family, ...]]):
    """Names of families, separated by commas."""

    name = "list"

    def convert(
        self, value: str | tuple[Family, ...], param: click.Parameter | None, ctx: click.Context | None
    ) -> tuple[Family, ...]:
        """Turn text into families."""
        if isinstance(value, tuple):
            return value
        try:
            return tuple(Family(word.strip()) for word in value.split(",") if word.strip())
        except ValueError:
            self.fail(f"{value!r}: use any of {','.join(Family)}, separated by commas", param, ctx)


families_option = click.option(
    "--families",
    type=FamilyList(),
    default=",".join(DEFAULT_FAMILIES),
    show_default=True,
    help="Families of columns to compute, separated by commas.",
)

harmonics_option = click.option(
    "--harmonics", type=int, default=8, show_default=True, help="Highest harmonic with its own columns."
)

log_moments_option = click.option(
    "--log-moments", is_flag=True, help="Add the signed log10 of the Hu invariants beside the raw ones."
)

prefix_option = click.option("--prefix", default="", help="Put this before the name of every new column.")

input_argument = click.argument("input_path", metavar="INPUT")

source_options = bundle(
    "source",
    lambda values: Source(path=values["input_path"], layer=values["layer"], where=values["where"], bbox=values["bbox"]),
    input_argument,
    click.option("--layer", help="Layer to read, where the file holds several."),
    click.option("--where", metavar="SQL", help="Read only rows that meet this condition, in SQL as GDAL takes it."),
    click.option(
        "--bbox",
        nargs=4,
        type=float,
        default=None,
        metavar="WEST SOUTH EAST NORTH",
        help="Read only rows that touch this box, in the layer's CRS.",
    ),
)

target_options = bundle(
    "target",
    lambda values: Target(path=values["output_path"], layer=values["output_layer"], overwrite=values["overwrite"]),
    click.argument("output_path", metavar="OUTPUT"),
    click.option("--output-layer", help="Name of the new layer; the file's name where left out."),
    click.option("--overwrite", is_flag=True, help="Replace a file or layer that is there."),
)


def _choice(kind: type[Edges | Spectrum | Parts | Holes | Invalid]) -> click.Choice[str]:
    return click.Choice([str(member) for member in kind])


assume_crs_option = click.option("--assume-crs", metavar="CRS", help="CRS of a layer that does not say its own.")

measure_options = bundle(
    "options",
    lambda values: MeasureOptions(**values),
    click.option(
        "--ground",
        default=GROUND_CENTRED,
        show_default=True,
        metavar="centred|layer|plane|CRS",
        help="Where shapes are measured: an equal-area plane centred on each, one for the layer, the coordinates as"
        " they are, or an equal-area CRS of your choice.",
    ),
    assume_crs_option,
    click.option(
        "--edges",
        type=_choice(Edges),
        default=str(Edges.SOURCE),
        show_default=True,
        help="Edges are straight in the layer's own coordinates, or on the plane.",
    ),
    families_option,
    click.option(
        "--samples", type=int, default=256, show_default=True, help="Points at equal arc length along the outline."
    ),
    harmonics_option,
    click.option(
        "--spectrum",
        type=_choice(Spectrum),
        default=str(Spectrum.SAMPLED),
        show_default=True,
        help="Fourier coefficients from the samples, or in closed form from the polygon.",
    ),
    click.option(
        "--parts",
        type=_choice(Parts),
        default=str(Parts.WHOLE),
        show_default=True,
        help="One row a feature, or one row a part.",
    ),
    click.option(
        "--holes",
        type=_choice(Holes),
        default=str(Holes.KEEP),
        show_default=True,
        help="Holes are kept, or filled before anything is measured.",
    ),
    click.option(
        "--invalid",
        type=_choice(Invalid),
        default=str(Invalid.REPAIR),
        show_default=True,
        help="Invalid geometries are repaired for measuring, get nulls, or stop the run.",
    ),
    log_moments_option,
    prefix_option,
    click.option(
        "--position-error",
        "position_error_m",
        type=float,
        metavar="METRES",
        help="Standard deviation of each coordinate of a vertex: adds the standard error of every measured number.",
    ),
    click.option(
        "--error-length",
        "error_length_m",
        type=float,
        metavar="METRES",
        show_default="each outline's median edge",
        help="Distance along the outline over which errors are alike; 0 for independent errors.",
    ),
    click.option("--error-runs", type=int, default=64, show_default=True, help="Disturbed outlines to measure."),
    click.option("--seed", type=int, default=0, show_default=True, help="The same seed gives the same errors."),
)


def _default_jobs() -> int:
    from geoshape.pool import usable_cores

    return usable_cores()


def _set_color(ctx: click.Context, _: click.Parameter, value: bool) -> None:  # noqa: FBT001 - click calls it so
    if value:
        ctx.color = False


no_color_option = click.option(
    "--no-color", is_flag=True, expose_value=False, callback=_set_color, help="No colours; NO_COLOR does the same."
)

json_option = click.option("--json", "as_json", is_flag=True, help="Write the result as JSON on standard output.")

manner_options = bundle(
    "manner",
    lambda values: Manner(values["jobs"], values["as_json"], values["quiet"], values["verbose"]),
    click.option(
        "--jobs",
        type=click.IntRange(min=1),
        default=_default_jobs,
        show_default="all cores",
        help="Processes that measure.",
    ),
    json_option,
    click.option("-q", "--quiet", is_flag=True, help="Show errors only."),
    click.option("-v", "--verbose", is_flag=True, help="Show more: every warning, versions, time of each part."),
    no_color_option,
)
