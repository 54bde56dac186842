"""The page: what it serves, to whom, and that it says what the book says."""

import csv
import io

import pytest
from made_series import days, wave
from starlette.testclient import TestClient

from driftbook import store
from driftbook.store.cli import app
from driftbook.store.demo import run_demo
from driftbook.store.page import create_app
from driftbook.store.plan import parse_plan
from driftbook.store.swap import create

HERE = "http://127.0.0.1:8710"
HOSTILE = '<script>alert("x")</script>&=cmd'


@pytest.fixture(scope="module")
def island(tmp_path_factory):
    folder = tmp_path_factory.mktemp("page") / "island"
    run_demo(folder, lambda _: None, lambda _: "", lambda _: "")
    return folder / "island.duckdb"


@pytest.fixture(scope="module")
def client(island):
    return TestClient(create_app(island), base_url=HERE)


def rows(text):
    return list(csv.DictReader(io.StringIO(text)))


def test_the_first_sheet_begins_with_the_sentence_and_names_every_series(client):
    page = client.get("/").text
    assert "9 series" in page
    for name in ("pellets_fob", "diesel", "power_da", "reservoir"):
        assert name in page
    assert "no advice and no forecast of returns" in " ".join(page.split())


def test_a_series_sheet_answers_with_its_numbers(client):
    page = client.get("/series", params={"name": "power_da"}).text
    assert "power_da" in page
    assert "358 (322–395)" in page


def test_a_past_moment_says_that_it_is_not_the_latest(client):
    page = client.get("/", params={"as_of": "2026-06-30T08:00Z"}).text
    assert "not the latest numbers" in page
    assert "Run 7" in page


def test_the_csv_of_the_first_sheet_is_the_view(client, island):
    told = rows(client.get("/csv/latest.csv").text)
    with store.connect(island) as con:
        there = con.execute("select series, model from latest order by series").fetchall()
    assert sorted((row["series"], row["model"]) for row in told) == there


@pytest.mark.parametrize("path", ["/", "/series?name=diesel", "/csv/latest.csv", "/static/page.css", "/nowhere"])
def test_every_answer_carries_the_headers_that_keep_others_out(client, path):
    headers = client.get(path).headers
    assert "default-src 'self'" in headers["content-security-policy"]
    assert "unsafe-inline" not in headers["content-security-policy"]
    assert headers["x-content-type-options"] == "nosniff"


@pytest.mark.parametrize("method", ["POST", "PUT", "DELETE", "PATCH"])
def test_nothing_can_be_changed_through_the_page(client, method):
    assert client.request(method, "/").status_code == 405


def test_another_host_name_is_refused(island):
    assert TestClient(create_app(island), base_url="http://elsewhere.example").get("/").status_code == 400


@pytest.mark.parametrize("path", ["/series?name=dieselle", "/nowhere", "/csv/../page.css"])
def test_what_is_not_there_is_not_found(client, path):
    answer = client.get(path)
    assert answer.status_code == 404
    assert "Traceback" not in answer.text


def test_an_empty_book_has_a_page(tmp_path):
    create(tmp_path / "desk.duckdb")
    assert TestClient(create_app(tmp_path / "desk.duckdb"), base_url=HERE).get("/").status_code == 200


def test_hostile_names_are_text_and_a_failed_fit_is_told(tmp_path):
    book = tmp_path / "desk.duckdb"
    create(book)
    plan = f"""
name = "desk"
[[series]]
name = '{HOSTILE}'
[[estimate]]
series = ['{HOSTILE}']
models = ["ou"]
lookbacks = [250]
"""
    with store.writing(book) as work:
        work.ingest(days(HOSTILE, wave(6)), store.Options(add_series=True), name="first")
        work.refresh(parse_plan(plan, "the plan"))
    client = TestClient(create_app(book), base_url=HERE)
    first, sheet = client.get("/"), client.get("/series", params={"name": HOSTILE})
    assert (first.status_code, sheet.status_code) == (200, 200)
    for page in (first.text, sheet.text):
        assert "<script>alert" not in page
        assert "&lt;script&gt;" in page
    assert "too short" in first.text


def test_the_page_follows_a_swap(tmp_path):
    book = tmp_path / "desk.duckdb"
    create(book)
    client = TestClient(create_app(book), base_url=HERE)
    assert "pellets_fob" not in client.get("/").text
    plan = (
        'name = "d"\n[[series]]\nname = "pellets_fob"\n'
        '[[estimate]]\nseries = ["*"]\nmodels = ["abm"]\nlookbacks = [8]\n'
    )
    with store.writing(book) as work:
        work.ingest(days("pellets_fob", wave(20)), store.Options(add_series=True), name="first")
        work.refresh(parse_plan(plan, "the plan"))
    assert "pellets_fob" in client.get("/").text


def test_one_file_can_be_mailed_and_needs_nothing_else(island, tmp_path):
    file = tmp_path / "book.html"
    assert app.run(["page", str(island), "--output", str(file), "--quiet"]) == 0
    text = file.read_text(encoding="utf-8")
    assert "pellets_fob" in text
    assert 'src="' not in text.replace('src="data:', "")
    assert 'rel="stylesheet"' not in text
