"""Ctrl-C: it breaks a run off at any moment but that of the swap; and who asks hears whether a book was changed."""

from __future__ import annotations

import signal
from collections.abc import Iterator
from contextlib import contextmanager
from threading import current_thread, main_thread

_swaps = [0]
_heard = [False]


def heard() -> bool:
    """Whether Ctrl-C came while this process was last listening."""
    return _heard[0]


@contextmanager
def listening() -> Iterator[None]:
    """Notes Ctrl-C, beside raising it.

    DuckDB turns the interrupt of a running query into an error of another name, and a library may lose the exception,
    as one does while it loads another.
    """
    _heard[0] = False
    if current_thread() is main_thread():
        signal.signal(signal.SIGINT, _note)
    try:
        yield
    finally:
        if current_thread() is main_thread():
            signal.signal(signal.SIGINT, signal.default_int_handler)


def _note(*_: object) -> None:
    _heard[0] = True
    raise KeyboardInterrupt


def swaps() -> int:
    """How many times this process has put something new in a book's place."""
    return _swaps[0]


@contextmanager
def swapping() -> Iterator[None]:
    """For what puts something new in a book's place: Ctrl-C waits until it is done and counted.

    One that was lost before is raised here, where the book is still as it was.
    """
    if heard():
        raise KeyboardInterrupt
    with _held_back():
        yield
        _swaps[0] += 1


@contextmanager
def _held_back() -> Iterator[None]:
    if current_thread() is not main_thread():  # which alone hears it
        yield
        return
    waiting: list[int] = []
    before = signal.signal(signal.SIGINT, lambda number, _: waiting.append(number))
    try:
        yield
    finally:
        signal.signal(signal.SIGINT, before)
    for number in waiting:
        signal.raise_signal(number)
