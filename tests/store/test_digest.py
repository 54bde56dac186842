"""The digests against an encoding written row by row from the docstring of driftbook.store.digest."""

import hashlib
import struct
from datetime import UTC, date, datetime

import duckdb
import pyarrow as pa
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from driftbook.estimators import MODELS
from driftbook.store import digest
from driftbook.store.digest import leaves, row_bytes
from driftbook.store.migrate import newest
from driftbook.store.tables import Tracked

EPOCH = datetime(1970, 1, 1)

# What identifies one version of a row, in the order that a digest takes them, by table.
KEYS = {
    "series": ["series_id", "run_from"],
    "setting": ["series_id", "run_from", "planned"],
    "intake": ["intake_id", "run_from"],
    "observation": ["series_id", "observed_at", "run_from", "take"],
    "refused_row": ["intake_id", "line", "cell", "run_from", "reason"],
    "plan": ["run_from", "plan_sha256"],
    "model_revision": ["model", "run_from"],
    "alias": ["name", "run_from", "series_id"],
    "latest": ["series_id", "run_from"],
    **{model: ["series_id", "lookback", "window_end", "run_from"] for model in MODELS},
    "quartic_setting": ["series_id", "lookback", "run_from"],
}
WITHOUT_SERIES = {"intake", "refused_row", "plan", "model_revision"}
NEVER_CLOSED = {"series", "intake", "quartic_setting"}

doubles = st.floats(allow_nan=False, allow_infinity=False)
texts = st.text(st.characters(exclude_categories=["Cs"], exclude_characters="\0"), max_size=12) | st.sampled_from(
    ["", "é", "e\u0301", "日本", "😀", "a" * 300]
)
TYPES = {
    "integer": st.integers(-(2**31), 2**31 - 1),
    "bigint": st.integers(-(2**63), 2**63 - 1),
    "double": doubles,
    "boolean": st.booleans(),
    "varchar": texts,
    "date": st.dates(date(1, 1, 1), date(9999, 12, 31)),
    "timestamp": st.datetimes(datetime(1, 1, 1), datetime(9999, 12, 31)),
    "timestamptz": st.datetimes(datetime(1, 1, 2), datetime(9999, 12, 30), timezones=st.just(UTC)),
}
WIDTHS = {"integer": 4, "bigint": 8, "double": 8, "boolean": 1, "date": 4, "timestamp": 8, "timestamptz": 8}


def encoded_value(sql_type, value):
    if value is None:
        return b"\0" + bytes(4 if sql_type == "varchar" else WIDTHS[sql_type])
    return b"\1" + _encoded_known(sql_type, value)


def _encoded_known(sql_type, value):
    match sql_type:
        case "integer":
            return struct.pack("<i", value)
        case "bigint":
            return struct.pack("<q", value)
        case "double":
            return struct.pack("<d", value)
        case "boolean":
            return b"\1" if value else b"\0"
        case "varchar":
            text = value.encode("utf-8")
            return struct.pack("<I", len(text)) + text
        case "date":
            return struct.pack("<i", (value - date(1970, 1, 1)).days)
    apart = value.replace(tzinfo=None) - EPOCH
    return struct.pack("<q", (apart.days * 86_400 + apart.seconds) * 1_000_000 + apart.microseconds)


def encoded(sql_types, rows):
    return b"".join(encoded_value(kind, value) for row in rows for kind, value in zip(sql_types, row, strict=True))


def leaf_digest(came, went):
    told = struct.pack("<Q", came[0]) + hashlib.sha256(came[1]).digest()
    told += struct.pack("<Q", went[0]) + hashlib.sha256(went[1]).digest()
    return hashlib.sha256(told).hexdigest()


def table_of(con, sql_types, rows):
    columns = ", ".join(f"c{at} {kind}" for at, kind in enumerate(sql_types))
    con.execute(f"create or replace table t ({columns})")
    if rows:
        con.executemany(f"insert into t values ({', '.join('?' * len(sql_types))})", rows)
    return con.sql("from t").to_arrow_table()


@pytest.fixture(scope="module")
def con():
    with duckdb.connect(":memory:") as con:
        con.execute("set TimeZone = 'UTC'")
        yield con


