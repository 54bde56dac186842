"""The charts in a notebook: what they draw is what the views hold."""

import json
import re
import subprocess
import sys

import pytest
from page_books import small_book

from driftbook import store
from driftbook.store import charts
from driftbook.store.charts.style import Palette
from driftbook.store.page.drawn import drawn, warm_up


@pytest.fixture(scope="module")
def con(tmp_path_factory):
    with store.connect(small_book(tmp_path_factory.mktemp("charts") / "desk.duckdb")) as opened:
        yield opened


def data_of(chart, *names):
    """The rows of all layers that have these columns; the chart is checked against altair's own schema."""
    found = json.loads(chart.to_json())
    return [
        tuple(row[name] for name in names)
        for rows in found["datasets"].values()
        for row in rows
        if set(names) <= row.keys()
    ]


def in_milliseconds(column):
    return f"epoch_ms({column}::timestamp)::bigint"


def test_values_are_the_observations(con):
    sql = f"select {in_milliseconds('observed_at')}, value from observation where series = 'power_da' order by 1"
    assert data_of(charts.values(con, "power_da"), "time", "value") == con.execute(sql).fetchall()


def test_the_window_is_shaded_from_its_first_observation_on(con):
    sql = f"select {in_milliseconds('max(window_start)')} from ou where series = 'power_da'"
    ((opens, _),) = data_of(charts.values(con, "power_da"), "time", "until")
    assert (opens,) == con.execute(sql).fetchone()


def test_a_level_is_a_layer_of_its_own(con):
    named = [layer.get("name") for layer in charts.values(con, "power_da", level=61.5).to_dict()["layer"]]
    assert named.count("level") == 1
    assert "level" not in [layer.get("name") for layer in charts.values(con, "power_da").to_dict()["layer"]]


def test_what_is_said_of_the_last_window_is_what_latest_says(island):
    with store.connect(island / "island.duckdb") as con:
        names = "volatility, volatility_lower, volatility_upper"
        told = con.execute(f"select {names} from latest where series = 'power_da'").fetchone()
        assert data_of(charts.said(con, "power_da"), "value", "lower", "upper")[-1] == pytest.approx(told, rel=1e-12)


def test_an_open_end_runs_to_the_edge_and_nothing_known_breaks_the_band(island, con):
    with store.connect(island / "island.duckdb") as opened:
        sql = "select half_life_days_lower, half_life_days_upper from latest where series = 'diesel'"
        (lower, upper) = opened.execute(sql).fetchone()
        chart = charts.said(opened, "diesel", "half_life")
    (_, edge) = chart.to_dict()["layer"][0]["encoding"]["y"]["scale"]["domain"]
    assert upper is None
    assert data_of(chart, "value", "lower", "upper")[-1] == (None, pytest.approx(lower, rel=1e-12), edge)
    assert data_of(charts.said(con, "power_da"), "value", "lower", "upper")[-1][1:] == (None, None)


def test_a_half_life_is_told_in_days(con):
    (days,) = con.execute("select half_life_days from latest where series = 'power_da'").fetchone()
    shown = data_of(charts.said(con, "power_da", "half_life"), "value", "lower")[-1]
    assert shown[0] == pytest.approx(days, rel=1e-12)


def test_what_was_replaced_is_drawn_beside_what_is_said(con):
    sql = "select count(*) from versions.{} where series = 'power_da' and run_to is not null"
    (model,) = con.execute("select model from latest where series = 'power_da'").fetchone()
    (replaced,) = con.execute(sql.format(model)).fetchone()
    assert replaced > 0
    assert len(data_of(charts.said(con, "power_da"), "run")) == replaced


def test_weights_add_up_in_every_window(con):
    rows = data_of(charts.models(con, "power_da"), "model", "time", "weight")
    ends = {time for _, time, _ in rows}
    (windows,) = con.execute("select count(distinct window_end) from fit where series = 'power_da'").fetchone()
    assert len(ends) == windows
    for end in ends:
        assert sum(weight for _, time, weight in rows if time == end) == pytest.approx(1.0)


def test_a_past_moment_shows_what_was_known_then(con):
    then, now = (
        data_of(charts.values(con, "power_da", as_of=moment), "time", "value") for moment in ("2024-03-01T09:00", None)
    )
    assert [one for one, other in zip(then, now, strict=True) if one != other]
    assert (99.0 in {value for _, value in now}, 99.0 in {value for _, value in then}) == (True, False)


def test_what_cannot_be_drawn_is_said_in_a_sentence(con):
    with pytest.raises(store.UsageError, match="knows no series 'nobody'"):
        charts.values(con, "nobody")
    with pytest.raises(store.UsageError, match="there are volatility, half_life, drift"):
        charts.said(con, "power_da", "mood")
    with pytest.raises(store.UsageError, match="nothing was said of the volatility of 'peg'"):
        charts.said(con, "peg")


def test_charts_are_loaded_only_when_asked_for():
    code = "import sys\nfrom driftbook import store\nassert 'altair' not in sys.modules\nstore.charts.values"
    subprocess.run([sys.executable, "-c", code], check=True)


def test_ink_goes_from_shade_to_ink_whatever_the_colours_are_called():
    plain = Palette(ink="#000000", shade="#ffff00")
    assert [plain.inked(share) for share in (0.0, 0.5, 1.0)] == ["#ffff00", "#808000", "#000000"]
    named = Palette(ink="var(--ink)", shade="var(--shade)")
    assert named.inked(0.25) == "color-mix(in srgb, var(--ink) 25%, var(--shade))"


def test_the_page_draws_in_two_widths_with_names_of_its_own_and_without_the_network(con):
    chart = charts.values(con, "power_da", level=60.0)
    one, other = (drawn(chart, place, 'of "it" & more') for place in ("one", "other"))
    assert re.findall(r'viewBox="0 0 (\d+) ', one.svg) == ["800", "340"]
    names = [re.findall(r'id="([^"]+)"', picture.svg) for picture in (one, other)]
    assert len(set(names[0] + names[1])) == len(names[0] + names[1]) > 0
    assert set(re.findall(r"url\(#([^)]+)\)", one.svg)) <= set(names[0])
    assert one.svg.count('role="img" aria-label="of &#34;it&#34; &amp; more"') == 2
    assert "http" not in one.svg.replace("http://www.w3.org/", "")
    warm_up()
