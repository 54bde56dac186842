"""What is due, against brute force: a window is due if and only if its observations changed or it is new."""

from datetime import date, timedelta

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from driftbook.store.due import Asked, due

LOOKBACKS = st.integers(1, 8)
TIMES = st.integers(0, 40)
thorough = settings(deadline=None, max_examples=250, derandomize=True)


def windows(state, lookback):
    """Every window of a state {time: value}: its observations by its end; the one row of a series that is too short."""
    times = sorted(state)
    if 0 < len(times) <= lookback:
        return {times[-1]: tuple((time, state[time]) for time in times)}
    return {
        times[end]: tuple((time, state[time]) for time in times[end - lookback : end + 1])
        for end in range(lookback, len(times))
    }


def ask(before, after, lookback, *, whole=False, touched=()):
    changed = {time for time in before.keys() | after.keys() if before.get(time) != after.get(time)} | set(touched)
    times = np.array(sorted(after), np.int64)
    asked = Asked(3, lookback, "observation", whole)
    return due(asked, times, np.array(sorted(changed), np.int64), np.zeros(0, np.int64))


def computed_ends(slices, after, lookback):
    """The window ends that the slices compute, in order."""
    times = sorted(after)
    if not slices:
        return []
    if len(times) <= lookback:
        assert [(one.start, one.first, one.stop) for one in slices] == [(0, 0, len(times) - 1)]
        return [times[-1]]
    return [times[k + lookback] for one in slices for k in range(one.first, one.stop - lookback + 1)]


def expected_ends(before, after, lookback):
    old = windows(before, lookback)
    return sorted(end for end, window in windows(after, lookback).items() if old.get(end) != window)


def in_a_span(end, spans):
    return any(span.opens <= end <= span.closes for span in spans)


@st.composite
def single_change(draw):
    """A state and the state after one observation was added, corrected or withdrawn."""
    before = draw(st.dictionaries(TIMES, st.integers(1, 3), max_size=25))
    time = draw(st.sampled_from(sorted(before)) | TIMES if before else TIMES)
    after = dict(before)
    if time in before and draw(st.booleans()):
        del after[time]
    else:
        after[time] = 9
    return before, after


@thorough
@given(single_change(), LOOKBACKS)
def test_one_change_makes_exactly_the_windows_due_that_it_touches(change, lookback):
    before, after = change
    slices, _ = ask(before, after, lookback)
    assert computed_ends(slices, after, lookback) == expected_ends(before, after, lookback)


states = st.dictionaries(TIMES, st.integers(1, 3), max_size=30)


@thorough
@given(states, states, LOOKBACKS)
def test_no_window_that_changed_is_missed(before, after, lookback):
    """Whatever was added, corrected and withdrawn at once."""
    slices, _ = ask(before, after, lookback)
    assert set(computed_ends(slices, after, lookback)) >= set(expected_ends(before, after, lookback))


@thorough
@given(states, states, LOOKBACKS)
def test_any_number_of_changes_computes_no_window_that_stayed_as_it_was(before, after, lookback):
    slices, _ = ask(before, after, lookback)
    assert computed_ends(slices, after, lookback) == expected_ends(before, after, lookback)


@thorough
@given(states, states, LOOKBACKS, st.sets(TIMES, max_size=3))
def test_spans_close_exactly_the_windows_that_vanished(before, after, lookback, touched):
    """Of the windows in force, those in a span that are not computed again are those that are no longer there."""
    slices, spans = ask(before, after, lookback, touched=touched & after.keys())
    again = set(computed_ends(slices, after, lookback))
    closed = {end for end in windows(before, lookback) if in_a_span(end, spans) and end not in again}
    assert closed == windows(before, lookback).keys() - windows(after, lookback).keys()


@thorough
@given(states, LOOKBACKS, st.sets(TIMES, max_size=4))
def test_an_observation_that_came_back_to_what_it_was_is_computed_and_closes_nothing(state, lookback, touched):
    touched &= state.keys()
    slices, spans = ask(state, state, lookback, touched=touched)
    ends = set(computed_ends(slices, state, lookback))
    held = {end for end, window in windows(state, lookback).items() if touched & {time for time, _ in window}}
    assert ends == held
    assert all(end in ends for end in windows(state, lookback) if in_a_span(end, spans))


