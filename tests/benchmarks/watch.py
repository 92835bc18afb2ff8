"""Run a command and watch its time and the memory of all its processes together."""

from __future__ import annotations

import subprocess
import sys
import threading
import time
from dataclasses import dataclass

import psutil

POLL_SECONDS = 0.1


@dataclass(frozen=True)
class Seen:
    """What a command took."""

    seconds: float
    peak_bytes: int


def run(*arguments: str) -> Seen:
    """Run ``python`` with arguments; memory is the proportional set size, shared pages counted once."""
    begin = time.perf_counter()
    process = subprocess.Popen([sys.executable, *arguments], stdout=subprocess.DEVNULL)
    peak = [0]
    done = threading.Event()
    watcher = threading.Thread(target=_watch, args=(process.pid, peak, done))
    watcher.start()
    code = process.wait()
    seconds = time.perf_counter() - begin
    done.set()
    watcher.join()
    if code:
        raise SystemExit(f"{' '.join(arguments)} failed with exit code {code}")
    return Seen(seconds, peak[0])


def _watch(pid: int, peak: list[int], done: threading.Event) -> None:
    while not done.wait(POLL_SECONDS):
        try:
            root = psutil.Process(pid)
            family = [root, *root.children(recursive=True)]
        except psutil.NoSuchProcess:
            return
        peak[0] = max(peak[0], sum(map(_proportional, family)))


def _proportional(process: psutil.Process) -> int:
    try:
        return int(getattr(process.memory_full_info(), "pss", 0))
    except psutil.Error:
        return 0