@st.composite
def typed_rows(draw):
    sql_types = draw(st.lists(st.sampled_from(sorted(TYPES)), min_size=1, max_size=6))
    row = st.tuples(*(st.none() | TYPES[kind] for kind in sql_types))
    return sql_types, draw(st.lists(row, max_size=8))


@settings(deadline=None, max_examples=150, derandomize=True)
@given(typed_rows())
def test_the_bytes_of_rows_are_those_that_the_docstring_says(con, typed):
    sql_types, rows = typed
    assert row_bytes(table_of(con, sql_types, rows)) == encoded(sql_types, rows)


@pytest.mark.parametrize("kind", sorted(TYPES))
def test_a_table_without_rows_has_no_bytes(con, kind):
    assert row_bytes(table_of(con, [kind, "varchar"], [])) == b""


def test_a_table_of_nothing_but_null_has_zeros():
    table = pa.table({"word": pa.array([None, None], pa.string()), "number": pa.array([None, None], pa.int32())})
    assert row_bytes(table) == bytes(2 * (1 + 4 + 1 + 4))


def test_null_and_empty_text_differ(con):
    assert row_bytes(table_of(con, ["varchar"], [(None,)])) != row_bytes(table_of(con, ["varchar"], [("",)]))


def test_minus_zero_differs_from_zero(con):
    assert row_bytes(table_of(con, ["double"], [(-0.0,)])) == b"\1" + struct.pack("<d", -0.0)


def test_pieces_and_slices_of_a_table_do_not_show_in_the_bytes(con):
    """Neither how Arrow cuts a table into chunks nor where a slice begins touches its bytes."""
    sql_types = ["integer", "varchar", "boolean", "timestamp"]
    rows = [
        (k, None if k % 5 == 0 else "ab" * (k % 4), None if k % 7 == 0 else k % 2 == 0, datetime(2024, 1, 1 + k % 28))
        for k in range(60)
    ]
    whole = table_of(con, sql_types, rows)
    pieces = pa.concat_tables([whole.slice(0, 7), whole.slice(7, 1), whole.slice(8, 0), whole.slice(8)])
    assert row_bytes(pieces) == encoded(sql_types, rows)
    assert row_bytes(whole.slice(13, 21)) == encoded(sql_types, rows[13:34])


@st.composite
def versions(draw):
    """Rows (series_id, day, word, value, run_from, run_to); series_id, day and run_from are a key."""
    keys = draw(
        st.lists(
            st.tuples(st.integers(1, 3), st.dates(date(2024, 1, 1), date(2024, 1, 9)), st.integers(1, 4)),
            unique=True,
            max_size=14,
        )
    )
    return [
        (series_id, day, draw(st.none() | texts), draw(st.none() | doubles), run_from, run_to)
        for series_id, day, run_from in keys
        for run_to in [draw(st.none() | st.integers(run_from, 5))]
    ]


ROW_TYPES = ["integer", "date", "varchar", "double", "integer"]
KEY_TYPES = ["integer", "date", "integer"]


def expected_leaves(rows, runs, series_of):
    """One leaf for each series and run that has rows that came in or were closed, by plain loops."""
    found = []
    for series_id in sorted({series_of(row) for row in rows}, key=lambda one: -1 if one is None else one):
        mine = sorted((row for row in rows if series_of(row) == series_id), key=lambda row: (row[0], row[1], row[4]))
        for run in range(runs[0], runs[1] + 1):
            came = [row[:5] for row in mine if row[4] == run]
            went = [(row[0], row[1], row[4]) for row in mine if row[5] == run]
            if came or went:
                sha256 = leaf_digest((len(came), encoded(ROW_TYPES, came)), (len(went), encoded(KEY_TYPES, went)))
                found.append((run, series_id, len(came), len(went), sha256))
    return found


