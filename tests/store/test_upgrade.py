"""A book of an older schema: readers are told how, and the next writer upgrades it in its copy."""

import subprocess
import sys
from pathlib import Path

import duckdb
import pytest
from made_series import days, plan_text, wave

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


# driftbook as it was when it had ten migrations and four models
TEN = """
import sys
from pathlib import Path
from types import MappingProxyType
import driftbook.estimators as estimators
from driftbook.estimators import registry
few = MappingProxyType({name: estimators.MODELS[name] for name in ("abm", "gbm", "ou", "exp_ou")})
estimators.MODELS = registry.MODELS = few
from driftbook.store import migrate
ten = migrate.all_migrations()[:10]
migrate.all_migrations = lambda: ten
from driftbook import store
from made_series import days, plan_text, wave
path = Path(sys.argv[1])
store.create(path)
with store.writing(path, at="2026-01-05") as work:
    work.ingest(days("pellets_fob", wave(40)), store.Options(add_series=True), name="first")
    work.refresh(plan_text({"pellets_fob": [25]}, models=tuple(few)))
with store.writing(path, at="2026-01-06") as work:
    work.ingest(days("pellets_fob", [97.0, 99.0], 30), name="second")
    work.refresh()
"""


def test_a_book_of_four_models_goes_on_with_all(tmp_path):
    from driftbook.estimators import MODELS
    from driftbook.store.reproducing import reproduce

    path = tmp_path / "desk.duckdb"
    subprocess.run([sys.executable, "-c", TEN, str(path)], check=True, env={"PYTHONPATH": str(Path(__file__).parent)})
    with duckdb.connect(path, read_only=True) as con:
        assert con.execute("select max(number) from base.migration").fetchall() == [(10,)]
        before = con.execute("from base.ou order by all").fetchall()
        assert len(before) > 15
    with store.writing(path, at="2026-01-07") as work:
        work.ingest(days("pellets_fob", wave(2, first=40), 40), name="third")
        work.refresh(plan_text({"pellets_fob": [25]}, models=tuple(MODELS)))
    assert store.verify(path).findings == []
    for again in reproduce(path, every=True):
        assert again.identical == again.rows > 0
    with duckdb.connect(path, read_only=True) as con:
        assert con.execute("from base.ou where run_from < 3 order by all").fetchall() == before
        there = con.execute("select model, count(*) from fit group by all").fetchall()
        assert dict(there) == dict.fromkeys(MODELS, 17)
        assert con.execute(
            "select count(distinct name) from dictionary where name in ('cir', 'quartic')"
        ).fetchone() == (2,)
