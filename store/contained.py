"""Work in a child process that cannot fill the memory or the disk or run for ever.

The child is forked before anything heavy is loaded, so that it costs no second start; what it loads and opens stays
with it. It hands over bytes, or the sentence that says why there are none.
"""

from __future__ import annotations

import json
import os
import resource
import signal
import sys
import warnings
from collections.abc import Callable, Iterator
from contextlib import AbstractContextManager, contextmanager, suppress
from dataclasses import dataclass, field
from typing import BinaryIO, NoReturn, TypeVar

from driftbook.store import errors
from driftbook.store.errors import BookError, UsageError

_CHUNK = 1 << 20
_OUT_OF_MEMORY = "MemoryError"
_INTERRUPT = {signal.SIGINT}


def _half_of_the_memory() -> int:
    return os.sysconf("SC_PAGE_SIZE") * os.sysconf("SC_PHYS_PAGES") // 2


@dataclass(frozen=True)
class Limits:
    """What the child may use: seconds on the clock, and bytes of memory beyond those that it began with."""

    seconds: float
    memory: int = field(default_factory=_half_of_the_memory)

    @property
    def too_slow(self) -> UsageError:
        """It ran for too long."""
        return UsageError(f"this takes longer than {self.seconds:g} s; ask for less, or give a longer --timeout.")

    @property
    def too_large(self) -> UsageError:
        """It wanted too much memory."""
        return UsageError(
            f"this needs more than {self.memory >> 20} MiB of memory; ask for less, such as fewer series, a shorter "
            "time or sums."
        )


_Prepared = TypeVar("_Prepared")


@contextmanager
def contained(
    prepare: Callable[[], AbstractContextManager[_Prepared]], work: Callable[[_Prepared], bytes], limits: Limits
) -> Iterator[Iterator[bytes]]:
    """The bytes that `work` gives in a child process, piece by piece.

    `prepare` is ours and only the clock limits it; `work` does what a stranger asks: with bounded memory, and no file
    can grow by a byte. A BookError of either is raised here, MemoryError and a sudden end as a sentence.
    """
    reading, writing = os.pipe()
    sys.stdout.flush()
    sys.stderr.flush()
    signal.pthread_sigmask(signal.SIG_BLOCK, _INTERRUPT)  # before its guard stands, one would leave the child alone
    child = _forked()
    if child == 0:
        os.close(reading)
        _be_the_child(writing, prepare, work, limits)
    os.close(writing)
    with os.fdopen(reading, "rb") as answer, _ended(child) as how_it_ended:
        signal.pthread_sigmask(signal.SIG_UNBLOCK, _INTERRUPT)
        head = answer.readline()
        if not head.endswith(b"\n"):
            raise _why(how_it_ended(), limits)
        yield _pieces(answer, _size(json.loads(head), limits))


def _forked() -> int:
    """Python warns of threads, whose locks a fork leaves as they are; the child makes everything that it uses anew."""
    with warnings.catch_warnings():
        warnings.simplefilter("ignore", DeprecationWarning)
        return os.fork()


@contextmanager
def _ended(child: int) -> Iterator[Callable[[], int]]:
    """Sees that the child is gone afterwards; gives a call that waits for it and says how it ended."""
    found: list[int] = []

    def wait() -> int:
        if not found:
            found.append(os.waitstatus_to_exitcode(os.waitpid(child, 0)[1]))
        return found[0]

    try:
        yield wait
    finally:
        if not found:
            os.kill(child, signal.SIGKILL)
            wait()


def _why(code: int, limits: Limits) -> BaseException:
    """The child said nothing: a signal ended it."""
    if code == -signal.SIGALRM:
        return limits.too_slow
    if code == -signal.SIGINT:
        return KeyboardInterrupt()
    if code in (-signal.SIGKILL, -signal.SIGABRT):
        return limits.too_large
    return BookError(f"the process that did the work ended with code {code}; the book is unchanged.")


def _size(head: dict[str, str | int], limits: Limits) -> int:
    """How many bytes follow, if it went well."""
    if "size" in head:
        return int(head["size"])
    kind, sentence = str(head["error"]), str(head["sentence"])
    if kind == _OUT_OF_MEMORY:
        raise limits.too_large
    raise getattr(errors, kind, RuntimeError)(sentence)


def _pieces(answer: BinaryIO, size: int) -> Iterator[bytes]:
    while size:
        piece = answer.read(min(size, _CHUNK))
        if not piece:
            raise BookError("the process that did the work ended while it told its answer; what is there is not whole.")
        size -= len(piece)
        yield piece


def _be_the_child(
    writing: int,
    prepare: Callable[[], AbstractContextManager[_Prepared]],
    work: Callable[[_Prepared], bytes],
    limits: Limits,
) -> NoReturn:
    """Works and ends the process, past whatever the parent had registered to be done at its own end."""
    try:
        _be_quiet_and_mortal(limits.seconds)
        head, body = _outcome(prepare, work, limits)
        signal.setitimer(signal.ITIMER_REAL, 0)
        with suppress(BrokenPipeError), os.fdopen(writing, "wb") as answer:
            answer.write(json.dumps(head).encode() + b"\n")
            answer.write(body)
    finally:
        os._exit(0)


def _be_quiet_and_mortal(seconds: float) -> None:
    """The kernel ends the process when its time is over, whatever code is running and whoever is still there."""
    signal.signal(signal.SIGINT, signal.SIG_DFL)
    signal.pthread_sigmask(signal.SIG_UNBLOCK, _INTERRUPT)
    signal.signal(signal.SIGALRM, signal.SIG_DFL)
    signal.setitimer(signal.ITIMER_REAL, max(seconds, 0.001))
    resource.setrlimit(resource.RLIMIT_CORE, (0, 0))
    nowhere = os.open(os.devnull, os.O_RDWR)
    for descriptor in (0, 1, 2):
        os.dup2(nowhere, descriptor)


def _outcome(
    prepare: Callable[[], AbstractContextManager[_Prepared]], work: Callable[[_Prepared], bytes], limits: Limits
) -> tuple[dict[str, str | int], bytes]:
    try:
        with prepare() as prepared:
            _confine(limits.memory)
            body = work(prepared)
        return {"size": len(body)}, body
    except MemoryError:
        return {"error": _OUT_OF_MEMORY, "sentence": ""}, b""
    except Exception as error:
        kind = type(error).__name__
        is_ours = isinstance(error, BookError)
        return {"error": kind, "sentence": str(error) if is_ours else f"{kind}: {error}"}, b""


def _confine(memory: int) -> None:
    """No file grows any more, and the address space by this much."""
    with open("/proc/self/statm", encoding="ascii") as statm:  # noqa: PTH123 - nothing more is loaded here
        pages = int(statm.read().split()[0])
    most = pages * os.sysconf("SC_PAGE_SIZE") + memory
    resource.setrlimit(resource.RLIMIT_AS, (most, most))
    resource.setrlimit(resource.RLIMIT_FSIZE, (0, 0))
