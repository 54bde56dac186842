"""Settlement: what each row read means for the observations in force."""

from __future__ import annotations

from dataclasses import dataclass

import duckdb

from driftbook.store.errors import IntakeError
from driftbook.store.intake.scratch import as_written
from driftbook.store.series import Stamp
from driftbook.store.sql import query


@dataclass(frozen=True)
class Counts:
    """How the settled rows came out."""

    new: int
    revised: int
    same: int
    refused: int


def settle(con: duckdb.DuckDBPyConnection, source: str, intake_id: int, stamp: Stamp, *, yes: bool) -> Counts:
    """Brings the rows of intake_ordered into the observations; rows it refuses go to intake_refusal."""
    run = {"run_id": stamp.run_id}
    con.execute(query("intake_contested"))
    con.execute(query("intake_in_force"))
    con.execute(query("intake_past"), run)
    con.execute(query("intake_undecided"))
    con.execute(query("intake_middle"))
    con.execute(query("intake_median"))
    con.execute(query("intake_step"))
    if not yes:
        _check_withdrawals(con, source)
    with as_written(con):
        fresh = _number(con, "intake_insert_fresh", {**run, "intake_id": intake_id})
    unchanged = _number(con, "intake_count_unchanged", {})
    con.execute(query("intake_close_replaced"), run)
    con.execute(query("intake_insert_steps"), {**run, "intake_id": intake_id})
    con.execute(query("intake_refuse_steps"))
    new, revised, same, refused = con.execute(query("intake_step_counts")).fetchall()[0]
    return Counts(new + fresh, revised, same + unchanged, refused)


def _number(con: duckdb.DuckDBPyConnection, name: str, values: dict[str, object]) -> int:
    return int(con.execute(query(name), values).fetchall()[0][0])


def _check_withdrawals(con: duckdb.DuckDBPyConnection, source: str) -> None:
    for series, withdrawn, in_force in con.execute(query("intake_withdrawn_share")).fetchall():
        raise IntakeError(
            f"{source} withdraws {withdrawn} of the {in_force} observations of {series!r}, more than a tenth; "
            "say --yes if that is meant."
        )
