"""Statuses: the words that tables show, and sentences that help."""

import pickle

import pytest

from driftbook.estimators import Status

WORDS = [
    "ok",
    "no_reversion",
    "alternating",
    "at_bound",
    "flat",
    "out_of_range",
    "too_short",
    "not_converged",
    "too_coarse",
    "discrete",
]


def test_words_and_numbers_are_fixed():
    assert [status.word for status in Status] == WORDS
    assert [int(status) for status in Status] == list(range(len(WORDS)))


@pytest.mark.parametrize("status", Status)
def test_each_owns_a_sentence(status):
    assert status.sentence.endswith(".")
    assert "  " not in status.sentence


@pytest.mark.parametrize("status", [status for status in Status if status is not Status.OK])
def test_a_failure_says_what_to_try(status):
    assert any(word in status.sentence.lower() for word in ("try", "check", "correct"))


def test_sentences_differ():
    assert len({status.sentence for status in Status}) == len(Status)


@pytest.mark.parametrize("status", Status)
def test_survives_a_trip_to_another_process(status):
    assert pickle.loads(pickle.dumps(status)) is status
    assert Status(int(status)) is status
