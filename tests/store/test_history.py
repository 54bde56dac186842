"""Random histories against a book that keeps a full copy after every run: every past moment and run is as it was."""

import tempfile
from datetime import UTC, datetime, timedelta
from functools import partial
from pathlib import Path

import duckdb
import polars as pl
import pytest
from hypothesis import settings
from hypothesis import strategies as st
from hypothesis.stateful import RuleBasedStateMachine, initialize, precondition, rule, run_state_machine_as_test
from made_series import FIRST_DAY, days, wave
from naive_book import STORED, NaiveBook, Planned, Row, State, same_numbers

from driftbook import store
from driftbook.store.errors import IntakeError, PlanError
from driftbook.store.swap import create

SERIES = ("pellets_fob", "power_da", "peg")
SOURCES = ("morning.csv", "evening.csv", "late.csv")
LAST_DAY = 30
FIRST_MOMENT = datetime(2025, 1, 1, 8, tzinfo=UTC)

values = st.integers(-30, 30).map(lambda quarter: 100 + quarter / 4)
single_rows = st.lists(
    st.builds(
        Row,
        st.sampled_from(SERIES),
        st.integers(0, LAST_DAY).map(lambda day: FIRST_DAY + timedelta(days=day)),
        values | values | st.none(),
    ),
    min_size=1,
    max_size=6,
)


@st.composite
def stretches(draw):
    """Neighbouring days of one series; now and then all alike."""
    series = draw(st.sampled_from(SERIES))
    first = draw(st.integers(0, LAST_DAY - 8))
    count = draw(st.integers(4, 9))
    said = draw(st.lists(values, min_size=count, max_size=count) | values.map(lambda value: [value] * count))
    return [Row(series, FIRST_DAY + timedelta(days=first + k), value) for k, value in enumerate(said)]


intakes = st.tuples(st.sampled_from(SOURCES), stretches() | stretches() | single_rows, st.booleans())
plans = st.dictionaries(
    st.sampled_from(SERIES),
    st.builds(
        Planned,
        st.sampled_from([252.0, 252.0, 12.0]),
        st.lists(st.sampled_from([5, 6, 8]), min_size=1, max_size=2, unique=True).map(tuple),
    ),
    min_size=1,
)
# None: no refresh; "stored": the book's plan, if there is one
refreshes = st.none() | st.just("stored") | plans
gaps = st.sampled_from([timedelta(microseconds=1), timedelta(minutes=90), timedelta(days=1), timedelta(days=3)])


def frame_of(rows):
    schema = {"series": pl.String, "time": pl.Datetime("us"), "value": pl.Float64}
    return pl.DataFrame([(row.series, row.observed_at, row.value) for row in rows], schema=schema, orient="row")


def text_of(plan):
    """The plan's text; series with other periods stand there with their own."""
    lines = ['name = "desk"']
    for name, planned in plan.items():
        lines += ["[[series]]", f'name = "{name}"', f"periods_per_year = {planned.periods_per_year}"]
        lines += ["[[estimate]]", f'series = ["{name}"]', 'models = ["ou"]', f"lookbacks = {list(planned.lookbacks)}"]
    return "\n".join(lines) + "\n"


class Failure(Exception):
    pass


