"""The plan file: every key, every mistake named by its key and all at once, and what a changed plan does to a book."""

from datetime import UTC, datetime, timedelta

import duckdb
import polars as pl
import pytest
from made_series import days, wave

from driftbook import store
from driftbook.store.plan import Entry, PlannedIntake, parse_plan, read_plan
from driftbook.store.series import Setting

ADDING = store.Options(add_series=True)
WAITING = store.Options()
MONDAY = datetime(2026, 1, 5, 8, tzinfo=UTC)
FULL = """
name = "desk"
headline_lookback = 250

[[series]]
name = "pellets_fob"
sign = "positive"
unit = "EUR/t"
clock = "trading"
periods_per_year = 260
time_zone = "Europe/Oslo"
same_time = "last"
stale_after_days = 3
also_called = ["PEL FOB"]
in_force = "exp_ou"
shift = 1.5

[[series]]
name = "spark"
clock = "act365"

[[intake]]
files = "power_*.csv"
layout = "wide"
columns = { time = "Day" }
dates = "day-first"
zone = "Europe/Oslo"

[[estimate]]
series = ["pellets_*"]
models = ["gbm", "exp_ou"]
lookbacks = [250, "all"]
every = "week"

[[estimate]]
series = ["spark"]
models = ["ou"]
lookbacks = [60]
"""
SMALL = """
name = "desk"
[[series]]
name = "pellets_fob"
sign = "positive"
[[series]]
name = "spark"
[[estimate]]
series = ["*"]
models = ["ou"]
lookbacks = [20]
"""


def mistakes(text):
    """The lines of the message after its first, which names the file."""
    with pytest.raises(store.PlanError) as raised:
        parse_plan(text, "plan.toml")
    head, *lines = str(raised.value).split("\n")
    count = "a mistake" if len(lines) == 1 else f"{len(lines)} mistakes"
    assert head == f"plan.toml has {count}:"
    return [line.removeprefix("  ") for line in lines]


def test_every_key_of_a_plan_is_read():
    plan = parse_plan(FULL, "plan.toml").plan
    assert (plan.name, plan.headline_lookback) == ("desk", 250)
    first, second = plan.series
    assert first.setting == Setting(
        "positive", "EUR/t", "trading", 260.0, "Europe/Oslo", "last", 3.0, "exp_ou", 1.5, True
    )
    assert first.also_called == ["PEL FOB"]
    assert second.setting == Setting("any", None, "act365", None, "UTC", "refuse", 5.0, "best", 0.0, True)
    assert plan.intake == [
        PlannedIntake(
            files="power_*.csv", layout="wide", columns={"time": "Day"}, dates="day-first", zone="Europe/Oslo"
        )
    ]
    assert plan.entries == [
        Entry("pellets_fob", "gbm", 250, "week"),
        Entry("pellets_fob", "gbm", 0, "week"),
        Entry("pellets_fob", "exp_ou", 250, "week"),
        Entry("pellets_fob", "exp_ou", 0, "week"),
        Entry("spark", "ou", 60, "observation"),
    ]


def test_a_series_needs_only_a_name():
    plan = parse_plan(SMALL.replace('sign = "positive"\n', ""), "plan.toml").plan
    assert plan.series[0].setting == Setting(planned=True)


