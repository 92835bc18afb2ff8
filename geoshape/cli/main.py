"""The command ``geoshape``: finds its commands by name, loads the one that is asked for, turns errors into messages."""

from __future__ import annotations

import os
import sys
from importlib import import_module
from typing import NoReturn

import click

from geoshape import __version__
from geoshape.errors import GeoshapeError, OptionError

_COMMANDS = {
    "inspect": "look at a layer: can it be measured, and what is wrong with it",
    "measure": "measure every polygon and write the layer with its new columns",
    "flag": "flag features by rules, or because their shape is unlike the rest",
    "match": "find the template that each outline is most like",
    "group": "sort features into groups of alike shape, with a prototype of each",
    "compare": "compare two surveys of the same ground: what was kept, split, merged, lost, new",
    "summarise": "statistics by class or zone, mean directions included",
    "redraw": "redraw outlines from their first harmonics",
    "report": "one page that opens anywhere: map, table, close-ups, and how the numbers were made",
    "columns": "list the columns: name, unit, meaning, source",
}


class CommandsByName(click.Group):
    """A group whose commands are imported when called, so that help stays quick."""

    def list_commands(self, ctx: click.Context) -> list[str]:
        """List the commands in the order of the work."""
        return list(_COMMANDS)

    def get_command(self, ctx: click.Context, cmd_name: str) -> click.Command | None:
        """Import the module of the same name and take its command."""
        if cmd_name not in _COMMANDS:
            return None
        command: click.Command = import_module(f"geoshape.cli.{cmd_name}").command
        return command

    def format_commands(self, ctx: click.Context, formatter: click.HelpFormatter) -> None:
        """Write the commands with their summaries, without importing any."""
        with formatter.section("Commands"):
            formatter.write_dl(list(_COMMANDS.items()))


@click.command(
    cls=CommandsByName,
    context_settings={"help_option_names": ["-h", "--help"], "max_content_width": 110},
    epilog="Numbers here describe shapes as drawn. Boundaries, permits and protected sites are decided by local codes"
    " and licensed practice.",
)
@click.version_option(__version__, prog_name="geoshape")
def cli() -> None:
    """Measure the shape of polygons in map layers, on equal-area ground."""


def main() -> None:
    """Run the command line and exit: 0 done, 1 failed, 2 wrong use."""
    # Processes share out the work; threads of the linear algebra beneath NumPy would only stand in their way.
    os.environ.setdefault("OPENBLAS_NUM_THREADS", "1")
    try:
        code = cli(prog_name="geoshape", standalone_mode=False)
    except (click.Abort, KeyboardInterrupt):
        _stop("interrupted; nothing was written", 1)
    except click.ClickException as wrong:
        wrong.show()
        sys.exit(wrong.exit_code)
    except OptionError as error:
        _stop(str(error), 2)
    except GeoshapeError as error:
        _stop(str(error), 1)
    except BrokenPipeError:
        # The reader of standard output has gone; there is nobody left to tell.
        sys.stderr.close()
        sys.exit(1)
    sys.exit(code if isinstance(code, int) else 0)


def _stop(message: str, code: int) -> NoReturn:
    click.echo(f"geoshape: {message}", err=True)
    sys.exit(code)
