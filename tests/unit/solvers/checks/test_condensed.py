"""Negative directions counted interval by interval, against the eigenvalues of the whole matrix."""

import numpy as np
import pytest

from solvers.checks.condensed import FIXED, SHARED, count_negative

PENALTY, NOISE = 1e-5, 1e-9
OWNER = np.array([SHARED, 0, 0, 0, SHARED, 1, 1, SHARED, 2, 2, 2, 2, SHARED, SHARED])
"""Three intervals with three, two and four variables inside, four ends, and one number of the whole curve."""
INTERVALS = [[0, 1, 2, 3, 4, 13], [4, 5, 6, 7, 13], [7, 8, 9, 10, 11, 12, 13]]


def curved(seed, *, ends=1.0):
    """A form whose intervals are positive inside; `ends` is what it has at the ends besides."""
    rng = np.random.default_rng(seed)
    form = np.zeros((len(OWNER), len(OWNER)))
    for own in INTERVALS:
        root = rng.normal(size=(len(own) + 2, len(own)))
        form[np.ix_(own, own)] += root.T @ root
    at = np.flatnonzero(OWNER == SHARED)
    form[at, at] += ends * rng.uniform(size=len(at))
    return form


def bound(seed):
    """Two rows of each interval and one that couples everything."""
    rng = np.random.default_rng(seed)
    rows = np.zeros((7, len(OWNER)))
    for k, own in enumerate(INTERVALS):
        rows[2 * k : 2 * k + 2, own] = rng.normal(size=(2, len(own)))
    rows[6] = rng.normal(size=len(OWNER))
    return rows


def whole_count(form, rows, free):
    """The negative eigenvalues of the whole matrix with its penalty."""
    rows = rows[:, free] / np.linalg.norm(rows[:, free], axis=1, keepdims=True)
    return int((np.linalg.eigvalsh(form[np.ix_(free, free)] + rows.T @ rows / PENALTY) < 0).sum())


@pytest.mark.parametrize("ends", [1.0, -3.0, -10.0, -100.0])
@pytest.mark.parametrize("seed", range(5))
def test_the_count_is_that_of_the_whole_matrix(seed, ends):
    form, rows = curved(seed, ends=ends), bound(seed + 100)
    owner = np.where(np.isin(np.arange(len(OWNER)), [0, 2, 9]), FIXED, OWNER)
    assert count_negative(form, rows, owner, PENALTY, NOISE) == whole_count(form, rows, owner != FIXED)


def test_there_are_negative_directions_among_these():
    assert whole_count(curved(0, ends=-100.0), bound(100), OWNER != FIXED) > 0


def test_rows_that_couple_everything_take_a_direction_away():
    form = curved(1) - 50 * np.diag(OWNER == SHARED)
    rows = np.zeros((1, len(OWNER)))
    free = OWNER != FIXED
    without = count_negative(form, rows, OWNER, PENALTY, NOISE)
    rows[0] = np.linalg.eigh(form)[1][:, 0]
    assert count_negative(form, rows, OWNER, PENALTY, NOISE) == whole_count(form, rows, free) == without - 1


@pytest.mark.parametrize("inside", [[5], [1, 2, 9], [8, 9, 10, 11]])
@pytest.mark.parametrize("seed", range(3))
def test_negative_directions_inside_of_intervals_count_too(seed, inside):
    form, rows = curved(seed), bound(seed + 100)
    form[inside, inside] -= 400.0
    assert count_negative(form, rows, OWNER, PENALTY, NOISE) == whole_count(form, rows, OWNER != FIXED)
    assert count_negative(form, rows[:0], OWNER, PENALTY, NOISE) == whole_count(form, rows[:0], OWNER != FIXED) > 0


def test_an_inside_that_is_singular_is_left_to_others():
    form = curved(2) - 20.0 * np.diag(OWNER == 1)
    block = np.ix_(OWNER == 1, OWNER == 1)
    pivots, vectors = np.linalg.eigh(form[block])
    form[block] -= pivots[-1] * np.outer(vectors[:, -1], vectors[:, -1])
    assert count_negative(form, np.zeros((0, len(OWNER))), OWNER, PENALTY, NOISE) is None


def test_factors_that_are_off_prove_nothing():
    assert count_negative(curved(3), bound(3), OWNER, PENALTY, 0.0) is None


@pytest.mark.parametrize("owner", [np.full(3, SHARED), np.zeros(3, dtype=int), np.full(3, FIXED)],
                         ids=("ends only", "one interval", "nothing"))  # fmt: skip
def test_any_of_the_kinds_may_be_missing(owner):
    assert count_negative(np.eye(3), np.ones((1, 3)), owner, PENALTY, NOISE) == 0


def test_a_pivot_that_rounding_errors_may_have_made_is_not_counted():
    form = curved(4)
    last = np.linalg.inv(form)[-1, -1]
    form[-1, -1] -= 1 / last  # exactly singular
    assert count_negative(form, np.zeros((0, len(OWNER))), OWNER, PENALTY, NOISE) is None