@pytest.mark.parametrize(("old", "new", "told"), [
    ('name = "desk"', "", "name: field required"),
    ('name = "spark"', 'nme = "spark"', "series[2].nme: no such key; did you mean 'name'?"),
    ('sign = "positive"', 'sgn = "positive"', "series[1].sgn: no such key; did you mean 'sign'?"),
    ('sign = "positive"', 'sign = "plus"', "series[1].sign: input should be 'any' or 'positive' (there is 'plus')"),
    ('sign = "positive"', "unit = 3", "series[1].unit: input should be a valid string (there is 3)"),
    ('sign = "positive"', 'clock = "hours"',
     "series[1].clock: input should be 'trading', 'act365' or 'seconds' (there is 'hours')"),
    ('sign = "positive"', "periods_per_year = 0",
     "series[1].periods_per_year: input should be greater than 0 (there is 0)"),
    ('sign = "positive"', "periods_per_year = nan",
     "series[1].periods_per_year: input should be a finite number (there is nan)"),
    ('sign = "positive"', 'time_zone = "Europe/Olso"',
     "series[1].time_zone: no time zone is called 'Europe/Olso'; did you mean 'Europe/Oslo'?"),
    ('sign = "positive"', 'same_time = "first"',
     "series[1].same_time: input should be 'refuse', 'last' or 'median' (there is 'first')"),
    ('sign = "positive"', "stale_after_days = -1",
     "series[1].stale_after_days: input should be greater than 0 (there is -1)"),
    ('sign = "positive"', 'also_called = "PEL"',
     "series[1].also_called: input should be a valid list (there is 'PEL')"),
    ('sign = "positive"', 'sign = "positive"\nin_force = "exp_uo"',
     "series[1].in_force: no model is called 'exp_uo'; did you mean 'exp_ou'?"),
    ('sign = "positive"', 'in_force = "gbm"', 'series[1]: in_force: gbm is for series with sign = "positive"'),
    ('sign = "positive"', "shift = 2.0", 'series[1]: shift: only models of series with sign = "positive" use it'),
    ('sign = "positive"', 'breaks = "none"',
     "series[1].breaks: this driftbook does not have this key yet; take it out"),
    ('sign = "positive"', 'formula = "power_da - gas_da"',
     "series[1].formula: this driftbook does not have this key yet; take it out"),
    ('name = "spark"', 'name = ""', "series[2].name: '' cannot be a name: The name of the series is empty."),
    ('name = "spark"', 'name = " spark"', "series[2].name: ' spark' cannot be a name: it has space around it."),
    ("lookbacks = [20]", "lookbacks = []",
     "estimate[1].lookbacks: list should have at least 1 item after validation, not 0 (there is [])"),
    ("lookbacks = [20]", "lookbacks = [0]",
     'estimate[1].lookbacks[1]: write a number of steps from 1 to 10000000, or "all"; there is 0'),
    ("lookbacks = [20]", 'lookbacks = [20, "al"]',
     "estimate[1].lookbacks[2]: write a number of steps from 1 to 10000000, or \"all\"; there is 'al'"),
    ("lookbacks = [20]", "lookbacks = [true]",
     'estimate[1].lookbacks[1]: write a number of steps from 1 to 10000000, or "all"; there is True'),
    ("lookbacks = [20]", "lookbacks = [20.5]",
     'estimate[1].lookbacks[1]: write a number of steps from 1 to 10000000, or "all"; there is 20.5'),
    ("lookbacks = [20]", 'lookbacks = [20]\nevery = "hour"',
     "estimate[1].every: input should be 'observation', 'day', 'week' or 'month' (there is 'hour')"),
    ("lookbacks = [20]", "lookbacks = [20]\nhorizons = [1]",
     "estimate[1].horizons: this driftbook does not have this key yet; take it out"),
    ("lookbacks = [20]", 'lookbacks = [20]\nalso = ["horizon"]',
     "estimate[1].also: this driftbook does not have this key yet; take it out"),
    ('models = ["ou"]', 'models = ["uo"]',
     "estimate[1].models[1]: no model is called 'uo'; there are abm, gbm, ou, exp_ou, "
     "cir, ckls, quartic, merton, inertial, ou_noise"),
    ('models = ["ou"]', 'models = ["levy"]',
     "estimate[1].models[1]: no model is called 'levy'; there are abm, gbm, ou, exp_ou, "
     "cir, ckls, quartic, merton, inertial, ou_noise"),
    ('series = ["*"]', 'series = ["pellet_fob", "spark"]',
     "estimate[1].series: no [[series]] is called 'pellet_fob'; did you mean 'pellets_fob'?"),
    ('series = ["*"]', 'series = ["gas_*", "spark"]', "estimate[1].series: no [[series]] is called 'gas_*'"),
    ('name = "spark"', 'name = "spark"\nalso_called = ["pellets_fob"]', "series: 'pellets_fob' stands there twice"),
    ('name = "spark"', 'name = "pellets_fob"', "series: 'pellets_fob' stands there twice"),
    ('name = "desk"', 'name = "desk"\nheadline_lookback = 30', "headline_lookback: no [[estimate]] has lookback 30"),
    ('name = "desk"', 'name = "desk"\nheadline = 30', "headline: no such key; did you mean 'headline_lookback'?"),
    ('name = "desk"', 'name = "desk"\nzzz = 30',
     "zzz: no such key; there are name, headline_lookback, series, intake, estimate"),
    ('name = "desk"', 'name = "desk"\ngroup = []', "group: this driftbook does not have this key yet; take it out"),
    *((
        "lookbacks = [20]", f"lookbacks = [20]\n[[intake]]\nfiles = '{files}'",
        f"intake[1].files: {files!r} leaves the inbox; name files in it, such as power_*.csv",
    ) for files in ("../a.csv", "/etc/passwd", "..", "a/../../b.csv", ".hidden", "..\\a.csv", "C:\\a.csv", "*/a.csv")),
    *((
        "lookbacks = [20]", f'lookbacks = [20]\n[[intake]]\nfiles = "a.csv"\n{keys}', told
    ) for keys, told in (
        ('layout = "wide"\nseries = "spark"', "intake[1]: series: in the wide layout each column is a series of "
         "its own; take it out"),
        ('layout = "wide"\ncolumns = {time = "d", value = "x"}',
         "intake[1]: columns: in the wide layout all columns but the time are series; tell the time alone"),
        ('columns = {vlaue = "x"}',
         "intake[1].columns: 'vlaue' is nothing that a column can hold; did you mean 'value'?"),
        ('dates = "dd/mm/yyyy"',
         "intake[1].dates: 'dd/mm/yyyy' is neither day-first nor month-first nor a strptime form "
         "that holds a year, such as %d.%m.%Y or %y%m%d"),
        ('series = " spark"', "intake[1].series: ' spark' cannot be a name: it has space around it."),
        ('decimal = "."\nzone = "Olso"', "intake[1].zone: no time zone is called 'Olso'"),
    )),
    ("[[estimate]]", "[estimate]", "estimate: write it as [[estimate]], in two brackets"),
])  # fmt: skip
def test_a_mistake_is_named_by_its_key(old, new, told):
    text = SMALL.replace(old, new, 1)
    assert text != SMALL
    assert told in mistakes(text)


