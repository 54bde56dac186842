"""The page as a program sees it: addresses, headers, moments, data, and how it follows the book."""

import csv
import io
import time
from html.parser import HTMLParser
from pathlib import Path

import duckdb
import httpx2
import numpy as np
import pytest
from page_books import HOSTILE, correct, small_book
from starlette.testclient import TestClient

from driftbook import store
from driftbook.estimators import MODELS
from driftbook.store import words
from driftbook.store.charts.scale import in_decades
from driftbook.store.cli.app import run as run_command
from driftbook.store.page import create_app
from driftbook.store.page.csv_text import csv_text
from driftbook.store.page.guard import HEADERS
from driftbook.store.page.small_year import small_years
from driftbook.store.page.whiskers import whisker
from driftbook.store.page.why import _named

ADDRESSES = ["/", "/series?name=power_da", "/newest.json", "/csv/latest.csv", "/static/page.css", "/no"]
MEGABYTE = 1_000_000


def client_of(book):
    return TestClient(create_app(book), base_url="http://127.0.0.1", follow_redirects=False)


@pytest.fixture(scope="module")
def small(tmp_path_factory):
    return small_book(tmp_path_factory.mktemp("small") / "desk.duckdb")


@pytest.fixture(scope="module")
def client(small):
    return client_of(small)


class _Words(HTMLParser):
    """The text of a page, and its tags with their attributes."""

    def __init__(self, text):
        super().__init__()
        self.text, self.tags = "", []
        self.feed(text)

    def handle_starttag(self, tag, attrs):
        self.tags.append((tag, dict(attrs)))

    def handle_data(self, data):
        self.text += data


def words_of(answer):
    return " ".join(_Words(answer.text).text.split())


def rows_of(answer):
    return list(csv.reader(io.StringIO(answer.text)))


@pytest.mark.parametrize("address", ADDRESSES)
def test_every_answer_carries_the_headers_that_keep_the_browser_strict(client, address):
    answer = client.get(address)
    assert {name: answer.headers[name] for name in HEADERS} == HEADERS
    assert "default-src 'self'" in HEADERS["content-security-policy"]
    assert "unsafe" not in HEADERS["content-security-policy"]


@pytest.mark.parametrize("address", ADDRESSES)
@pytest.mark.parametrize("method", ["POST", "PUT", "DELETE", "PATCH", "OPTIONS"])
def test_the_page_only_reads(client, address, method):
    answer = client.request(method, address)
    assert (answer.status_code, answer.headers["allow"]) == (405, "GET, HEAD")


def test_head_is_get_without_a_body(client):
    answer = client.head("/")
    assert (answer.status_code, answer.content) == (200, b"")


@pytest.mark.parametrize("host", ["desk.example", "127.0.0.1.desk.example", "desk.example:8710", ""])
def test_a_name_that_is_not_this_machine_is_refused(client, host):
    assert client.get("/", headers={"host": host}).status_code == 400


@pytest.mark.parametrize("host", ["127.0.0.1:8710", "localhost", "[::1]:8710"])
def test_this_machine_is_answered_by_any_of_its_names(client, host):
    assert client.get("/", headers={"host": host}).status_code == 200


@pytest.mark.parametrize("address", ["/", "/series?name=power_da", "/series?name=peg"])
def test_a_served_page_has_nothing_that_a_strict_policy_forbids(client, address):
    tags = _Words(client.get(address).text).tags
    assert not [attributes for _, attributes in tags if "style" in attributes]
    assert not [name for _, attributes in tags for name in attributes if name.startswith("on")]
    assert [attributes for tag, attributes in tags if tag == "script"] == [{"src": "/static/page.js", "defer": None}]
    assert not [tag for tag, _ in tags if tag == "style"]
    assert not [value for _, attributes in tags for value in attributes.values() if value and "://" in value]


def test_the_first_sheet_opens_with_one_sentence_and_names_what_to_look_at(client):
    said = words_of(client.get("/?as_of=2024-03-02T09:00"))
    assert "Run 2 of 2 Mar 2024, 08:00 UTC: 3 series, 3 late, 2 to look at." in said
    assert "power_da: correction. Volatility" in said
    assert "peg: no variation." in said


def test_series_stand_in_the_order_of_the_plan(client):
    tags = _Words(client.get("/").text).text
    assert tags.index("peg") < tags.index("script>alert") < tags.rindex("power_da")


