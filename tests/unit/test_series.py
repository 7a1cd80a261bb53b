"""Truncated series against closed expansions."""

from __future__ import annotations

import math

import numpy as np
import pytest

from materials.common import series

X = series.variable(0.3, 8)


@pytest.mark.parametrize(
    ("made", "derivative"),
    [
        (series.reciprocal(X), lambda k: (-1) ** k * math.factorial(k) / 0.3 ** (k + 1)),
        (series.power(X, 2.5), lambda k: math.prod(2.5 - i for i in range(k)) * 0.3 ** (2.5 - k)),
        (series.sqrt(series.multiply(X, X)), lambda k: [0.3, 1.0][k] if k < 2 else 0.0),
    ],
    ids=["reciprocal", "power", "sqrt of square"],
)  # fmt: skip
def test_derivatives(made, derivative):
    expected = [derivative(k) for k in range(9)]
    np.testing.assert_allclose(series.derivatives(made), expected, rtol=1e-12, atol=1e-9)


def test_series_axis_stays_in_front_when_shapes_broadcast():
    a = np.arange(6.0).reshape(3, 2)  # order 2, two points
    b = np.array([1.0, 2.0, 0.0])  # order 2, scalar
    out = series.multiply(b, a)
    assert out.shape == (3, 2)
    np.testing.assert_allclose(out[1], a[1] + 2.0 * a[0])


def test_evaluate_sums_the_polynomial():
    assert series.evaluate(np.array([1.0, 2.0, 3.0]), 0.5) == 1.0 + 1.0 + 0.75


def test_divide_undoes_multiply():
    rng = np.random.default_rng(1)
    a, b = rng.uniform(0.5, 1.5, (2, 6, 4))
    np.testing.assert_allclose(series.divide(series.multiply(a, b), b), a, rtol=1e-10)
