"""What a person sees while a run goes on, and at its end."""

import io

import pytest
from rich.console import Console

from geoshape.cli import summary, terminal
from geoshape.run import RunSummary


@pytest.fixture
def stderr(monkeypatch):
    """Let consoles for messages write to a buffer, as a terminal of 100 columns or as a pipe."""

    def as_terminal(*, is_terminal):
        buffer = io.StringIO()
        console = Console(file=buffer, force_terminal=is_terminal, width=100, no_color=True, highlight=False)
        monkeypatch.setattr(terminal, "message_console", lambda: console)
        monkeypatch.setattr(summary, "message_console", lambda: console)
        return buffer

    return as_terminal


def test_a_terminal_gets_a_bar_that_goes_away(stderr):
    buffer = stderr(is_terminal=True)
    with terminal.progress_of("measured", quiet=False) as show:
        show(50, 200)
        show(200, 200)
    text = buffer.getvalue()
    assert "200/200" in text
    assert "rows/s" in text
    # The last thing done is to clear the line.
    assert text.rstrip("\n").endswith("\x1b[2K")


def test_elsewhere_a_plain_line_comes_now_and_then(stderr, monkeypatch, capsys):
    stderr(is_terminal=False)
    clock = iter([0.0, 5.0, 11.0, 12.0, 30.0])
    monkeypatch.setattr(terminal.time, "monotonic", lambda: next(clock))
    with terminal.progress_of("measured", quiet=False) as show:
        for done, total in ((10, 100), (55, 110), (60, 110), (90, None)):
            show(done, total)
    assert capsys.readouterr().err.splitlines() == [
        "measured: 55 of 110, 11.0 s left (5 rows/s)",
        "measured: 90 (3 rows/s)",
    ]


def test_quiet_shows_nothing():
    with terminal.progress_of("measured", quiet=True) as show:
        assert show is None


@pytest.mark.parametrize("variable", ["NO_COLOR", None])
def test_colours_can_be_switched_off(monkeypatch, variable):
    monkeypatch.delenv("NO_COLOR", raising=False)
    if variable:
        monkeypatch.setenv(variable, "1")
    assert terminal.message_console().no_color is (variable is not None)
    assert terminal.output_console().no_color is (variable is not None)


DONE = RunSummary(
    rows=1_200,
    by_status={"ok": 1_100, "repaired": 60, "missing": 40},
    ground="centred: about each [shape]",
    largest_distortion_deg=3.25,
    distorted_rows=7,
    warnings=tuple(f"note {i}" for i in range(8)),
    seconds=12.5,
    output="out [1].gpkg",
    extra_files=("out.columns.csv",),
    columns=("area_m2", "reock"),
)


def test_summary_says_all_in_few_lines(stderr):
    buffer = stderr(is_terminal=False)
    summary.print_summary(DONE, verbose=False)
    lines = [line.rstrip() for line in buffer.getvalue().splitlines()]
    assert lines[0] == "measured    1,160 of 1,200 rows (60 repaired, 40 missing)"
    assert "distortion  3.2 deg at most; above 1 deg in 7 rows (see ground_distortion)" in lines
    assert "time        12.5 s, 96 rows/s" in lines
    assert "output      out [1].gpkg" in lines
    assert "            out.columns.csv" in lines
    assert lines[-1] == "and 3 more notes; -v shows them all"


def test_verbose_summary_leaves_nothing_out(stderr):
    buffer = stderr(is_terminal=False)
    summary.print_summary(DONE, verbose=True)
    assert "note 7" in buffer.getvalue()
    assert "area_m2, reock" in buffer.getvalue()
    assert "more notes" not in buffer.getvalue()


def test_no_ground_no_distortion(stderr):
    buffer = stderr(is_terminal=False)
    alone = RunSummary(
        rows=0, by_status={}, ground="plane", largest_distortion_deg=None, distorted_rows=0, warnings=(), seconds=0.1,
        output="-", extra_files=(), columns=(),
    )  # fmt: skip
    summary.print_summary(alone, verbose=False)
    assert "not known without a CRS" in buffer.getvalue()