def test_a_past_moment_says_so_on_the_sheet_and_in_the_data(client):
    answer = client.get("/?as_of=2024-03-01T09:00")
    line = "As known on 1 Mar 2024, 09:00 UTC: not the latest numbers"
    assert line in words_of(answer)
    assert 'class="past"' in answer.text
    assert "Run 1 of" in words_of(answer)
    assert client.get("/csv/latest.csv?as_of=2024-03-01T09:00").text.startswith(f"# {line}\n")
    assert not client.get("/csv/latest.csv").text.startswith("#")


def test_links_of_a_past_sheet_stay_in_the_past(client):
    tags = _Words(client.get("/?as_of=2024-03-01T09:00").text).tags
    sheets = [attributes["href"] for tag, attributes in tags if tag == "a" and attributes["href"].startswith("/series")]
    assert sheets
    assert all("as_of=2024-03-01T09%3A00" in address for address in sheets)


def test_before_the_first_run_nothing_was_known(client):
    assert "Nothing was known on 1 Jan 2020" in words_of(client.get("/?as_of=2020-01-01T00:00"))
    assert client.get("/series?name=power_da&as_of=2020-01-01").status_code == 404


@pytest.mark.parametrize("when", ["soon", "2999-01-01", "2024-13-01"])
def test_what_is_no_past_moment_is_refused_in_a_sentence(client, when):
    assert client.get("/", params={"as_of": when}).status_code == 400


def test_data_of_the_first_sheet_are_the_view(client, small):
    columns, *rows = rows_of(client.get("/csv/latest.csv?as_of=2024-03-02T09:00"))[1:]
    with store.connect(small) as con:
        found = con.execute("from latest_as_of('2024-03-02T09:00')")
        names, view = [column[0] for column in found.description], found.fetchall()
    assert columns == names
    shown = {row[0]: row for row in rows}
    for row in view:
        volatility = shown.get(row[0], shown.get("'" + row[0]))[names.index("volatility")]
        assert (float(volatility) if volatility else None) == row[names.index("volatility")]


@pytest.mark.parametrize("kind", ["values", "statements", "models", "corrections"])
def test_every_chart_of_a_series_has_its_data(client, kind):
    answer = client.get(f"/csv/{kind}.csv", params={"name": "power_da"})
    assert answer.headers["content-type"] == "text/csv; charset=utf-8"
    assert len(rows_of(answer)) > 1
    assert f"/csv/{kind}.csv?name=power_da" in client.get("/series?name=power_da").text


def test_the_data_of_the_values_are_the_view(client, small):
    rows = rows_of(client.get("/csv/values.csv?name=power_da"))[1:]
    with store.connect(small) as con:
        view = con.execute("select value from observation where series = 'power_da' order by observed_at").fetchall()
    assert [float(row[1]) for row in rows] == [value for (value,) in view]


def test_what_is_said_of_each_window_is_what_latest_said_of_the_last(client, small):
    header, *rows = rows_of(client.get("/csv/statements.csv?name=power_da"))
    with store.connect(small) as con:
        model, volatility = con.execute("select model, volatility from latest where series = 'power_da'").fetchone()
    in_force = [row for row in rows if not row[header.index("run_to")] and row[0] == model]
    assert float(in_force[-1][header.index("volatility")]) == pytest.approx(volatility, rel=1e-12)


def test_a_level_is_counted_on_the_server_as_sql_counts_it(client, small):
    said = words_of(client.get("/series?name=power_da&level=61"))
    with store.connect(small) as con:
        (crossed,) = con.execute(
            "with step as (select observed_at, value >= 61 as above, lag(value >= 61) over (order by observed_at) as "
            "before from observation where series = 'power_da' qualify observed_at > "
            "(select max(window_start) from ou where series = 'power_da')) "
            "select count(*) filter (where above <> before) from step"
        ).fetchone()
    assert f"Crossed {crossed} times in the window" in said


@pytest.mark.parametrize("level", ["much", "nan", "inf", "1e999"])
def test_what_is_no_level_is_refused(client, level):
    assert client.get("/series", params={"name": "power_da", "level": level}).status_code == 400


def test_a_failed_fit_says_why_on_both_sheets(client):
    said = words_of(client.get("/series?name=peg"))
    assert "There is no estimate in force: no variation." in said
    assert "no variation" in words_of(client.get("/"))


def test_a_hostile_name_is_text_wherever_it_stands(client):
    home = client.get("/")
    assert "<script>alert" not in home.text
    tags = _Words(home.text).tags
    (address,) = {a["href"] for tag, a in tags if tag == "a" and "alert" in a.get("href", "") and "/series" in a["href"]
                  and "#" not in a["href"]}  # fmt: skip
    sheet = client.get(address)
    assert sheet.status_code == 200
    assert "<script>alert" not in sheet.text
    assert "‮" not in sheet.text.replace(f'value="{HOSTILE}', "").split("<h1>")[1].split("</h1>")[0]
    for kind in ("values", "models"):
        assert client.get(f"/csv/{kind}.csv", params={"name": HOSTILE}).status_code == 200


