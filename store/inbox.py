"""The inbox: a folder whose files are taken in, in the order of their names, as the plan's `[[intake]]` says."""

from __future__ import annotations

from dataclasses import dataclass
from fnmatch import fnmatchcase
from pathlib import Path

from driftbook.store import intake
from driftbook.store.errors import IntakeError, UsageError
from driftbook.store.plan import Plan
from driftbook.store.runs import Run

_UNFINISHED = (".tmp", ".part")


@dataclass(frozen=True)
class Delivered:
    """What an inbox brought: what became of each file that was read, and why others were left for the next run."""

    outcomes: tuple[intake.Outcome, ...] = ()
    left: tuple[str, ...] = ()

    @property
    def rows_refused(self) -> int:
        """The rows that were not taken, over all files."""
        return sum(outcome.rows_refused for outcome in self.outcomes)


def take_in_folder(run: Run, folder: Path, plan: Plan, *, yes: bool) -> Delivered:
    """Takes in the files of a folder; one that cannot be read is named and left, the others are taken."""
    if not folder.is_dir():
        raise UsageError(f"there is no folder {folder} to take files from.")
    outcomes, left = [], []
    known = intake.KnownFiles(run.con)
    for file in _files(folder):
        options = _options(file.name, plan, yes=yes)
        if (outcome := known.outcome(file, options)) is not None:
            outcomes.append(outcome)
            continue
        run.con.begin()
        try:
            outcomes.append(intake.take_in(run.con, file, options, run.stamp))
            run.con.commit()
        except IntakeError as error:
            run.con.rollback()
            left.append(str(error) if str(error).startswith(file.name) else f"{file.name}: {error}")
    return Delivered(tuple(outcomes), tuple(left))


def _files(folder: Path) -> list[Path]:
    try:
        found = sorted(folder.iterdir())
    except OSError as problem:
        raise UsageError(f"the folder {folder} cannot be read: {problem.strerror}.") from problem
    return [
        path for path in found if path.is_file() and not path.name.startswith(".") and path.suffix not in _UNFINISHED
    ]


def _options(name: str, plan: Plan, *, yes: bool) -> intake.Options:
    """The options of the first `[[intake]]` whose pattern the file's name matches; its keys are their names."""
    for planned in plan.intake:
        if fnmatchcase(name, planned.files):
            return intake.Options(**planned.model_dump(exclude={"files"}), yes=yes)
    return intake.Options(yes=yes)
