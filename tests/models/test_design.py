"""Scaled designs span what the originals span, and set aside exactly the columns that earlier ones contain."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from steelyard.datasets import Floats
from steelyard.models.design import scaled_design

N = 60


def columns(seed: int, k: int) -> Floats:
    return np.random.default_rng(seed).normal(size=(N, k))


@pytest.mark.parametrize("constant", [True, False])
@pytest.mark.parametrize("scale", [1e-8, 1e-3, 1.0, 1e6, 1e12])
def test_back_transform_is_exact(scale: float, constant: bool) -> None:
    """design @ (back @ b) = matrix @ b for any scaled coefficients."""
    design = columns(1, 4) * np.array([1.0, scale, 3.0, 1 / scale]) + np.array([0.0, scale, 5.0, 0.0])
    if constant:
        design[:, 0] = 1.0
    scaled = scaled_design(design)
    assert scaled.aliased == ()
    b = np.array([0.3, -1.2, 2.0, 0.7])
    np.testing.assert_allclose(design @ (scaled.back @ b), scaled.matrix @ b, rtol=1e-12, atol=1e-12)


@pytest.mark.parametrize("scale", [1e-8, 1.0, 1e12])
def test_columns_have_mean_0_and_spread_1(scale: float) -> None:
    design = np.column_stack([np.ones(N), scale * (columns(2, 3) + 7.0)])
    matrix = scaled_design(design).matrix
    np.testing.assert_array_equal(matrix[:, 0], 1.0)
    np.testing.assert_allclose(matrix[:, 1:].mean(axis=0), 0.0, atol=1e-13)
    np.testing.assert_allclose(matrix[:, 1:].std(axis=0), 1.0, rtol=1e-13)


def test_without_a_constant_nothing_is_centred() -> None:
    """Centring would add a constant that the model has not got."""
    design = columns(3, 2) + 10.0
    scaled = scaled_design(design)
    np.testing.assert_allclose(scaled.matrix, design / np.sqrt((design**2).mean(axis=0)), rtol=1e-14)
    # Without a constant a constant column is a column like any other, wherever it stands.
    assert scaled_design(np.column_stack([design, np.full(N, 3.0)])).aliased == ()


def test_the_first_of_two_equal_columns_is_kept() -> None:
    a, b = columns(4, 2).T
    one = np.ones(N)
    assert scaled_design(np.column_stack([one, a, b, a])).aliased == (3,)
    assert scaled_design(np.column_stack([one, a, a, b])).aliased == (2,)
    assert scaled_design(np.column_stack([one, a, -2.5 * a + 4.0, b])).aliased == (2,)


@pytest.mark.parametrize("scale", [1e-8, 1e-3, 1.0, 1e9, 1e12])
def test_sums_and_multiples_are_set_aside_at_any_scale(scale: float) -> None:
    a, b = columns(5, 2).T * scale
    one = np.ones(N)
    assert scaled_design(np.column_stack([one, a, b, a + b, a - 3 * b, 2 * a])).aliased == (3, 4, 5)
    assert scaled_design(np.column_stack([one, a, b, a * b])).aliased == ()


@pytest.mark.parametrize("value", [0.0, 1.0, -3.0, 0.1, 1e-300, 1e12, 1 / 3])
def test_constant_columns_are_set_aside(value: float) -> None:
    design = np.column_stack([np.ones(N), columns(6, 1), np.full(N, value)])
    scaled = scaled_design(design)
    assert scaled.aliased == (2,)
    np.testing.assert_array_equal(scaled.back[2], 0.0)


def test_dummies_that_add_up_to_the_constant() -> None:
    group = np.arange(N) % 4
    dummies = (group[:, None] == np.arange(4)).astype(float)
    assert scaled_design(np.column_stack([np.ones(N), dummies])).aliased == (4,)
    # Without the constant all four stay.
    assert scaled_design(dummies).aliased == ()
    # Two sets of dummies: each loses one.
    other = (np.arange(N)[:, None] // 20 == np.arange(3)).astype(float)
    assert scaled_design(np.column_stack([np.ones(N), dummies, other])).aliased == (4, 7)


def test_a_zero_column_without_constant_is_set_aside() -> None:
    assert scaled_design(np.column_stack([columns(7, 1), np.zeros(N)])).aliased == (1,)


@pytest.mark.parametrize("offset", [2030.0, 1e6, 1e9])
def test_columns_far_from_zero(offset: float) -> None:
    """A spread of 1 on a level of 1e9 keeps seven digits: the column stays, and its copies go.

    A sum of two such columns is rounded to about 1e-7, far above 1e-9 of its spread: it must go all the same.
    """
    a, b, c = columns(8, 3).T + offset
    one = np.ones(N)
    assert scaled_design(np.column_stack([one, a, b, c])).aliased == ()
    assert scaled_design(np.column_stack([one, a, b, a + b])).aliased == (3,)
    assert scaled_design(np.column_stack([one, a, 0.3 * a, b])).aliased == (2,)
    near = columns(9, 1)[:, 0]
    assert scaled_design(np.column_stack([one, near + offset, near])).aliased == (2,)
    assert scaled_design(np.column_stack([one, near, near + offset])).aliased == (2,)


def test_nearly_equal_columns_are_both_kept() -> None:
    """A difference of 1e-6 of the spread is data, not rounding."""
    a, noise = columns(10, 2).T
    assert scaled_design(np.column_stack([np.ones(N), a, a + 1e-6 * noise])).aliased == ()
    assert scaled_design(np.column_stack([np.ones(N), a, a + 1e-12 * noise])).aliased == (2,)


def test_more_columns_than_rows() -> None:
    scaled = scaled_design(columns(11, 5)[:3])
    assert scaled.aliased == (3, 4)
    assert scaled.matrix.shape == (3, 3)


@given(
    st.integers(0, 10_000),
    st.lists(st.integers(-2, 2), min_size=9, max_size=9),
    st.lists(st.sampled_from([1e-8, 1e-2, 1.0, 1e5, 1e12]), min_size=6, max_size=6),
)
def test_kept_columns_are_a_basis(seed: int, mixing: list[int], scales: list[float]) -> None:
    """Whatever whole-number mixtures follow three free columns, rank and span are those of exact arithmetic."""
    free = np.random.default_rng(seed).integers(-5, 6, size=(N, 3)).astype(float)
    mixed = free @ np.array(mixing, dtype=float).reshape(3, 3)
    exact = np.column_stack([np.ones(N), free, mixed])
    scaled = scaled_design(exact * np.array([1.0, *scales]))
    assert len(scaled.kept) == np.linalg.matrix_rank(exact)
    rest = exact - scaled.matrix @ np.linalg.lstsq(scaled.matrix, exact, rcond=None)[0]
    assert np.abs(rest).max() < 1e-9