def test_a_cell_that_a_spreadsheet_would_obey_is_only_text():
    assert csv_text(["a"], [["=1+1"], ["@x"], [-1.5], [None], [True]]) == "a\n'=1+1\n'@x\n-1.5\n\"\"\ntrue\n"


@pytest.mark.parametrize("name", ["", "nobody", "' or 1=1 --", "power_da\0"])
def test_an_unknown_series_is_not_found(client, name):
    assert client.get("/series", params={"name": name}).status_code == 404
    assert client.get("/csv/values.csv", params={"name": name}).status_code == 400


def test_an_empty_book_says_what_to_do(book):
    client = client_of(book)
    assert "No run yet: take in files, then refresh with a plan." in words_of(client.get("/"))
    assert client.get("/newest.json").json() == {"run": 0}


def test_the_page_follows_a_swap_and_keeps_no_connection(tmp_path):
    path = small_book(tmp_path / "desk.duckdb")
    client = client_of(path)
    assert client.get("/newest.json").json() == {"run": 2}
    correct(path, to=98.0)
    assert client.get("/newest.json").json() == {"run": 3}
    assert "Run 3 of" in words_of(client.get("/"))
    with duckdb.connect(path):  # nobody holds the file
        pass


def test_a_series_without_estimates_is_shown_all_the_same(filled):
    client = client_of(filled)
    assert client.get("/").status_code == 200
    with store.connect(filled) as con:
        names = [name for (name,) in con.execute("select series from series").fetchall()]
    for name in names:
        assert client.get("/series", params={"name": name}).status_code == 200


def test_why_compares_the_runs_that_are_asked_for(client):
    said = words_of(client.get("/series?name=power_da&from=1&to=2"))
    assert "Between run 1 and run 2: 1 correction." in said
    assert "corrected to 99 in run 2" in said


def test_figures_of_a_comparison_have_units(client):
    said = words_of(client.get("/series?name=power_da&from=1&to=2"))
    assert "theta, EUR/t" in said
    assert "sigma, EUR/t/√year" in said
    assert "kappa, 1/year" in said


def test_units_of_parameters_are_those_of_the_series_and_its_clock():
    named = {
        (model, parameter.name): _named(parameter, {"unit": "EUR/t", "clock": clock})
        for model, clock in (("ckls", "trading"), ("cir", "seconds"))
        for parameter in MODELS[model].parameters
    }
    assert named["ckls", "sigma"] == "sigma, (EUR/t)^(1-gamma)/√year"
    assert named["ckls", "gamma"] == "gamma"
    assert named["cir", "sigma"] == "sigma, √(EUR/t)/√second"
    assert named["cir", "kappa"] == "kappa, 1/second"


def test_every_model_has_words_of_its_own():
    assert {words.model(name) for name in MODELS}.isdisjoint(MODELS)
    assert len({words.model(name) for name in MODELS}) == len(MODELS)


def test_a_whisker_runs_to_the_edge_where_there_is_no_end_and_has_no_bar_without_an_interval():
    axis = in_decades([1.0, 100.0], 100.0)
    both, open_end, alone = (
        _Words(whisker(axis, (10.0, *ends), None)).tags[1:] for ends in ((5.0, 20.0), (5.0, None), (None, None))
    )
    assert alone == [("circle", {"class": "d", "cx": "50%"})]
    bars = [tags[0][1] for tags in (both, open_end)]
    start, *widths = (float(text[:-1]) for text in (bars[0]["x"], *(bar["width"] for bar in bars)))
    assert bars[0]["x"] == bars[1]["x"]
    assert widths == [pytest.approx(100 - 2 * start, abs=0.2), pytest.approx(100 - start, abs=0.2)]
    assert "<circle cx=25% />" in whisker(axis, (10.0, 5.0, 20.0), axis.low * (axis.high / axis.low) ** 0.25)


def test_a_small_year_goes_through_the_values():
    rows = {
        "series": np.array(["a", "a", "a", "b", "c", "c"], object),
        "period": np.array([0, 1, 4, 2, 3, 4]),
        "last": np.array([1.0, 3.0, 2.0, 5.0, 7.0, 7.0]),
        "lowest": np.array([1.0, 1.0, 2.0, 5.0, 7.0, 7.0]),
        "highest": np.array([2.0, 3.0, 3.0, 5.0, 7.0, 7.0]),
    }
    found = {name: [a["d"] for tag, a in _Words(year).tags if tag == "path"] for name, year in small_years(rows, 5)}
    assert found == {
        "a": ["M0 14v12m1-24v24m3-24v12", "M0 26l1-24l3+12"],
        "b": ["M2 14v0", "M2 14h1"],
        "c": ["M3 14v0m1+0v0", "M3 14h1"],
    }