def test_five_mistakes_of_every_kind_are_named_at_once():
    """Wrong keys and values do not hide what is wrong between the tables."""
    text = """
name = "desk"
[[series]]
name = "pellets_fob"
sgn = "positive"
[[series]]
name = "spark"
time_zone = "Europe/Olso"
[[series]]
name = "peg"
[[estimate]]
series = ["pellet_fob", "spark", "peg"]
models = ["ou", "gbm"]
lookbacks = [20]
[[estimate]]
series = ["peg"]
models = ["ou"]
lookbacks = [20]
"""
    assert mistakes(text) == [
        "series[1].sgn: no such key; did you mean 'sign'?",
        "series[2].time_zone: no time zone is called 'Europe/Olso'; did you mean 'Europe/Oslo'?",
        "estimate[1].series: no [[series]] is called 'pellet_fob'; did you mean 'pellets_fob'?",
        "estimate[1].models: gbm is for series that stay above zero, and 'peg' has sign = \"any\"; "
        'give it sign = "positive" or leave the model out',
        "estimate: ou on 'peg' with lookback 20 stands there twice",
    ]


def test_no_mistake_is_invented_for_a_series_that_has_a_mistake_itself():
    text = SMALL.replace('sign = "positive"', 'sgn = "positive"').replace('["*"]', '["pellets_fob", "spark"]')
    assert mistakes(text) == ["series[1].sgn: no such key; did you mean 'sign'?"]


