"""What README.md shows is what the commands print."""

import contextlib
import io
import os
import re
import subprocess
import sys
from pathlib import Path

import pytest

ROOT = Path(__file__).parent.parent
BLOCK = re.compile(r"^```(console|python)\n(.*?)^```", re.DOTALL | re.MULTILINE)
PROMPT = {"console": "$ ", "python": ">>> "}


def examples():
    """Commands of README in their order, each with the output that is shown for it."""
    for kind, text in BLOCK.findall((ROOT / "README.md").read_text()):
        command, shown = None, []
        for line in text.splitlines():
            if line.startswith(PROMPT[kind]):
                if command is not None:
                    yield kind, command, shown
                command, shown = line.removeprefix(PROMPT[kind]), []
            else:
                shown.append(line)
        yield kind, command, shown


def without_time(lines):
    return [line.rstrip() for line in lines if not line.startswith("time ")]


@pytest.mark.slow
def test_examples_print_what_is_shown(tmp_path, monkeypatch):
    (tmp_path / "sample_layers").symlink_to(ROOT / "sample_layers")
    monkeypatch.chdir(tmp_path)
    tools = f"{Path(sys.executable).parent}{os.pathsep}{os.environ['PATH']}"
    environment = {**os.environ, "PATH": tools, "COLUMNS": "110", "NO_COLOR": "1"}
    names = {}
    ran = 0
    for kind, command, shown in examples():
        if kind == "console":
            printed = subprocess.run(
                command,
                shell=True,
                env=environment,
                stdout=subprocess.PIPE,
                stderr=subprocess.STDOUT,
                text=True,
                check=True,
            ).stdout
        else:
            with contextlib.redirect_stdout(io.StringIO()) as caught:
                exec(compile(command, "README.md", "single"), names)
            printed = caught.getvalue()
        assert without_time(printed.splitlines()) == without_time(shown), command
        ran += 1
    assert ran >= 15


def test_every_command_is_listed():
    table = (ROOT / "README.md").read_text()
    listed = subprocess.run(
        [sys.executable, "-m", "geoshape", "--help"], capture_output=True, text=True, check=True
    ).stdout.partition("Commands:")[2]
    for name in re.findall(r"^  ([a-z]+)  +\S", listed, re.MULTILINE):
        assert f"`geoshape {name}" in table, name