@pytest.mark.parametrize("at_once", [1, 4, 1_000_000])
def test_leaves_are_those_of_plain_loops(con, monkeypatch, at_once):
    """For each series and run one leaf over what came in and what was closed, however rows are put into batches."""
    monkeypatch.setattr(digest, "_ROWS_AT_ONCE", at_once)
    con.execute("create schema if not exists base")
    table = Tracked("thing", ("series_id", "day"))

    @settings(deadline=None, max_examples=40, derandomize=True)
    @given(versions(), st.sampled_from([(1, 5), (2, 3), (4, 4)]))
    def check(rows, runs):
        _fill(con, rows)
        found = leaves(con, table, ["series_id", "day", "word", "value", "run_from"], runs, 7)
        told = [(leaf.run_id, leaf.series_id, leaf.rows_in, leaf.rows_closed, leaf.sha256) for leaf in found]
        assert told == expected_leaves(rows, runs, lambda row: row[0])

    check()


@settings(deadline=None, max_examples=40, derandomize=True)
@given(versions())
def test_a_table_without_series_has_one_leaf_a_run(con, rows):
    con.execute("create schema if not exists base")
    _fill(con, rows)
    table = Tracked("thing", ("series_id", "day"), by_series=False)
    found = leaves(con, table, ["series_id", "day", "word", "value", "run_from"], (1, 5), 7)
    told = [(leaf.run_id, leaf.series_id, leaf.rows_in, leaf.rows_closed, leaf.sha256) for leaf in found]
    assert told == expected_leaves(rows, (1, 5), lambda _: None)


def _fill(con, rows):
    con.execute(
        "create or replace table base.thing "
        "(series_id integer, day date, word varchar, value double, run_from integer, run_to integer)"
    )
    if rows:
        con.executemany("insert into base.thing values (?, ?, ?, ?, ?, ?)", rows)


def test_leaves_and_chain_of_a_book_can_be_computed_without_driftbook(filled):
    """Whoever has the file, DuckDB and the docstring gets every leaf and every run's digest again."""
    with duckdb.connect(filled, read_only=True) as plain:
        plain.execute("set TimeZone = 'UTC'")
        expected = sorted(_leaves_of_book(plain), key=str)
        stored = plain.execute("from base.leaf").fetchall()
        assert sorted(stored, key=str) == expected
        before = "0" * 64
        for run_id, stored_digest in plain.execute("select run_id, digest from base.run order by run_id").fetchall():
            before = _digest_of_run(plain, before, run_id)
            assert stored_digest == before


def _typed_columns(con, table, without):
    rows = con.execute(
        "select column_name, data_type from information_schema.columns "
        "where table_schema = 'base' and table_name = ? order by ordinal_position",
        [table],
    ).fetchall()
    words = {"TIMESTAMP WITH TIME ZONE": "timestamptz"}
    return {name: words.get(kind, kind.lower()) for name, kind in rows if name != without}


def _leaves_of_book(con):
    for table, key in KEYS.items():
        columns = _typed_columns(con, table, "run_to")
        for (run_id,) in con.execute("select run_id from base.run").fetchall():
            groups = [None]
            if table not in WITHOUT_SERIES:
                groups = [one for (one,) in con.execute("select series_id from base.series").fetchall()]
            for series_id in groups:
                of_series = "true" if series_id is None else f"series_id = {series_id}"
                order = f"order by {', '.join(key)}"
                sql = f"select {', '.join(columns)} from base.{table} where run_from = {run_id} and {of_series} {order}"
                came = con.execute(sql).fetchall()
                went = []
                if table not in NEVER_CLOSED:
                    sql = f"select {', '.join(key)} from base.{table} where run_to = {run_id} and {of_series} {order}"
                    went = con.execute(sql).fetchall()
                if came or went:
                    sha256 = leaf_digest(
                        (len(came), encoded(list(columns.values()), came)),
                        (len(went), encoded([columns[name] for name in key], went)),
                    )
                    yield run_id, table, series_id, newest(), len(came), len(went), sha256


def _digest_of_run(con, before, run_id):
    columns = _typed_columns(con, "run", "digest")
    row = con.execute(f"select {', '.join(columns)} from base.run where run_id = {run_id}").fetchall()
    leaf_columns = _typed_columns(con, "leaf", None)
    mine = con.execute(f"from base.leaf where run_id = {run_id}").fetchall()
    mine.sort(key=lambda leaf: (leaf[1], -1 if leaf[2] is None else leaf[2]))
    told = before.encode() + encoded(list(columns.values()), row) + encoded(list(leaf_columns.values()), mine)
    return hashlib.sha256(told).hexdigest()
