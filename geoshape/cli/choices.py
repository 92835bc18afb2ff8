"""Options of the command line that several commands share, each declared once."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any, TypeVar

import click

from geoshape.options import DEFAULT_FAMILIES, Family

Command = TypeVar("Command", bound=Callable[..., Any])


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