class History(RuleBasedStateMachine):
    """Runs of all kinds on a book and on the naive one."""

    def __init__(self):
        super().__init__()
        self.folder = tempfile.TemporaryDirectory()
        self.book = Path(self.folder.name) / "desk.duckdb"
        create(self.book)
        self.naive = NaiveBook()
        self.moments = {0: FIRST_MOMENT}
        self.told_all_along = True
        self.failures = 0

    # runs

    @initialize(count=st.integers(4, 12), plan=plans)
    def first_run(self, count, plan):
        """Something to correct and to estimate from the beginning."""
        said = [Row("peg", FIRST_DAY + timedelta(days=2 * k), value) for k, value in enumerate(wave(count))]
        self._work([("history.csv", said, True)], {"peg": Planned(252.0, (5, 8))} | plan, False)

    @rule(what=st.lists(intakes, max_size=2), refreshed=refreshes, everything=st.booleans(), gap=gaps)
    def run(self, what, refreshed, everything, gap):
        """Takes in none, one or two intakes and refreshes or not, as one run with a told moment."""
        self._work(what, refreshed, everything, gap)

    @rule(intake=intakes, refreshed=st.just("stored") | plans, gap=gaps)
    def morning(self, intake, refreshed, gap):
        """What a cron job does every day."""
        self._work([intake], refreshed, False, gap)

    @rule(data=st.data(), said=st.lists(values, min_size=1, max_size=3), gap=gaps)
    def next_days(self, data, said, gap):
        """A series goes on behind its last observation."""
        series = data.draw(st.sampled_from(SERIES))
        last = max((time for name, time in self.naive.now.values if name == series), default=FIRST_DAY)
        rows = [Row(series, last + timedelta(days=1 + k), value) for k, value in enumerate(said)]
        self._work([("next.csv", rows, True)], "stored", False, gap)

    @rule(data=st.data(), count=st.integers(1, 3), gap=gaps)
    def correction(self, data, count, gap):
        """Values in force are corrected or withdrawn, and estimated again."""
        known = sorted(self.naive.now.values) or [("peg", FIRST_DAY)]
        said = [Row(*data.draw(st.sampled_from(known)), data.draw(values | st.none())) for _ in range(count)]
        self._work([("corrections.csv", said, False)], "stored", False, gap)

    @precondition(lambda self: len(self.moments) > 6)
    @rule(intake=intakes, refreshed=refreshes)
    def run_untold(self, intake, refreshed):
        """As `run`, with the machine's clock; no told moment can come later."""
        self.told_all_along = False
        self._work([intake], refreshed, False)

    @rule(data=st.data(), add_series=st.booleans(), gap=gaps)
    def repeat(self, data, add_series, gap):
        """The newest intake of a source comes once more, perhaps now with leave to add series."""
        source = data.draw(st.sampled_from(sorted(self.naive.newest)))
        self._work([(source, self.naive.newest[source][1], add_series)], None, False, gap)

    @precondition(lambda self: self.failures < len(self.moments) // 4)
    @rule(intake=intakes, plan=plans, how=st.sampled_from(["exception", "mistake", "other name", "withdrawals"]))
    def failed_run(self, intake, plan, how):
        """Whatever makes a run fail, the book's bytes stay as they are."""
        self.failures += 1
        before = self.book.read_bytes()
        with pytest.raises((Failure, PlanError, IntakeError)), store.writing(self.book) as work:
            self._fail(work, intake, plan, how)
        assert self.book.read_bytes() == before

    def _fail(self, work, intake, plan, how):
        source, rows, _ = intake
        adding = store.Options(add_series=True, yes=True)
        work.ingest(frame_of(rows), adding, name=source)
        if how == "withdrawals":
            many = [Row("peg", FIRST_DAY + timedelta(days=400 + day), 1.0) for day in range(5)]
            work.ingest(frame_of(many), adding, name="many")
            none = [Row(row.series, row.observed_at, None) for row in many] + [
                Row(series, time, None) for series, time in self.naive.now.values if series == "peg"
            ]
            work.ingest(frame_of(none), store.Options(), name="none")
        if how == "mistake":
            path = self.book.with_name("plan.toml")
            path.write_text(text_of(plan).replace('["ou"]', '["uo"]'))
            work.refresh(path)
        if how == "other name" and self.naive.plan is not None:
            path = self.book.with_name("plan.toml")
            path.write_text(text_of(plan).replace('"desk"', '"other"'))
            work.refresh(path)
        raise Failure

    def _work(self, what, refreshed, everything, gap=timedelta(microseconds=1)):
        run = len(self.moments)
        at = self.moments[run - 1] + gap if self.told_all_along else None
        naive = self.naive.copy()
        with store.writing(self.book, at=at) as work:
            for source, rows, add_series in what:
                options = store.Options(add_series=add_series, yes=True)
                outcome = work.ingest(frame_of(rows), options, name=source)
                counts = naive.ingest(source, rows, run, add_series=add_series)
                assert outcome.known_already == (counts is None)
                if counts is not None:
                    found = outcome.rows_new, outcome.rows_revised, outcome.rows_same, outcome.rows_refused
                    assert found == (counts.new, counts.revised, counts.same, counts.refused)
            if refreshed is not None and (refreshed != "stored" or naive.plan is not None):
                plan = None if refreshed == "stored" else refreshed
                if plan is not None:
                    path = self.book.with_name("plan.toml")
                    path.write_text(text_of(plan))
                work.refresh(path if plan is not None else None, everything=everything, yes=True)
                naive.refresh(plan, run)
        if work.finished is None:
            assert naive.now == self.naive.now
            return
        assert work.finished.run_id == run
        naive.finish(run)
        self.naive = naive
        self.moments[run] = work.finished.moment
        assert at is None or work.finished.moment == at

        self._compare_now()

    # comparisons

    def _compare_now(self):
        """What is in force, and what was at some earlier run, as any DuckDB program sees it."""
        with duckdb.connect(self.book, read_only=True) as con:
            self._compare(con, "observation", "ou", self.naive.now)
            run = len(self.moments) * 5 // 7 - 1
            self._compare(con, f"observation_at_run({run})", f"ou_at_run({run})", self.naive.after[run])

    def teardown(self):
        try:
            self._everything_that_was()
        finally:
            self.folder.cleanup()

    def _everything_that_was(self):
        assert store.verify(self.book).findings == []
        with store.connect(self.book) as con:
            assert con.execute("select run_id, moment from run order by run_id").fetchall() == [
                (run, moment) for run, moment in self.moments.items() if run
            ]
            for run, state in self.naive.after.items():
                self._compare(con, f"observation_at_run({run})", f"ou_at_run({run})", state)
                self._compare_moments(con, run, state)
            self._compare_versions(con)

    def _compare_moments(self, con, run, state):
        """At the run's moment and just before the next run's, each in another form."""
        if run == 0:
            return
        forms = _forms(self.moments[run])
        self._compare_as_of(con, forms[run % len(forms)], state)
        if run + 1 in self.moments:
            forms = _forms(self.moments[run + 1] - timedelta(microseconds=1))
            self._compare_as_of(con, forms[run % len(forms)], state)
        day = self.moments[run].date()
        last_of_day = max(other for other, moment in self.moments.items() if other and moment.date() <= day)
        literal = f"date '{day}'" if run % 2 else f"'{day}'"
        self._compare_as_of(con, literal, self.naive.after[last_of_day])

    def _compare_as_of(self, con, literal, state):
        self._compare(con, f"observation_as_of({literal})", f"ou_as_of({literal})", state)

    def _compare_versions(self, con):
        """The versions, sorted out by hand, are the states after every run; their moments are those of the runs."""
        observed = con.execute("from versions.observation").fetchall()
        estimated = con.execute(
            f"select {OU}, run_from, run_to, in_force_from, in_force_to from versions.ou"
        ).fetchall()
        for row in [*observed, *estimated]:
            run_from, run_to, in_force_from, in_force_to = row[-4:]
            assert in_force_from == self.moments[run_from]
            assert in_force_to == (None if run_to is None else self.moments[run_to])
        for run, state in self.naive.after.items():
            values = {(row[0], row[1]): (row[2], row[-4]) for row in observed if _in_force(row, run)}
            assert values == state.values
            _compare_estimates([(*row[:-4], row[-4]) for row in estimated if _in_force(row, run)], state)

    def _compare(self, con, observation, ou, state: State):
        rows = con.execute(f"select series, observed_at, value, run_id from {observation}").fetchall()
        assert {(series, time): (value, run) for series, time, value, run in rows} == state.values
        assert len(rows) == len(state.values)
        _compare_estimates(con.execute(f"select {OU}, run_id from {ou}").fetchall(), state)


OU = f"series, lookback, window_end, window_start, n, status, {', '.join(STORED)}"


def _forms(moment):
    """One moment as text, as text with a zone, as TIMESTAMP and as TIMESTAMPTZ."""
    plain = moment.replace(tzinfo=None).isoformat(" ", "microseconds")
    tokyo = (moment + timedelta(hours=9)).replace(tzinfo=None).isoformat("T", "microseconds") + "+09:00"
    return [f"'{plain}'", f"'{tokyo}'", f"timestamp '{plain}'", f"timestamptz '{plain}+00'"]


def _in_force(row, run):
    run_from, run_to = row[-4], row[-3]
    return run_from <= run and (run_to is None or run_to > run)


def _compare_estimates(rows, state):
    found = {row[:3]: row[3:] for row in rows}
    assert len(found) == len(rows)
    expected = {
        key: (one.window_start, one.n, one.status, one.run_id, one.numbers) for key, one in state.estimates.items()
    }
    told = {key: (*row[:3], row[-1], row[3:-1]) for key, row in found.items()}
    assert {key: row[:4] for key, row in told.items()} == {key: row[:4] for key, row in expected.items()}
    for key, row in told.items():
        assert same_numbers(expected[key][4], row[4]), (key, expected[key][4], row[4])


TestHistory = History.TestCase
TestHistory.settings = settings(
    max_examples=6, stateful_step_count=14, deadline=None, derandomize=True, database=None, print_blob=False
)


@pytest.mark.soak
def test_long_histories():
    """The same with more and longer histories; hypothesis draws them from the fixed seed of `derandomize`."""
    longer = settings(TestHistory.settings, max_examples=150, stateful_step_count=40)
    run_state_machine_as_test(History, settings=longer)


# single promises

ZONES = ["UTC", "Asia/Tokyo", "America/St_Johns"]
NOON = "2025-03-04 12:00:00"
BEFORE_NOON = [
    "'2025-03-04 11:59:59.999999'",
    "timestamp '2025-03-04 11:59:59.999999'",
    "timestamptz '2025-03-04 20:59:59.999999+09'",
    "'2025-03-04T13:59:59+02:00'",
    "'2025-03-04T11:59Z'",
    "' 2025-03-03 '",
    "date '2025-03-03'",
    "timestamp '2025-03-04 00:00:00'",
    "timestamptz '2025-03-04 00:00:00+00'",
    "'2025-03-04 00:00'",
]
FROM_NOON = [
    f"'{NOON}'",
    f"timestamp '{NOON}'",
    f"timestamptz '{NOON}+00'",
    "'2025-03-04T21:00+09:00'",
    "'2025-03-04 08:30:00-03:30'",
    "'2025-03-04 12:00:00+00'",
    "'2025-03-04'",
    "date '2025-03-04'",
    "timestamptz '2025-03-04 21:00:00+09'",
]


@pytest.fixture(scope="module")
def two_days(tmp_path_factory):
    """One observation known from the morning of the 3rd, corrected at noon of the 4th."""
    book = tmp_path_factory.mktemp("as_of") / "desk.duckdb"
    create(book)
    for at, value in (("2025-03-03T08:00", 1.0), (NOON, 2.0)):
        with store.writing(book, at=at) as work:
            work.ingest(days("peg", [value]), store.Options(add_series=True), name="file")
    return book


def known_at(con, literal):
    return con.execute(f"select value from observation_as_of({literal})").fetchall()


@pytest.mark.parametrize("zone", ZONES)
@pytest.mark.parametrize("reader", [store.connect, partial(duckdb.connect, read_only=True)])
def test_a_moment_is_understood_in_every_form_whatever_the_sessions_zone(two_days, reader, zone):
    """Without a zone it is UTC, and a bare date is the end of that UTC day."""
    with reader(two_days) as con:
        con.execute(f"set TimeZone = '{zone}'")
        assert {literal: known_at(con, literal) for literal in BEFORE_NOON} == {key: [(1.0,)] for key in BEFORE_NOON}
        assert {literal: known_at(con, literal) for literal in FROM_NOON} == {key: [(2.0,)] for key in FROM_NOON}
        assert known_at(con, "'2025-03-02'") == []
        assert known_at(con, "'2025-03-03 07:59:59.999999'") == []


def test_the_moment_of_a_macro_may_come_from_a_column_or_a_parameter(two_days):
    with store.connect(two_days) as con:
        moment = datetime(2025, 3, 4, 11, tzinfo=UTC)
        assert con.execute("select value from observation_as_of(?)", [moment]).fetchall() == [(1.0,)]
        assert con.execute("select value from observation_as_of(?)", [moment.date()]).fetchall() == [(2.0,)]
        assert con.execute("select value from observation_as_of((select min(moment) from run))").fetchall() == [(1.0,)]


def test_rows_that_waited_for_a_name_are_taken_up_in_the_order_in_which_they_came(book):
    """The later intake has the last word, also over one that made the name known itself."""
    for value in (1.0, 2.0):
        with store.writing(book) as work:
            work.ingest(days("peg", [value]), name=f"file {value}")
    with store.writing(book) as work:
        work.ingest(days("peg", [3.0], 1), store.Options(add_series=True), name="third")
    with store.connect(book) as con:
        assert con.execute("select value, intake_id, run_id from observation order by observed_at").fetchall() == [
            (2.0, 2, 3),
            (3.0, 3, 3),
        ]
        assert con.execute(
            "select value, run_from, run_to from versions.observation where intake_id = 1"
        ).fetchall() == [(1.0, 3, 3)]
        assert con.execute("select count(*) from refused_row").fetchall() == [(0,)]
        assert con.execute("select count(*) from refused_row_at_run(2)").fetchall() == [(2,)]