def test_two_entries_may_not_name_the_same_series_model_and_lookback():
    text = SMALL + '[[estimate]]\nseries = ["sp*"]\nmodels = ["abm", "ou"]\nlookbacks = [30, 20]\n'
    assert mistakes(text) == ["estimate: ou on 'spark' with lookback 20 stands there twice"]


def test_the_sign_decides_which_models_of_a_glob_apply():
    plan = parse_plan(SMALL.replace('["ou"]', '["abm", "gbm", "ou", "exp_ou"]'), "plan.toml").plan
    found = [(one.series, one.model) for one in plan.entries]
    assert sorted(found) == [
        ("pellets_fob", "abm"), ("pellets_fob", "exp_ou"), ("pellets_fob", "gbm"), ("pellets_fob", "ou"),
        ("spark", "abm"), ("spark", "ou")]  # fmt: skip


@pytest.mark.parametrize(("pattern", "found"), [
    ("*", ["pellets_fob", "power[1]", "Power1"]), ("p*", ["pellets_fob", "power[1]"]), ("?ellets_fob", ["pellets_fob"]),
    ("power[1]", ["power[1]"]), ("Power[0-9]", ["Power1"]), ("*_fob", ["pellets_fob"]),
])  # fmt: skip
def test_globs_tell_cases_apart_and_a_name_in_full_means_itself(pattern, found):
    series = "".join(f'[[series]]\nname = "{name}"\n' for name in ("pellets_fob", "power[1]", "Power1"))
    text = f'name = "desk"\n{series}[[estimate]]\nseries = ["{pattern}"]\nmodels = ["ou"]\nlookbacks = [9]\n'
    assert [one.series for one in parse_plan(text, "plan.toml").plan.entries] == found


@pytest.mark.parametrize(("content", "told"), [
    (b"name = ", "is not TOML: Invalid value (at end of document)."),
    (b'name = "\xff"', "it is not UTF-8 text."),
    (None, "No such file or directory."),
])  # fmt: skip
def test_a_file_that_is_no_plan_is_refused_in_a_sentence(tmp_path, content, told):
    path = tmp_path / "plan.toml"
    if content is not None:
        path.write_bytes(content)
    with pytest.raises(store.PlanError) as raised:
        read_plan(path)
    assert str(path) in str(raised.value)
    assert str(raised.value).endswith(told)


# What a changed plan does to a book.


class Desk:
    """A book with one run a day."""

    def __init__(self, book):
        self.book, self.day = book, 0

    def run(self, text=None, frame=None, options=ADDING, *, yes=False):
        self.day += 1
        with store.writing(self.book, at=MONDAY + timedelta(days=self.day)) as work:
            if frame is not None:
                work.ingest(frame, options, name=f"lot {self.day}")
            plan = None if text is None else parse_plan(text, "the plan")
            return work.refresh(plan, yes=yes)

    def ask(self, sql):
        with duckdb.connect(self.book, read_only=True) as con:
            return con.execute(sql).fetchall()


@pytest.fixture(scope="module")
def _planned(tmp_path_factory):
    path = tmp_path_factory.mktemp("planned") / "desk.duckdb"
    store.create(path)
    frame = pl.concat([days("pellets_fob", wave(60)), days("spark", wave(50, 5.0))])
    Desk(path).run(SMALL, frame)
    return path


@pytest.fixture
def desk(_planned, tmp_path):
    """A book with 40 windows of pellets_fob and 30 of spark."""
    path = tmp_path / "desk.duckdb"
    path.write_bytes(_planned.read_bytes())
    desk = Desk(path)
    desk.day = 1
    return desk


def test_the_same_bytes_change_nothing(desk):
    before = desk.book.read_bytes()
    done = desk.run(SMALL)
    assert (done.windows_due, done.plan_changed) == (0, False)
    assert desk.book.read_bytes() == before


def test_without_a_plan_the_stored_one_is_used(desk):
    done = desk.run(frame=days("spark", [6.0], 50))
    assert (done.windows_due, done.plan_changed) == (1, False)


def test_a_book_without_a_plan_asks_for_one(book):
    with pytest.raises(store.UsageError, match=r"^the book has no plan yet; give one with --plan plan.toml\.$"):
        Desk(book).run()


