"""Formats beside plain CSV and Parquet: gzip, JSON lines, Arrow, frames of other makes, standard input."""

import gzip
import io
import os
import re
import subprocess
import sys
import threading
from contextlib import closing
from datetime import UTC, date, datetime
from pathlib import Path

import pandas as pd
import polars as pl
import pyarrow as pa
import pyarrow.parquet as pq
import pytest
from naive_intake import empty_book

from driftbook import store
from driftbook.store import intake
from driftbook.store.errors import IntakeError, UsageError
from driftbook.store.intake import landing
from driftbook.store.series import Setting, Stamp, add_series

STAMP = Stamp(1, datetime(2026, 1, 1, tzinfo=UTC))
FRAME = pl.DataFrame(
    {"series": ["gas", "oil"], "time": [datetime(2024, 1, 1), datetime(2024, 1, 2, 12)], "value": [1.5, 2.0]}
)
EXPECTED = [("gas", datetime(2024, 1, 1), 1.5), ("oil", datetime(2024, 1, 2, 12), 2.0)]


@pytest.fixture
def con():
    with closing(empty_book()) as con:
        add_series(con, {"gas": Setting(), "oil": Setting()}, STAMP)
        yield con


@pytest.fixture
def take(con, tmp_path):
    """Takes in the bytes of a file, or a frame."""

    def take(source, name="delivery", **options):
        if isinstance(source, bytes | str):
            path = tmp_path / name
            path.write_bytes(source if isinstance(source, bytes) else source.encode())
            source = path
        return intake.take_in(con, source, intake.Options(**options), STAMP)

    return take


def observations(con):
    return con.execute(
        "select series, observed_at, value from base.observation join base.series using (series_id) order by all"
    ).fetchall()


def written(how):
    target = io.BytesIO()
    getattr(FRAME, how)(target)
    return target.getvalue()


CSV = FRAME.write_csv().encode()


@pytest.mark.parametrize(
    "data",
    [
        CSV,
        CSV.decode().encode("utf-16"),
        FRAME.write_ndjson().encode(),
        b"\xef\xbb\xbf\n" + FRAME.write_ndjson().encode(),
        written("write_parquet"),
        written("write_ipc"),
        written("write_ipc_stream"),
    ],
    ids=["csv", "utf-16", "json lines", "json lines with mark", "parquet", "arrow file", "arrow stream"],
)
@pytest.mark.parametrize("packed", [False, True], ids=["plain", "gzip"])
def test_every_format_gives_the_same_packed_or_not_and_is_told_by_its_bytes(take, con, data, packed):
    assert take(gzip.compress(data) if packed else data).rows_new == 2
    assert observations(con) == EXPECTED


def test_files_packed_one_after_another_are_one(take):
    assert take(gzip.compress(CSV) + gzip.compress(b"gas,2024-01-03,1\n")).rows_new == 3


def test_a_known_file_is_known_by_its_packed_bytes(take):
    take(gzip.compress(CSV, mtime=1))
    assert take(gzip.compress(CSV, mtime=1)).known_already
    assert not take(gzip.compress(CSV, mtime=2)).known_already


def test_a_truncated_or_broken_gzip_file_is_named_and_nothing_is_taken(take, con):
    packed = gzip.compress(CSV * 50)
    for broken in (packed[:-5], packed[:30], packed[:12] + b"\xff" * 20 + packed[32:], packed + b"more"):
        with pytest.raises(IntakeError, match=r"^delivery.csv.gz is a broken gzip file: .* Get it again\.$"):
            take(broken, "delivery.csv.gz")
    assert observations(con) == []


def test_a_compression_bomb_is_refused_before_it_fills_the_disk(take, monkeypatch):
    packed = gzip.compress(CSV + b"\n" * 20_000_000)
    assert len(packed) * 900 < 20_000_000
    assert take(packed).rows_new == 2, "what stays under a GiB is no bomb"
    monkeypatch.setattr(landing, "_ALWAYS_ALLOWED", 1 << 20)
    with pytest.raises(IntakeError, match=r"unpacks to more than 200 times its size.*take in the plain file"):
        take(packed, "bomb")


