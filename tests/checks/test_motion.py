"""The integrator: its order conditions exactly, its motions against closed forms, its own step per motion."""

from __future__ import annotations

from fractions import Fraction
from functools import cache
from math import exp

import numpy as np
import pytest

from dossier.checks.motion import DENSE, FOURTH_ORDER, STAGES, Ending, Work, integrate, iterate, never_stop

Tree = tuple["Tree", ...]


@cache
def trees(order: int) -> tuple[Tree, ...]:
    """All rooted trees with `order` vertices, as sorted tuples of their branches."""
    if order == 1:
        return ((),)
    return tuple(sorted({tuple(sorted(f)) for f in forests(order - 1)}))


def forests(size: int) -> list[tuple[Tree, ...]]:
    if size == 0:
        return [()]
    return [(t, *rest) for k in range(1, size + 1) for t in trees(k) for rest in forests(size - k)]


def vertices(tree: Tree) -> int:
    return 1 + sum(vertices(t) for t in tree)


def density(tree: Tree) -> int:
    """gamma(t) of Butcher's theory (Hairer, Norsett, Wanner 1993, II.2)."""
    product = vertices(tree)
    for branch in tree:
        product *= density(branch)
    return product


def elementary_weight(tree: Tree) -> list[Fraction]:
    """Phi_i(t) for every stage i."""
    values = [Fraction(1)] * len(STAGES)
    for branch in tree:
        inner = elementary_weight(branch)
        sums = [sum((a * w for a, w in zip(row, inner, strict=False)), Fraction(0)) for row in STAGES]
        values = [v * s for v, s in zip(values, sums, strict=True)]
    return values


def weighted(weights, tree: Tree) -> Fraction:
    return sum((w * phi for w, phi in zip(weights, elementary_weight(tree), strict=True)), Fraction(0))


def test_there_are_as_many_rooted_trees_as_butcher_counted():
    assert [len(trees(n)) for n in range(1, 6)] == [1, 1, 2, 4, 9]


@pytest.mark.parametrize("order", range(1, 6))
def test_the_step_satisfies_every_order_condition_up_to_five(order):
    for tree in trees(order):
        assert weighted((*STAGES[-1], Fraction(0)), tree) == Fraction(1, density(tree))


@pytest.mark.parametrize("order", range(1, 5))
def test_the_embedded_step_satisfies_every_order_condition_up_to_four(order):
    for tree in trees(order):
        assert weighted(FOURTH_ORDER, tree) == Fraction(1, density(tree))


def test_the_embedded_step_is_not_of_order_five():
    assert any(weighted(FOURTH_ORDER, tree) != Fraction(1, density(tree)) for tree in trees(5))


@pytest.mark.parametrize("order", range(1, 5))
def test_values_inside_a_step_satisfy_every_order_condition_up_to_four(order):
    for tree in trees(order):
        for power in range(1, 5):
            expected = Fraction(1, density(tree)) if power == order else 0
            assert weighted([row[power - 1] for row in DENSE], tree) == expected


def one_work(count, horizon=1.0, states=1, relative=1e-9, steps=5000):
    return Work(np.full(count, float(horizon)), relative, np.full(states, 1e-12), steps, 1e-3)


def oscillator(index):
    return lambda offsets: np.stack((offsets[1], -offsets[0]))


def test_a_harmonic_motion_follows_the_cosine_at_its_end_and_inside_its_steps():
    seen = []

    def look(index, times, offsets):
        seen.append((times[0], offsets[0, 0]))
        return never_stop(index, times, offsets)

    motions = integrate(oscillator, np.array([[1.0], [0.0]]), look, one_work(1, 10.0, 2))
    assert motions.endings.tolist() == [Ending.HORIZON]
    assert motions.times[0] == 10.0
    assert motions.offsets[:, 0] == pytest.approx([np.cos(10.0), -np.sin(10.0)], abs=1e-7)
    times, values = np.array(seen).T
    assert np.all(np.diff(times) > 0)
    assert values == pytest.approx(np.cos(times), abs=1e-6)


def test_each_motion_takes_its_own_step_and_ends_as_it_would_alone():
    rates = np.array([-1.0, -50.0, 0.3])

    def decay(index):
        return lambda offsets: rates[index] * offsets

    together = integrate(decay, np.ones((1, 3)), never_stop, one_work(3))
    assert together.offsets[0] == pytest.approx([exp(r) for r in rates], rel=1e-7)
    alone = integrate(lambda i: lambda x: rates[1] * x, np.ones((1, 1)), never_stop, one_work(1))
    assert together.offsets[0, 1] == pytest.approx(alone.offsets[0, 0], rel=1e-12)


def test_a_motion_that_the_observer_ends_is_not_shown_again_and_the_others_go_on():
    shown = []

    def stop_second(index, times, offsets):
        shown.extend(index[times > 0.2].tolist())
        return np.where((index == 1) & (times > 0.2), Ending.LEFT_DOMAIN, Ending.RUNNING).astype(np.int8)

    motions = integrate(lambda i: lambda x: -x, np.ones((1, 3)), stop_second, one_work(3))
    assert motions.endings.tolist() == [Ending.HORIZON, Ending.LEFT_DOMAIN, Ending.HORIZON]
    assert shown.count(1) == 1


def test_finite_escape_is_reported_near_its_true_time():
    motions = integrate(lambda i: lambda x: x * x, np.array([[0.5]]), never_stop, one_work(1, 10.0))
    assert motions.endings[0] in (Ending.SINGULAR, Ending.WORK)
    assert motions.times[0] == pytest.approx(2.0, rel=1e-6)


def test_a_stiff_motion_stops_at_the_step_limit():
    motions = integrate(lambda i: lambda x: -1e7 * x, np.ones((1, 1)), never_stop, one_work(1, 1.0, steps=50))
    assert motions.endings.tolist() == [Ending.WORK]
    assert motions.steps == 50


def test_a_map_is_iterated_for_its_own_number_of_samples():
    motions = iterate(lambda i: lambda x: x / 2, np.ones((1, 2)), never_stop, np.array([3, 10]))
    assert motions.offsets[0].tolist() == [1 / 8, 1 / 1024]
    assert motions.times.tolist() == [3, 10]