def test_the_demo_is_shown_as_the_tour_tells_it(island):
    book = island / "island.duckdb"
    client = client_of(book)
    first = words_of(client.get("/"))
    assert ": 9 series," in first
    assert "no advice and no forecast of returns" in first
    with store.connect(book) as con:
        names = [name for (name,) in con.execute("select series from series").fetchall()]
        models = con.execute("select series, model from latest order by series").fetchall()
    assert all(f"{name} " in first for name in names)
    columns, *rows = rows_of(client.get("/csv/latest.csv"))
    assert sorted((row[0], row[columns.index("model")]) for row in rows) == models
    assert "358 (322–395)" in words_of(client.get("/series?name=power_da"))
    assert "In force is ou: another takes its place when it leads by 6 in bic" in words_of(
        client.get("/series?name=pellets_fob")
    )
    assert "Run 7 of" in words_of(client.get("/?as_of=2026-06-30T08:00Z"))


@pytest.mark.parametrize("path", ["/series?name=dieselle", "/nowhere", "/csv/../page.css", "/static/../app.py"])
def test_what_is_not_there_is_not_found_in_a_sentence(client, path):
    answer = client.get(path)
    assert answer.status_code == 404
    assert "Traceback" not in answer.text


def test_the_guide_is_served_and_its_links_lead_to_pages(client):
    assert 'href="/guide"' in client.get("/").text
    listed = [a["href"] for tag, a in _Words(client.get("/guide").text).tags if tag == "a" and "/guide/" in a["href"]]
    there = {f"/guide/{file.name}" for file in (Path(store.__file__).parent / "guide").glob("*.md")}
    assert set(listed) == there
    for address in listed:
        answer = client.get(address)
        assert answer.status_code == 200
        found = _Words(answer.text)
        assert [tag for tag, _ in found.tags].count("h1") == 1
        links = [a.get("href") or a["src"] for tag, a in found.tags if tag in ("a", "img")]
        for link in links:
            if not link.startswith("http"):
                assert client.get(str(httpx2.URL(f"http://127.0.0.1{address}").join(link))).status_code == 200
    assert client.get("/guide/no.md").status_code == 404


def test_a_thousand_series_are_a_light_page_in_little_time(many):
    client = client_of(many)
    seconds = []
    for _ in range(4):
        start = time.process_time()
        answer = client.get("/")
        seconds.append(time.process_time() - start)
    assert answer.text.count("<tr") == 1001
    assert len(answer.content) < MEGABYTE
    # The work of all threads of this process, so that other processes on the machine do not count.
    assert min(seconds) < 0.3


def test_the_mailed_file_is_whole_in_itself(small, tmp_path):
    output = tmp_path / "page.html"
    assert run_command(["page", str(small), "--output", str(output), "--quiet"]) == 0
    text = output.read_text(encoding="utf-8")
    tags = _Words(text).tags
    fetched = [a.get("src") or a.get("href") for tag, a in tags if tag in ("script", "link", "img", "a")]
    assert all(address.startswith(("#", "data:text/csv")) for address in fetched if address)
    places = {attributes["id"] for _, attributes in tags if "id" in attributes}
    assert {address[1:] for address in fetched if address and address.startswith("#")} <= places
    assert "<script>alert" not in text
    assert len([attributes for _, attributes in tags if "id" in attributes]) == len(places)


def test_a_mailed_past_says_so(small, tmp_path):
    output = tmp_path / "page.html"
    assert run_command(["page", str(small), "--output", str(output), "--as-of", "2024-03-01T09:00"]) == 0
    assert "As known on 1 Mar 2024, 09:00 UTC: not the latest numbers" in output.read_text(encoding="utf-8")


def test_without_the_extra_one_sentence_says_what_to_install(small, monkeypatch, capsys):
    monkeypatch.setattr("driftbook.store.cli.page_command.find_spec", lambda _: None)
    assert run_command(["page", str(small)]) == 2
    assert "pip install 'driftbook[page]'" in capsys.readouterr().err


def test_a_path_that_is_no_book_is_refused_before_anything_is_served(tmp_path):
    assert run_command(["page", str(tmp_path / "no.duckdb"), "--port", "0"]) != 0
