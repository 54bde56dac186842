"""Processes that compute: they leave Ctrl-C to the process that started them, and end when it ends, however it does."""

from __future__ import annotations

import os
import signal
from concurrent.futures import ProcessPoolExecutor
from multiprocessing import parent_process
from multiprocessing.connection import wait
from multiprocessing.context import SpawnContext, SpawnProcess
from threading import Thread


def worker_processes(count: int) -> ProcessPoolExecutor:
    """A pool of processes, spawned and never forked: a fork would copy DuckDB's threads and locks in mid-air."""
    return ProcessPoolExecutor(count, mp_context=_Context(), initializer=_end_with_parent)


class _Worker(SpawnProcess):
    def start(self) -> None:
        """Starts it deaf to the interrupts that a terminal sends to everybody."""
        before = signal.pthread_sigmask(signal.SIG_BLOCK, {signal.SIGINT})
        try:
            super().start()
        finally:
            signal.pthread_sigmask(signal.SIG_SETMASK, before)


class _Context(SpawnContext):
    Process = _Worker


def _end_with_parent() -> None:
    Thread(target=_watch_parent, daemon=True).start()


def _watch_parent() -> None:
    parent = parent_process()
    if parent is not None:
        wait([parent.sentinel])
        os._exit(1)
