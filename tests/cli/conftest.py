"""Run the command line in this process, as a shell would."""

import sys
from dataclasses import dataclass

import pytest

from geoshape.cli.main import main


@dataclass(frozen=True)
class Ran:
    """What a command left behind."""

    code: int
    out: str
    err: str


@pytest.fixture
def geoshape(capsys, monkeypatch):
    """Call ``geoshape`` with arguments and give its exit code and what it printed."""

    def call(*arguments):
        monkeypatch.setattr(sys, "argv", ["geoshape", *map(str, arguments)])
        with pytest.raises(SystemExit) as left:
            main()
        printed = capsys.readouterr()
        return Ran(left.value.code, printed.out, printed.err)

    return call
