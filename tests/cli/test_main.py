"""The command as a whole: help, version, exit codes, and how soon it answers."""

import os
import subprocess
import sys

import pytest

import geoshape as package


@pytest.mark.parametrize("flag", ["-h", "--help"])
@pytest.mark.parametrize("command", [(), ("measure",), ("inspect",), ("columns",)])
def test_help_goes_to_stdout(geoshape, command, flag):
    ran = geoshape(*command, flag)
    assert ran.code == 0
    assert ran.out.startswith("Usage: geoshape")
    assert ran.err == ""


def test_version(geoshape):
    assert geoshape("--version").out == f"geoshape, version {package.__version__}\n"


@pytest.mark.parametrize(
    ("arguments", "complaint"),
    [
        (("polish",), "No such command 'polish'"),
        (("measure",), "Missing argument 'INPUT'"),
        (
            ("measure", "a.gpkg", "b.gpkg", "--families", "colour"),
            "use any of extent,compactness,axes,moments,spectrum",
        ),
        (("measure", "a.gpkg", "b.gpkg", "--samples", "7"), "samples = 7 cannot be used; give an even number"),
        (("measure", "a.gpkg", "b.gpkg", "--jobs", "0"), "0 is not in the range x>=1"),
        (("measure", "a.gpkg", "-", "--json"), "both write to standard output"),
        (("columns", "--json", "--markdown"), "exclude each other"),
    ],
)
def test_wrong_use_exits_with_2(geoshape, arguments, complaint):
    ran = geoshape(*arguments)
    assert ran.code == 2
    assert complaint in ran.err
    assert ran.out == ""


def test_help_loads_nothing_heavy():
    code = (
        "import sys\nsys.argv = ['geoshape', '--help']\nfrom geoshape.cli.main import main\n"
        "try:\n    main()\nexcept SystemExit:\n    pass\n"
        "print([name for name in ('numpy', 'shapely', 'pyproj', 'pyarrow', 'geopandas') if name in sys.modules])"
    )
    printed = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True).stdout
    assert printed.splitlines()[-1] == "[]"


def test_a_reader_that_goes_away_is_no_traceback(tmp_path):
    command = f"{sys.executable} -m geoshape columns --json | head -n 1"
    ran = subprocess.run(["/bin/sh", "-c", command], capture_output=True, text=True, check=False, env=os.environ)
    assert ran.stdout == "[\n"
    assert "Traceback" not in ran.stderr
