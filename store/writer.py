"""The Python way to write: one block, one run, one swap."""

from __future__ import annotations

import os
from collections.abc import Callable, Iterator
from concurrent.futures import Executor
from contextlib import ExitStack, contextmanager
from dataclasses import replace
from datetime import datetime
from pathlib import Path

from driftbook.store import functions, intake, runs
from driftbook.store.errors import UsageError
from driftbook.store.inbox import Delivered, take_in_folder
from driftbook.store.plan import PlanText, read_plan
from driftbook.store.refresh import Progress, Refreshed, put_plan_in_force, refresh
from driftbook.store.swap import Draft, rewriting
from driftbook.store.workers import worker_processes


class Writing:
    """A book under change. What is done becomes one run when the block ends, or nothing does."""

    def __init__(self, draft: Draft, run: runs.Run, stack: ExitStack) -> None:
        self._draft = draft
        self._run = run
        self._stack = stack
        self._refreshed = False
        self._dry = False
        self.finished: runs.Finished | None = None

    def ingest(
        self,
        source: object,
        options: intake.Options | None = None,
        *,
        name: str | None = None,
    ) -> intake.Outcome:
        """Takes in a file, or a frame of polars, pandas or Arrow; raises IntakeError for what cannot be read at all."""
        if self._refreshed:
            raise UsageError("take in first and refresh last: estimates are made of what was taken in before.")
        chosen = options or intake.Options()
        return intake.take_in(self._run.con, source, chosen, self._run.stamp, name=name)

    def refresh(
        self,
        plan: str | os.PathLike[str] | PlanText | None = None,
        *,
        inbox: str | os.PathLike[str] | None = None,
        everything: bool = False,
        yes: bool = False,
        workers: int = 1,
        executor: Executor | None = None,
        report: Callable[[Progress], None] | None = None,
    ) -> Refreshed:
        """Takes in what is new in a folder, then estimates what is due, under a plan file or the book's plan.

        Blocks of series are computed by `executor`, or by `workers` processes.
        """
        chosen = executor or self._stack.enter_context(_executor(workers))
        return self._refresh(plan, inbox, chosen, everything=everything, yes=yes, report=report)

    def due(
        self,
        plan: str | os.PathLike[str] | PlanText | None = None,
        *,
        inbox: str | os.PathLike[str] | None = None,
        everything: bool = False,
    ) -> Refreshed:
        """Counts what a refresh would take in, compute and close; the block then changes nothing."""
        self._dry = True
        return self._refresh(plan, inbox, functions.InlineExecutor(), everything=everything, yes=True, dry_run=True)

    def discard(self) -> None:
        """Leaves the book as it is, whatever was done in this block."""
        self._dry = True

    def _refresh(
        self,
        plan: str | os.PathLike[str] | PlanText | None,
        inbox: str | os.PathLike[str] | None,
        executor: Executor,
        *,
        everything: bool,
        yes: bool,
        dry_run: bool = False,
        report: Callable[[Progress], None] | None = None,
    ) -> Refreshed:
        if self._refreshed:
            raise UsageError("one refresh a run: open another block for the next.")
        self._refreshed = True
        text = plan if plan is None or isinstance(plan, PlanText) else read_plan(Path(plan))
        chosen, changed, taken_up = put_plan_in_force(self._run, text, yes=yes)
        delivered = take_in_folder(self._run, Path(inbox), chosen, yes=yes) if inbox is not None else Delivered()
        done = refresh(self._run, chosen, executor, everything=everything, yes=yes, dry_run=dry_run, report=report)
        return replace(done, delivered=delivered, taken_up=taken_up, plan_changed=changed)

    def finish(self) -> None:
        """Ends the run: writes its row and digests, and lets the draft take the book's place if anything changed."""
        if self._dry:
            return
        self.finished = runs.finish(self._run, migrated=self._draft.migrated)
        self._draft.kept = self.finished is not None
        self._draft.outcome = f"run {self.finished.run_id}" if self.finished else "nothing new"


@contextmanager
def writing(book: str | os.PathLike[str], *, wait: float = 0.0, at: str | datetime | None = None) -> Iterator[Writing]:
    """Opens a book for one run: copy, work, swap.

    Parameters
    ----------
    book : path
        The book's file.
    wait : float
        Seconds to wait for another writer.
    at : text or datetime
        The run's moment, told instead of taken from the clock.

    Raises
    ------
    BookLocked
        Another writer holds the book.
    BookError
        The book cannot be read or written; it is unchanged.
    """
    path = Path(book)
    with rewriting(path, wait) as draft, ExitStack() as stack:
        work = Writing(draft, runs.begin(draft.con, at), stack)
        yield work
        work.finish()


@contextmanager
def _executor(workers: int) -> Iterator[Executor]:
    if workers < 1:
        raise UsageError(f"--workers must be 1 or more, got {workers}.")
    if workers == 1:
        yield functions.InlineExecutor()
        return
    pool = worker_processes(workers)
    try:
        yield pool
    finally:
        pool.shutdown(cancel_futures=True)
