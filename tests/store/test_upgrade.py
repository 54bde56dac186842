"""A book of an older schema: readers are told how, and the next writer upgrades it in its copy."""

import duckdb
import pytest
from made_series import days, wave

from driftbook import store
from driftbook.store import migrate
from driftbook.store.errors import BookError


@pytest.fixture
def older(tmp_path):
    """A book that has the first five migrations only."""
    path = tmp_path / "desk.duckdb"
    with duckdb.connect(path, config={"storage_compatibility_version": "v1.2.0"}) as con:
        for migration in migrate.all_migrations()[:5]:
            migrate.apply(con, migration)
    return path


def test_readers_are_told_how_it_is_upgraded(older):
    with pytest.raises(BookError, match=r"has schema 5 and this driftbook reads .* run `driftbook refresh"):
        store.connect(older)


def test_the_next_writer_upgrades_it_in_a_run_of_its_own(older):
    before = older.read_bytes()
    with pytest.raises(RuntimeError, match="stop"), store.writing(older):
        raise RuntimeError("stop")
    assert older.read_bytes() == before
    with store.writing(older) as work:
        work.ingest(days("pellets_fob", wave(3)), store.Options(add_series=True), name="first")
    with duckdb.connect(older, read_only=True) as con:
        assert con.execute("select max(number) from base.migration").fetchall() == [(migrate.newest(),)]
        assert con.execute("select migration from base.run").fetchall() == [(migrate.newest(),)]
    assert store.verify(older).findings == []


def test_an_upgrade_alone_is_a_run(older):
    with store.writing(older) as work:
        pass
    assert work.finished is not None
    assert store.verify(older).findings == []