def test_other_bytes_are_a_new_version_of_the_plan_though_nothing_is_due(desk):
    done = desk.run(SMALL + "# said better\n")
    assert (done.windows_due, done.plan_changed) == (0, True)
    assert desk.ask("select name, text from plan") == [("desk", SMALL + "# said better\n")]
    assert desk.ask("select text from plan_at_run(1)") == [(SMALL,)]


def test_a_plan_of_another_name_is_refused_unless_a_person_says_yes(desk):
    other = SMALL.replace('name = "desk"', 'name = "risk"')
    before = desk.book.read_bytes()
    with pytest.raises(store.PlanError) as raised:
        desk.run(other)
    assert str(raised.value) == (
        "the book's plan is called 'desk' and this one 'risk'; if it shall take its place, say so with --yes."
    )
    assert desk.book.read_bytes() == before
    assert desk.run(other, yes=True).plan_changed
    assert desk.ask("select name from plan") == [("risk",)]


def test_an_entry_taken_out_is_closed_and_kept_for_as_of(desk):
    done = desk.run(SMALL.replace('["*"]', '["pellets_fob"]'))
    assert (done.rows_to_close, done.windows_due) == (30, 0)
    assert desk.ask("select series, count(*) from ou group by all") == [("pellets_fob", 40)]
    assert desk.ask("select series, count(*) from ou_at_run(1) group by all order by all") == [
        ("pellets_fob", 40), ("spark", 30)]  # fmt: skip
    assert store.verify(desk.book).findings == []


def test_a_series_taken_out_of_the_plan_stays_in_the_book_unplanned(desk):
    text = SMALL.replace('[[series]]\nname = "spark"\n', "")
    assert desk.run(text).rows_to_close == 30
    assert desk.ask("select series, planned from series order by all") == [("pellets_fob", True), ("spark", False)]
    assert desk.ask("select count(*) from observation where series = 'spark'") == [(50,)]


def test_closing_more_than_half_of_what_is_in_force_needs_a_yes(desk):
    text = SMALL.replace('["*"]', '["spark"]')
    before = desk.book.read_bytes()
    with pytest.raises(store.UsageError) as raised:
        desk.run(text)
    assert str(raised.value) == (
        "the plan would close 40 of 70 estimates in force, more than half; if it shall, say so with --yes."
    )
    assert desk.book.read_bytes() == before
    assert desk.run(text, yes=True).rows_to_close == 40


def test_closing_just_half_does_not(desk):
    desk.run(frame=days("spark", wave(10, 5.0, 50), 50))  # now 40 windows each
    assert desk.run(SMALL.replace('["*"]', '["spark"]')).rows_to_close == 40


@pytest.mark.parametrize(("old", "new", "due"), [
    ('name = "spark"', 'name = "spark"\nperiods_per_year = 365', 30),
    ('name = "spark"', 'name = "spark"\nclock = "act365"', 30),
    ('name = "spark"', 'name = "spark"\nsign = "positive"', 30),
    ('sign = "positive"', 'sign = "positive"\nshift = 1.0', 40),
    ('sign = "positive"', 'sign = "positive"\nin_force = "ou"', 40),
    ("lookbacks = [20]", "lookbacks = [20, 25]", 35 + 25),
    ("lookbacks = [20]", 'lookbacks = [20, "all"]', 2),
    ('models = ["ou"]', 'models = ["ou", "abm"]', 70),
    ('models = ["ou"]', 'models = ["ou", "gbm"]', 40),
    ("lookbacks = [20]", 'lookbacks = [20]\nevery = "month"', 4),
    ('name = "desk"', 'name = "desk"\nheadline_lookback = 20', 0),
])  # fmt: skip
def test_a_change_makes_exactly_that_due_which_it_concerns(desk, old, new, due):
    """60 days of pellets_fob end on 29 February, 50 of spark on 19 February; windows of 20 steps."""
    done = desk.run(SMALL.replace(old, new))
    assert (done.windows_due, done.rows_to_close) == (due, 0)
    assert desk.run().windows_due == 0


