from itertools import permutations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from metrics.indices.changes import box_work
from metrics.stats.shapley import shapley_parts

CAUSES = st.lists(st.floats(0.5, 5.0), min_size=4, max_size=4).map(np.array)


def by_orders(worth, before, after):
    """The definition: the mean over all orders of what each cause adds when it is switched."""
    parts = np.zeros(before.size)
    orders = list(permutations(range(before.size)))
    for order in orders:
        now = before.copy()
        for cause in order:
            was = float(worth(now))
            now[cause] = after[cause]
            parts[cause] += (float(worth(now)) - was) / len(orders)
    return parts


def bent(causes):
    return causes[..., 0] * causes[..., 1] ** 2 / (causes[..., 2] + causes[..., 3])


@given(CAUSES, CAUSES)
def test_parts_are_the_mean_over_all_orders(before, after):
    np.testing.assert_allclose(shapley_parts(bent, before, after), by_orders(bent, before, after), rtol=1e-9, atol=1e-9)


@given(CAUSES, CAUSES)
def test_parts_sum_to_the_change_and_turn_round_with_it(before, after):
    parts = shapley_parts(bent, before, after)
    assert parts.sum() == pytest.approx(float(bent(after) - bent(before)), abs=1e-9)
    np.testing.assert_allclose(shapley_parts(bent, after, before), -parts, rtol=1e-9, atol=1e-9)


def test_a_cause_that_does_not_change_has_no_part_and_takes_none_from_the_others():
    before, after = np.array([2.5, 10.0, 2.0, 130.0]), np.array([1.5, 10.0, 2.4, 150.0])
    parts = shapley_parts(box_work, before, after)
    assert parts[1] == pytest.approx(0.0, abs=1e-9)
    three = shapley_parts(lambda causes: box_work(np.insert(causes, 1, 10.0, axis=-1)), before[[0, 2, 3]], after[[0, 2, 3]])
    np.testing.assert_allclose(parts[[0, 2, 3]], three)


def test_causes_of_one_kind_have_equal_parts():
    parts = shapley_parts(lambda causes: causes[..., 0] * causes[..., 1], np.array([1.0, 1.0]), np.array([3.0, 3.0]))
    assert parts.tolist() == [4.0, 4.0]


def test_many_changes_are_split_at_once():
    rng = np.random.default_rng(3)
    before, after = rng.uniform(1.0, 4.0, (5, 4)), rng.uniform(1.0, 4.0, (5, 4))
    rows = [shapley_parts(bent, one, other) for one, other in zip(before, after, strict=True)]
    np.testing.assert_allclose(shapley_parts(bent, before, after), rows)
