"""Runs a command in processes of its own, and tells how long it took and how much memory it and its children had."""

from __future__ import annotations

import subprocess
import sys
import threading
import time
from dataclasses import dataclass
from pathlib import Path

import psutil

SAMPLE_EVERY_S = 0.05
ROOT = Path(__file__).parent.parent.parent


class CommandFailedError(Exception):
    """A command that was to be measured ended with an error."""


@dataclass(frozen=True)
class Finished:
    """A command that ran.

    Attributes
    ----------
    seconds : float
        Wall time from start to end of the process, interpreter and imports included.
    peak_bytes : int
        Largest memory of the process and all its children at one moment, pages that several share counted once
        (proportional set size; unique set size where the system does not tell). 0 where it was not watched.
    output : str
        Its standard output.
    """

    seconds: float
    peak_bytes: int
    output: str


def run(command: list[str], *, watch_memory: bool = False) -> Finished:
    """Run a command to its end; one that fails raises what it said."""
    began = time.perf_counter()
    with subprocess.Popen(command, stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True, cwd=ROOT) as process:
        watch = _Watch(process.pid) if watch_memory else None
        output, complaint = process.communicate()
        seconds = time.perf_counter() - began
        peak = watch.stop() if watch else 0
    if process.returncode:
        raise CommandFailedError(f"{' '.join(command)}: exit code {process.returncode}\n{complaint or output}")
    return Finished(seconds, peak, output)


def python(module: str, *arguments: object) -> list[str]:
    """Give the command that runs a module in this interpreter."""
    return [sys.executable, "-m", module, *map(str, arguments)]


class _Watch:
    """Samples the memory of a process and its children until stopped."""

    def __init__(self, pid: int) -> None:
        self._pid = pid
        self._peak = 0
        self._is_done = threading.Event()
        self._thread = threading.Thread(target=self._sample, daemon=True)
        self._thread.start()

    def stop(self) -> int:
        self._is_done.set()
        self._thread.join()
        return self._peak

    def _sample(self) -> None:
        try:
            parent = psutil.Process(self._pid)
        except psutil.NoSuchProcess:
            return
        while not self._is_done.wait(SAMPLE_EVERY_S):
            try:
                family = [parent, *parent.children(recursive=True)]
            except psutil.NoSuchProcess:
                return
            self._peak = max(self._peak, sum(_memory(process) for process in family))


def _memory(process: psutil.Process) -> int:
    """Read the memory of one process; 0 when it is gone."""
    try:
        rollup = Path(f"/proc/{process.pid}/smaps_rollup")
        if rollup.exists():
            line = next(line for line in rollup.read_text().splitlines() if line.startswith("Pss:"))
            return 1024 * int(line.split()[1])
        return int(process.memory_full_info().uss)
    except (psutil.Error, OSError, StopIteration):
        return 0
