"""Truncated Taylor series: arithmetic on coefficient arrays.

A series is an ndarray whose first axis is the order: ``a[k]`` is the coefficient of
``x**k`` (1/k! included), so shape ``(order + 1, ...)``. The other axes broadcast, so
one call works on a whole grid. Everything is exact up to rounding: recurrences, never
differences.

References
----------
A. Griewank and A. Walther, Evaluating Derivatives (SIAM, 2008), chapter 13: the
recurrences for product, reciprocal, power and composition.

Examples
--------
>>> import numpy as np
>>> x = variable(2.0, 3)             # the series of x about x = 2
>>> multiply(x, x).tolist()          # (2 + h)^2
[4.0, 4.0, 1.0, 0.0]
>>> reciprocal(x).tolist()           # 1/(2 + h)
[0.5, -0.25, 0.125, -0.0625]
"""

from __future__ import annotations

import math
from typing import Any

import numpy as np


def variable(value: Any, order: int) -> np.ndarray:
    """Series of the independent variable about ``value``, shape (order + 1, ...)."""
    value = np.asarray(value, dtype=float)
    out = np.zeros((order + 1, *value.shape), dtype=value.dtype)
    out[0] = value
    if order >= 1:
        out[1] = 1.0
    return out


def constant(value: Any, order: int) -> np.ndarray:
    """Series of a constant, shape (order + 1, ...)."""
    value = np.asarray(value)
    if not np.issubdtype(value.dtype, np.complexfloating):
        value = value.astype(float)
    out = np.zeros((order + 1, *value.shape), dtype=value.dtype)
    out[0] = value
    return out


def _aligned(a: np.ndarray, b: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Pad trailing axes so that the order axes stay in front when broadcasting."""
    ndim = max(a.ndim, b.ndim)
    a = a.reshape(a.shape[0], *(1,) * (ndim - a.ndim), *a.shape[1:])
    b = b.reshape(b.shape[0], *(1,) * (ndim - b.ndim), *b.shape[1:])
    return a, b


def multiply(a: np.ndarray, b: np.ndarray) -> np.ndarray:
    """Product of two series, to the lower of their orders."""
    a, b = _aligned(np.asarray(a), np.asarray(b))
    n = min(a.shape[0], b.shape[0])
    shape = np.broadcast_shapes(a.shape[1:], b.shape[1:])
    out = np.zeros((n, *shape), dtype=np.result_type(a, b))
    for k in range(n):
        for j in range(k + 1):
            out[k] += a[j] * b[k - j]
    return out


def square(a: np.ndarray) -> np.ndarray:
    """Square of a series, no conjugate; half the work of a product."""
    a = np.asarray(a)
    out = np.zeros(a.shape, dtype=np.result_type(a, float))
    for k in range(a.shape[0]):
        for j in range((k + 1) // 2):
            out[k] += a[j] * a[k - j]
        out[k] *= 2.0
        if k % 2 == 0:
            out[k] += a[k // 2] * a[k // 2]
    return out


def reciprocal(a: np.ndarray) -> np.ndarray:
    """Series of 1/a; a[0] must not vanish."""
    a = np.asarray(a)
    out = np.zeros(a.shape, dtype=np.result_type(a, float))
    out[0] = 1.0 / a[0]
    for k in range(1, a.shape[0]):
        total = np.zeros_like(out[0])
        for j in range(1, k + 1):
            total = total + a[j] * out[k - j]
        out[k] = -total * out[0]
    return out


def divide(a: np.ndarray, b: np.ndarray) -> np.ndarray:
    """Quotient a/b of two series."""
    return multiply(a, reciprocal(b))


def power(a: np.ndarray, exponent: float) -> np.ndarray:
    """Series of a**exponent for a fixed real exponent; a[0] must not vanish.

    From a f' = exponent a' f: k a0 f_k = sum_{j=1..k} (exponent j - (k - j)) a_j f_{k-j}.
    """
    a = np.asarray(a)
    out = np.zeros(a.shape, dtype=np.result_type(a, float))
    out[0] = a[0] ** exponent
    for k in range(1, a.shape[0]):
        total = np.zeros_like(out[0])
        for j in range(1, k + 1):
            total = total + (exponent * j - (k - j)) * a[j] * out[k - j]
        out[k] = total / (k * a[0])
    return out


def sqrt(a: np.ndarray) -> np.ndarray:
    """Series of the square root, principal branch at a[0]."""
    return power(a, 0.5)


def evaluate(a: np.ndarray, step: Any) -> np.ndarray:
    """Value of the series at a distance ``step`` from its centre (Horner)."""
    a = np.asarray(a)
    out = a[-1]
    for k in range(a.shape[0] - 2, -1, -1):
        out = out * step + a[k]
    return out


def derivatives(a: np.ndarray) -> np.ndarray:
    """Derivatives from Taylor coefficients: entry k times k!."""
    a = np.asarray(a)
    factorial = np.array([math.factorial(k) for k in range(a.shape[0])], dtype=float)
    return a * factorial.reshape(-1, *(1,) * (a.ndim - 1))
