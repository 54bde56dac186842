"""Ctrl-C: it breaks a run off at any moment but that of the swap; and who asks hears whether a book was changed."""

from __future__ import annotations

import signal
from collections.abc import Iterator
from contextlib import contextmanager
from threading import current_thread, main_thread

_swaps = [0]
_heard = [False]


def listen_anew() -> None:
    """What was heard before is over."""
    _heard[0] = False


def note() -> None:
    """Ctrl-C was heard; a library may lose the exception that this becomes, as one does while it loads another."""
    _heard[0] = True


def swaps() -> int:
    """How many times this process has put something new in a book's place."""
    return _swaps[0]


@contextmanager
def swapping() -> Iterator[None]:
    """For what puts something new in a book's place: Ctrl-C waits until it is done and counted.

    One that was lost before is raised here, where the book is still as it was.
    """
    if _heard[0]:
        raise KeyboardInterrupt
    with _held_back():
        yield
        _swaps[0] += 1


@contextmanager
def _held_back() -> Iterator[None]:
    if current_thread() is not main_thread():  # which alone hears it
        yield
        return
    heard: list[int] = []
    before = signal.signal(signal.SIGINT, lambda number, _: heard.append(number))
    try:
        yield
    finally:
        signal.signal(signal.SIGINT, before)
    for number in heard:
        signal.raise_signal(number)
