"""Files that are in the book already, told by their bytes without looking into them: an inbox may keep what it had."""

from __future__ import annotations

from pathlib import Path

import duckdb

from driftbook.store.intake.opening import digest_of_file
from driftbook.store.intake.options import Options
from driftbook.store.intake.outcome import Outcome
from driftbook.store.sql import query


class KnownFiles:
    """The newest intake of every source of a book."""

    def __init__(self, con: duckdb.DuckDBPyConnection) -> None:
        rows = con.execute(query("intake_newest_of_each")).fetchall()
        self._newest = {source: (intake_id, (sha256, options)) for source, intake_id, sha256, options in rows}

    def outcome(self, file: Path, options: Options) -> Outcome | None:
        """What becomes of a file that is known; None for one that `take_in` has to see.

        With `add_series` that is every file, since rows may wait for a name that it then adds.
        """
        if options.add_series or file.name not in self._newest:
            return None
        intake_id, identity = self._newest[file.name]
        if identity[1] != options.identity():
            return None
        try:
            known = digest_of_file(file) == identity[0]
        except OSError:
            return None
        return (
            Outcome(file.name, intake_id, 0, 0, 0, 0, 0, known_already=True, series_added=(), refused=[])
            if known
            else None
        )
