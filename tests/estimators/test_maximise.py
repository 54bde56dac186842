"""The batched maximiser: where it ends, at bounds and from several starts, and that windows do not see each other."""

import numpy as np
import pytest

from driftbook.estimators.maximise import Limits, Surface, inverse, maximise, maximise_from_each

FREE = Limits((-np.inf,) * 2, (np.inf,) * 2, (1.0, 1.0), (1.0, 1.0))


def valley(point, places):
    """Rosenbrock's function upside down: largest, 0, at (1, 1), along a curved ridge (Computer J. 3, 1960)."""
    a, b = point
    hessian = np.empty((2, 2, a.size))
    hessian[0, 0], hessian[1, 1] = 400 * (b - 3 * a * a) - 2, -200
    hessian[0, 1] = hessian[1, 0] = 400 * a
    gradient = np.stack([400 * a * (b - a * a) + 2 * (1 - a), -200 * (b - a * a)])
    return Surface(-(100 * (b - a * a) ** 2 + (1 - a) ** 2), gradient, hessian)


def waves(point, places):
    """cos x − x²/50: maxima near the multiples of 2π, the largest at 0."""
    (x,) = point
    return Surface(np.cos(x) - x * x / 50, (-np.sin(x) - x / 25)[None], (-np.cos(x) - 1 / 25)[None, None])


def starts(m, p=2, scale=2.0):
    return scale * np.random.default_rng(0).standard_normal((p, m))


def test_along_a_curved_ridge():
    found = maximise(valley, starts(500), FREE, most_rounds=200)
    assert found.converged.all()
    np.testing.assert_allclose(found.point, 1.0, atol=1e-5)  # the ridge is 30 times longer than wide
    assert (found.value > -1e-11).all()
    assert not found.at_bound.any()


def test_on_a_bound_the_others_are_at_their_best():
    found = maximise(valley, starts(500), Limits((-3.0, -9.0), (0.5, 9.0), (1.0, 1.0), (0.0, 0.0)))
    assert found.converged.all()
    np.testing.assert_allclose(found.point, np.broadcast_to([[0.5], [0.25]], (2, 500)), atol=1e-7)
    assert found.at_bound[0].all()
    assert not found.at_bound[1].any()


def test_a_bound_is_left_when_the_way_up_leads_inward():
    start = np.array([[0.5], [0.0]])
    found = maximise(valley, start, Limits((0.5, -9.0), (9.0, 9.0), (1.0, 1.0), (0.0, 0.0)))
    assert found.converged.all()
    np.testing.assert_allclose(found.point[:, 0], 1.0, atol=1e-6)


def test_the_value_never_falls():
    seen = {}

    def watched(point, places):
        surface = valley(point, places)
        for place, value in zip(places, surface.value, strict=True):
            seen.setdefault(place, []).append(value)
        return surface

    found = maximise(watched, starts(50), FREE)
    for place, values in seen.items():
        assert found.value[place] >= max(values) - 1e-9


def test_no_step_is_longer_than_the_limit():
    seen = []

    def watched(point, places):
        seen.append(point[0, 0])
        return Surface(-((point[0] - 100) ** 2), -2 * (point - 100), np.full((1, 1, 1), -2.0))

    found = maximise(watched, np.zeros((1, 1)), Limits((-np.inf,), (np.inf,), (7.0,), (0.0,)))
    assert found.point[0, 0] == 100
    assert np.abs(np.diff(seen)).max() <= 7 * (1 + 1e-15)


def test_from_several_starts_the_largest():
    m = 40
    each = np.stack([np.full((1, m), x) for x in (6.0, 12.0, 0.5, -6.5)])
    found, second, *_ = maximise_from_each(waves, each, Limits((-30.0,), (30.0,), (1.0,), (0.0,)))
    assert found.converged.all()
    np.testing.assert_allclose(found.point, 0.0, atol=1e-7)
    assert (np.abs(np.abs(second.point) - 6.04) < 0.01).all()
    alone = maximise(waves, np.full((1, m), 6.0), Limits((-30.0,), (30.0,), (1.0,), (0.0,)))
    np.testing.assert_allclose(alone.point, alone.point[0, 0])
    assert alone.point[0, 0] > 5


def test_windows_do_not_see_each_other():
    start = starts(64)
    whole = maximise(valley, start, FREE)
    for k in (0, 31, 63):
        alone = maximise(valley, start[:, k : k + 1], FREE)
        for name in ("point", "value", "gradient", "hessian", "rounds"):
            assert np.array_equal(getattr(alone, name)[..., 0], getattr(whole, name)[..., k]), name


def test_without_a_maximum_there_is_no_convergence():
    def rising(point, places):
        return Surface(point[0], np.ones_like(point), np.zeros((1, 1, places.size)))

    assert not maximise(rising, np.zeros((1, 3)), Limits((-np.inf,), (np.inf,), (1.0,), (0.0,))).converged.any()


def test_what_is_not_a_number_ends_its_own_window_only():
    def broken(point, places):
        surface = valley(point, places)
        return Surface(np.where(places == 1, np.nan, surface.value), surface.gradient, surface.hessian)

    found = maximise(broken, starts(3), FREE)
    np.testing.assert_array_equal(found.converged, [True, False, True])


def test_a_wall_is_gone_around():
    """Not finite beyond x = 1, with the maximum just before it."""

    def walled(point, places):
        (x,) = point
        room = np.where(x < 1, 1 - x, np.nan)
        return Surface(x + 1e-3 * np.log(room), (1 - 1e-3 / room)[None], (-1e-3 / room**2)[None, None])

    found = maximise(walled, np.linspace(-5, 0.9, 20)[None], Limits((-np.inf,), (np.inf,), (9.0,), (0.0,)))
    assert found.converged.all()
    np.testing.assert_allclose(found.point, 0.999, atol=1e-7)


@pytest.mark.parametrize("p", [1, 3, 5])
def test_inverse(p):
    root = np.random.default_rng(p).standard_normal((20, p, p))
    matrix = root @ root.transpose(0, 2, 1) + 0.1 * np.eye(p)
    found = inverse(np.moveaxis(matrix, 0, -1))
    np.testing.assert_allclose(np.moveaxis(found, -1, 0), np.linalg.inv(matrix), rtol=1e-9)
    assert np.isnan(inverse(-np.ones((1, 1, 1)))).all()


def test_no_windows_at_all():
    assert maximise(valley, np.empty((2, 0)), FREE).point.shape == (2, 0)