@thorough
@given(states, states, LOOKBACKS)
def test_slices_are_apart_and_count_their_windows(before, after, lookback):
    slices, _ = ask(before, after, lookback)
    ends = computed_ends(slices, after, lookback)
    assert sum(one.windows for one in slices) == len(ends)
    assert ends == sorted(set(ends))


@thorough
@given(states, states, LOOKBACKS)
def test_a_slice_starts_where_a_block_of_the_whole_series_starts(before, after, lookback):
    """So that its windows have the bits that they have when the whole series is computed."""
    slices, _ = ask(before, after, lookback)
    for one in slices:
        assert one.start % lookback == 0
        assert one.start <= one.first < one.start + lookback
        assert one.stop < len(after)


@thorough
@given(states, states, LOOKBACKS)
def test_everything_is_due_when_the_whole_is_asked_for(before, after, lookback):
    slices, spans = ask(before, after, lookback, whole=True)
    assert computed_ends(slices, after, lookback) == sorted(windows(after, lookback))
    assert all(in_a_span(end, spans) for end in windows(before, lookback))


@thorough
@given(states, LOOKBACKS)
def test_without_a_change_nothing_is_due_and_nothing_closed(state, lookback):
    assert ask(state, state, lookback) == ([], [])


@pytest.mark.parametrize("lookback", [1, 4])
def test_when_all_observations_are_withdrawn_all_estimates_are_closed(lookback):
    slices, spans = ask(dict.fromkeys(range(6), 1), {}, lookback)
    assert slices == []
    assert all(in_a_span(end, spans) for end in range(6))


def test_slices_and_spans_carry_the_series_and_the_lookback():
    slices, spans = ask({}, dict.fromkeys(range(6), 1), 2)
    assert [(one.series_id, one.lookback, one.steps) for one in slices] == [(3, 2, 2)]
    assert {(one.series_id, one.lookback) for one in spans} == {(3, 2)}


def period_of(time, every):
    """Times of these tests are days since 1 January 1970, a Thursday."""
    day = date(1970, 1, 1) + timedelta(days=time)
    return {"day": day, "week": day.isocalendar()[:2], "month": (day.year, day.month)}[every]


def thinned(state, lookback, every):
    """The windows of a state that end at the last observation of a period."""
    times = sorted(state)
    last = {period_of(time, every): time for time in times}
    return {end: window for end, window in windows(state, lookback).items() if end in last.values()}


def thinned_ends(slices, after, lookback):
    times = sorted(after)
    if len(times) <= lookback:
        return [times[-1]] if slices else []
    return sorted(times[end] for one in slices for end in one.ends)


EVERY = st.sampled_from(["day", "week", "month"])


@thorough
@given(states, states, LOOKBACKS, EVERY)
def test_with_periods_only_the_last_observation_of_each_ends_a_window(before, after, lookback, every):
    """Nothing that changed is missed, and what is no longer the end of its period is closed."""
    changed = sorted({time for time in before.keys() | after.keys() if before.get(time) != after.get(time)})
    times = np.array(sorted(after), np.int64)
    slices, spans = due(Asked(3, lookback, every, whole=False), times, np.array(changed, np.int64), times)
    new, old = thinned(after, lookback, every), thinned(before, lookback, every)
    computed = thinned_ends(slices, after, lookback)
    assert set(computed) >= {end for end, window in new.items() if old.get(end) != window}
    assert set(computed) <= set(new)
    assert len(computed) == len(set(computed))
    closed = {end for end in old if in_a_span(end, spans) and end not in computed}
    assert closed == old.keys() - new.keys()


@pytest.mark.parametrize(("size", "steps"), [(1, 5), (3, 5), (6, 5), (40, 39)])
def test_all_steps_make_one_window_that_ends_at_the_latest_observation(size, steps):
    """A series of fewer than five steps asks for five, and is told that it is too short."""
    times = np.arange(size, dtype=np.int64)
    slices, spans = due(Asked(3, 0, "observation", whole=False), times, times[-1:], times)
    assert [(one.steps, one.start, one.first, one.stop, one.windows) for one in slices] == [(steps, 0, 0, size - 1, 1)]
    assert all(in_a_span(end, spans) for end in range(-5, size + 5))
