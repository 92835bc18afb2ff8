"""Tasks through workers: order, memory, death and interruption."""

import os
import subprocess
import sys

import pytest

from geoshape.errors import GeometryError, GeoshapeError
from geoshape.pool import SMALL_RUN_BATCHES, TASKS_AHEAD, Workers, keep_freed_memory, usable_cores


def prepare_square(offset):
    def square(value):
        return value * value + offset, os.getpid()

    return square


def prepare_trouble(kind):
    def trouble(value):
        if value == 3 and kind == "death":
            os._exit(9)
        if value == 3:
            raise GeometryError("row 3 is invalid")
        return value

    return trouble


@pytest.mark.parametrize("jobs", [1, 2])
@pytest.mark.parametrize("count", [0, 1, SMALL_RUN_BATCHES, 9])
def test_answers_keep_the_order_of_the_tasks(jobs, count):
    answers = list(Workers(prepare_square, 5, jobs).run((f"kept {i}", i) for i in range(count)))
    assert [kept for kept, _ in answers] == [f"kept {i}" for i in range(count)]
    assert [answer for _, (answer, _) in answers] == [i * i + 5 for i in range(count)]


def test_a_small_run_stays_in_this_process_and_a_large_one_leaves_it():
    small = {pid for _, (_, pid) in Workers(prepare_square, 0, 2).run((i, i) for i in range(SMALL_RUN_BATCHES))}
    large = {pid for _, (_, pid) in Workers(prepare_square, 0, 2).run((i, i) for i in range(12))}
    assert small == {os.getpid()}
    assert os.getpid() not in large


def test_no_more_tasks_are_taken_than_are_needed_to_keep_busy():
    taken = 0

    def tasks():
        nonlocal taken
        for i in range(50):
            taken = i + 1
            yield i, i

    answers = Workers(prepare_square, 0, 2).run(tasks())
    for done, _ in enumerate(answers, start=1):
        assert taken <= done + 2 * TASKS_AHEAD


def test_a_task_error_comes_back_as_itself():
    with pytest.raises(GeometryError, match="row 3 is invalid"):
        list(Workers(prepare_trouble, "error", 2).run((i, i) for i in range(9)))


def test_a_dead_worker_is_named_as_such():
    with pytest.raises(GeoshapeError, match="a worker process died, most likely for want of memory; use fewer"):
        list(Workers(prepare_trouble, "death", 2).run((i, i) for i in range(9)))


def test_cores_and_memory_can_be_asked_for_anywhere():
    keep_freed_memory()
    assert usable_cores() >= 1


def test_a_worker_imports_neither_pandas_nor_gdal():
    code = (
        "import sys, geoshape.task\n"
        "heavy = ('pandas', 'geopandas', 'pyogrio', 'pyarrow', 'click', 'scipy')\n"
        "print([name for name in heavy if name in sys.modules])"
    )
    printed = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True).stdout
    assert printed == "[]\n"