RESIDENT = """
import resource, sys
from pathlib import Path
from contextlib import closing
sys.path.append(sys.argv[1])
from datetime import UTC, datetime
from naive_intake import empty_book
from driftbook.store import intake
from driftbook.store.errors import IntakeError
from driftbook.store.intake import landing
from driftbook.store.series import Stamp
landing._ALWAYS_ALLOWED = int(sys.argv[2])
most = lambda: resource.getrusage(resource.RUSAGE_SELF).ru_maxrss >> 10
with closing(empty_book()) as con:
    for path in map(Path, sys.argv[3:]):
        before = most()
        try:
            print(intake.take_in(con, path, intake.Options(), Stamp(1, datetime(2026, 1, 1, tzinfo=UTC))))
        except IntakeError as error:
            print(most() - before, error)
"""


def bombs(folder, mebibytes):
    """Small files that would unpack to so much, two of them to nothing but many rows."""
    with gzip.open(folder / "bomb.csv.gz", "wb", compresslevel=6) as file:
        file.write(CSV)
        for _ in range(mebibytes):
            file.write(b"\n" * (1 << 20))
    columns = ("series", "time", "value")
    rows = (mebibytes << 20) // 8 // len(columns)
    many = pa.table({name: pa.nulls(1_000_000, pa.float64()) for name in columns})
    with pq.ParquetWriter(folder / "bomb.parquet", many.schema) as writer:
        for _ in range(rows // 1_000_000 + 1):
            writer.write_table(many)
    nothing = pa.table({name: pa.nulls(rows) for name in columns})
    with pa.ipc.new_stream(folder / "bomb.arrow", nothing.schema) as writer:
        writer.write_table(nothing)
    return [folder / name for name in ("bomb.csv.gz", "bomb.parquet", "bomb.arrow")]


@pytest.mark.parametrize("allowed", [64, pytest.param(1024, marks=pytest.mark.soak)])
def test_a_bomb_is_refused_in_a_sentence_and_takes_no_memory(tmp_path, allowed):
    """Memory is the most that the process ever held, in MiB beyond the file before; 1024 MiB is what users have."""
    files = bombs(tmp_path, 3 * allowed // 2)
    assert all(path.stat().st_size * 200 < allowed << 20 for path in files)
    done = subprocess.run(
        [sys.executable, "-c", RESIDENT, Path(__file__).parent, str(allowed << 20), *files],
        capture_output=True, text=True, check=True,
    )  # fmt: skip
    lines = done.stdout.splitlines()
    assert [re.sub(r"^\d+ ", "", line).partition(" unpacks to more than 200 times its size")[0] for line in lines] == [
        path.name for path in files
    ]
    assert max(int(line.split()[0]) for line in lines) < 48


@pytest.fixture
def room(tmp_path, monkeypatch):
    """A folder for temporary files, to see what is left of them."""
    folder = tmp_path / "room"
    folder.mkdir()
    monkeypatch.setattr("tempfile.tempdir", str(folder))
    return folder


def test_unpacked_files_never_have_a_name(take, room, monkeypatch):
    seen = []
    check_growth = landing.check_growth
    monkeypatch.setattr(landing, "check_growth", lambda *told: (seen.append(list(room.iterdir())), check_growth(*told)))
    take(gzip.compress(CSV.decode().encode("utf-16")))
    with pytest.raises(IntakeError):
        take(gzip.compress(CSV)[:-3])
    assert seen
    assert not any(seen)
    assert list(room.iterdir()) == []


@pytest.mark.parametrize("packed", [False, True], ids=["plain", "gzip"])
def test_standard_input_is_a_source_like_any_other(con, monkeypatch, packed):
    data = gzip.compress(CSV) if packed else CSV
    for known in (False, True):
        monkeypatch.setattr(sys, "stdin", io.TextIOWrapper(io.BytesIO(data)))
        outcome = intake.take_in(con, "-", intake.Options(), STAMP)
        assert (outcome.source, outcome.known_already) == ("-", known)
    assert observations(con) == EXPECTED


def test_a_pipe_is_read_once_and_to_its_end(con, tmp_path):
    pipe = tmp_path / "pipe"
    os.mkfifo(pipe)
    writer = threading.Thread(target=pipe.write_bytes, args=(CSV,))
    writer.start()
    assert intake.take_in(con, pipe, intake.Options(), STAMP).rows_new == 2
    writer.join()


def test_json_lines_are_objects_whose_keys_may_differ(take, con):
    data = """
{"time": "2024-01-01", "series": "gas", "value": 1.5}

{"series": "gas", "time": "2024-01-02", "value": "2", "volume": 7, "note": {"by": ["me"]}}
{"series": "gas", "time": "2024-01-09"}
"""
    outcome = take(data)
    assert [(row.line, row.reason) for row in outcome.refused] == [(5, "no_value")]
    assert take('{"series": "gas", "value": null, "time": "2024-01-01"}', yes=True).rows_revised == 1
    found = con.execute("select day(observed_at), value, volume, run_to from base.observation order by all").fetchall()
    assert found == [(1, 1.5, None, 1), (2, 2.0, 7.0, None)]


@pytest.mark.parametrize(
    ("line", "reason"),
    [
        ("{", "bad_json"),
        ("[1, 2]", "bad_json"),
        ("null", "bad_json"),
        ('{"series": "gas"} {}', "bad_json"),
        ('{"series": "gas", "series": "oil", "time": "2024-01-02", "value": 1}', "bad_json"),
        ('{"series": "gas", "time": "2024-01-02", "value": 1, "time": "2024-01-03"}', "bad_json"),
        ("gas,2024-01-02,1", "bad_json"),
        (b'{"series": "g\xe4s", "time": "2024-01-02", "value": 1}', "not_utf8"),
        ('{"series": "g\\u0000s", "time": "2024-01-02", "value": 1}', "bad_name"),
        ('{"series": null, "time": "2024-01-02", "value": 1}', "no_series"),
        ('{"series": "gas", "time": 1704067200, "value": 1}', "bad_time"),
        ('{"series": "gas", "time": "2024-01-02", "value": NaN}', "not_finite"),
        ('{"series": "gas", "time": "2024-01-02", "value": 1e999}', "not_finite"),
        ('{"series": "gas", "time": "2024-01-02", "value": true}', "not_a_number"),
        ('{"series": "gas", "time": "2024-01-02", "value": [1]}', "not_a_number"),
        ('{"series": "gas", "time": "2024-01-02", "value": "1,5"}', "not_a_number"),
    ],
)
def test_a_bad_object_costs_one_line(take, line, reason):
    line = line if isinstance(line, bytes) else line.encode()
    outcome = take(b'{"series": "gas", "time": "2024-01-01", "value": 1}\n' + line + b"\n")
    assert [(row.line, row.reason) for row in outcome.refused] == [(2, reason)]
    assert outcome.rows_new == 1


def test_keys_are_data(take, con):
    data = '{"time": "2024-01-01", "a/b~c\'d\\"": 1, "{lines}": 2, "": 3}\n'
    outcome = take(data, layout="wide", add_series=True)
    assert outcome.series_added == ("a/b~c'd\"", "{lines}")
    assert [row.reason for row in outcome.refused] == ["no_series"]


@pytest.mark.parametrize("layout", ["long", "wide"])
def test_a_number_by_its_type_has_a_point_whatever_mark_texts_have(take, con, layout, tmp_path):
    one = {"time": ["2024-01-01"], "gas": [1.5]}
    if layout == "long":
        one = {"time": ["2024-01-01"], "series": ["gas"], "value": [1.5]}
    frame = pl.DataFrame(one)
    assert take(frame.write_ndjson(), layout=layout, decimal=",").rows_new == 1
    assert take(frame.write_ndjson().replace("1.5", '"1,5"'), layout=layout, decimal=",").rows_same == 1
    assert take(frame, layout=layout, decimal=",").rows_same == 1
    assert take(frame.cast(pl.String), layout=layout, decimal=",").rows_refused == 1


@pytest.mark.parametrize("how", ["write_ipc", "write_ipc_stream"])
def test_a_damaged_arrow_file_is_named(take, con, how):
    whole = written(how)
    for damaged in (whole[:-30], whole[:100], whole[:8] + b"\xff" * (len(whole) - 16) + whole[-8:]):
        with pytest.raises(IntakeError, match=r"^delivery (cannot be read: |is a broken Arrow file: )[^\n]*\.$"):
            take(damaged)
    assert observations(con) == []


def test_an_arrow_file_without_columns_is_named(take):
    sink = io.BytesIO()
    with pa.ipc.new_stream(sink, pa.schema([])):
        pass
    with pytest.raises(IntakeError, match=r"^delivery cannot be read: .*at least one column"):
        take(sink.getvalue())


def test_arrow_times_with_a_zone_and_dictionaries_are_read(take, con):
    table = pa.table(
        {
            "series": pa.array(["gas", "oil"]).dictionary_encode(),
            "time": pa.array([datetime(2024, 1, 1), datetime(2024, 1, 2, 12)], pa.timestamp("ns", "Asia/Tokyo")),
            "value": pa.array(["1.5", "2"], pa.large_string()),
        }
    )
    sink = io.BytesIO()
    with pa.ipc.new_file(sink, table.schema) as writer:
        for batch in table.to_batches(max_chunksize=1):
            writer.write(batch)
    assert take(sink.getvalue()).rows_new == 2
    assert take(table).rows_same == 2
    assert observations(con) == EXPECTED


@pytest.mark.parametrize(
    "frame",
    [
        FRAME.to_pandas(),
        FRAME.to_pandas().set_index("time"),
        FRAME.to_pandas().set_index(["series", "time"]),
        FRAME.to_arrow(),
        FRAME.to_arrow().to_batches()[0],
        FRAME.to_arrow().to_reader(),
    ],
    ids=["pandas", "index of times", "two indexes", "table", "batch", "reader"],
)
def test_frames_of_other_makes_are_read(take, con, frame):
    assert take(frame).rows_new == 2
    assert observations(con) == EXPECTED


def test_a_book_under_change_takes_frames_of_any_make_and_paths(book, tmp_path):
    path = tmp_path / "delivery.csv"
    FRAME.write_csv(path)
    options = intake.Options(add_series=True)
    with store.writing(book) as work:
        found = [work.ingest(source, options) for source in (FRAME.to_pandas(), path, FRAME.to_arrow(), str(path))]
        with pytest.raises(UsageError, match="neither a path nor"):
            work.ingest([1, 2])
    assert [(one.rows_new, one.rows_same, one.known_already) for one in found] == [
        (2, 0, False), (0, 2, False), (0, 0, True), (0, 0, True),
    ]  # fmt: skip


def test_anything_that_hands_itself_over_as_an_arrow_stream_is_a_frame(take, con):
    class Foreign:
        def __arrow_c_stream__(self, requested_schema=None):
            return FRAME.to_arrow().__arrow_c_stream__(requested_schema)

    assert take(Foreign()).rows_new == 2
    assert observations(con) == EXPECTED


def test_nan_in_pandas_is_an_empty_value_and_elsewhere_no_number(take):
    rows = {"series": ["gas"], "time": [date(2024, 1, 1)], "value": [float("nan")]}
    assert [row.reason for row in take(pd.DataFrame(rows)).refused] == ["no_value"]
    assert [row.reason for row in take(pl.DataFrame(rows)).refused] == ["not_finite"]


@pytest.mark.parametrize("thing", [[1, 2], 5, None, pl.LazyFrame(), pd.Series([1.0])])
def test_what_is_no_table_is_refused(take, thing):
    with pytest.raises(UsageError, match=r"neither a path nor|single column"):
        take(thing)


def test_a_frame_that_cannot_be_read_says_so(take):
    with pytest.raises(IntakeError, match="frame cannot be read as a table"):
        take(pd.DataFrame({"series": ["gas", 1], "time": [1, 2], "value": [1, 2]}))
    with pytest.raises(IntakeError, match="frame has no columns"):
        take(pl.DataFrame())