def test_with_every_changed_the_windows_between_are_closed(desk):
    desk.run(SMALL.replace("lookbacks = [20]", 'lookbacks = [20]\nevery = "month"'))
    assert desk.ask("select series, window_end::date::varchar from ou order by all") == [
        ("pellets_fob", "2024-01-31"), ("pellets_fob", "2024-02-29"), ("spark", "2024-01-31"), ("spark", "2024-02-19"),
    ]  # fmt: skip


def test_the_time_zone_cannot_change_once_there_are_observations(desk):
    text = SMALL.replace('name = "spark"', 'name = "spark"\ntime_zone = "Europe/Oslo"')
    with pytest.raises(store.PlanError) as raised:
        desk.run(text)
    assert str(raised.value) == (
        "series 'spark': time_zone cannot change from UTC to Europe/Oslo, since there are observations; leave it and "
        'say zone = "Europe/Oslo" where its files are read, or begin a series of another name: the plan first, its '
        "files second."
    )


def test_the_time_zone_can_change_before_there_are_observations(book):
    desk = Desk(book)
    desk.run(SMALL)
    desk.run(SMALL.replace('name = "spark"', 'name = "spark"\ntime_zone = "Europe/Oslo"'))
    assert desk.ask("select time_zone from series where series = 'spark'") == [("Europe/Oslo",)]


def test_another_name_takes_up_the_rows_that_waited_for_it(desk):
    desk.run(frame=days("SPK", [7.0, 8.0], 50), options=WAITING)
    assert desk.ask("select reason, count(*) from refused_row group by all") == [("unknown_series", 2)]
    done = desk.run(SMALL.replace('name = "spark"', 'name = "spark"\nalso_called = ["SPK"]'))
    assert done.taken_up == 2
    assert desk.ask("select value from observation where series = 'spark' order by observed_at desc limit 2") == [
        (8.0,), (7.0,)]  # fmt: skip
    assert desk.ask("select count(*) from refused_row") == [(0,)]
    desk.run(frame=days("SPK", [9.0], 52), options=WAITING)
    assert desk.ask("select count(*) from observation where series = 'spark'") == [(53,)]


def test_rows_that_waited_need_a_yes_to_withdraw_more_than_a_tenth(desk):
    """A value and its withdrawal wait for a name under which the book already has one value at that time."""
    desk.run(frame=days("SPK", [None, None, None, None, None, None], 1), options=WAITING)
    text = SMALL.replace('name = "spark"', 'name = "spark"\nalso_called = ["SPK"]')
    with pytest.raises(
        store.BookError, match="withdraws 6 of the 50 observations of 'spark', more than a tenth; say --yes"
    ):
        desk.run(text)
    assert desk.run(text, yes=True).taken_up == 6
    assert desk.ask("select count(*) from observation where series = 'spark'") == [(44,)]


def test_another_name_may_not_be_a_series_of_the_book(desk):
    desk.run(frame=days("peg", [1.0]))
    text = SMALL.replace('name = "spark"', 'name = "spark"\nalso_called = ["peg"]')
    with pytest.raises(store.PlanError, match=r"^series 'spark': also_called names 'peg', which is a series of the"):
        desk.run(text)


def test_a_new_series_takes_up_what_waited_for_it(desk):
    desk.run(frame=days("peg", wave(25, 1.0)), options=WAITING)
    done = desk.run(SMALL.replace('[[series]]\nname = "spark"', '[[series]]\nname = "peg"\n[[series]]\nname = "spark"'))
    assert (done.taken_up, done.windows_due) == (25, 5)


def test_a_dry_run_counts_and_changes_nothing(desk):
    before = desk.book.read_bytes()
    with store.writing(desk.book) as work:
        done = work.due(parse_plan(SMALL.replace('["*"]', '["spark"]').replace("[20]", "[20, 30]"), "the plan"))
    assert (done.windows_due, done.rows_to_close) == (20, 40)
    assert work.finished is None
    assert desk.book.read_bytes() == before
