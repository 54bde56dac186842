"""How a refused row's text is found to speak of a series, whatever its name is made of."""

import csv
import io
import json

import duckdb
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from driftbook.store.intake.naming import why_no_name
from driftbook.store.mentions import _pattern

NAMES = st.text(min_size=1, max_size=12).map(str.strip).filter(lambda name: why_no_name(name) is None)
SPECIAL = st.text(alphabet=" .*+?[](){}|\\^$-\"'#&~,;éß数", min_size=1, max_size=8).map(str.strip)
SPECIAL = SPECIAL.filter(lambda name: why_no_name(name) is None)


@pytest.fixture(scope="module")
def speaks():
    with duckdb.connect() as con:

        def speaks(text, *names):
            return con.execute("select regexp_matches($1, $2)", [text, _pattern(list(names))]).fetchall()[0][0]

        yield speaks


def as_csv(*fields, **how):
    text = io.StringIO()
    csv.writer(text, **how).writerow(fields)
    return text.getvalue()


@settings(max_examples=200, deadline=None)
@given(name=NAMES | SPECIAL, delimiter=st.sampled_from(",;\t|"))
def test_a_name_is_found_in_every_form_that_a_line_can_have(speaks, name, delimiter):
    texts = [
        as_csv(name, "2024-01-01", "1x", delimiter=delimiter),
        as_csv("2024-01-01", f"  {name} ", delimiter=delimiter, quoting=csv.QUOTE_ALL),
        as_csv("2024-01-01", "1x", name, delimiter=delimiter),
        as_csv(name, "unfinished", quoting=csv.QUOTE_ALL)[:-3],
        json.dumps({"series": name, "time": None}) + "\n",
        json.dumps({"time": None, "series": name}, ensure_ascii=False),
    ]
    assert [text for text in texts if not speaks(text, "another", name)] == []


@settings(max_examples=100, deadline=None)
@given(name=NAMES | SPECIAL, more=st.sampled_from(["x", "_1", " 2", "é"]))
def test_a_longer_name_is_another_one(speaks, name, more):
    assert not speaks(f"{name}{more}\n", name)
    assert not speaks(f"{more.strip()}{name}\n", name)


def test_a_line_in_latin_1_is_found_as_its_bytes_are_kept(speaks):
    assert speaks("größe,2024-01-01,1\n".encode("latin-1").decode("utf-8", "backslashreplace"), "größe")
