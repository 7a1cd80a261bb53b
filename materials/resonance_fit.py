"""Least-squares fit of a sum of resonances to measured indices.

The model is n^2 = 1 - C l^2/(1 - v l^2) + sum A_i/(1 - u_i l^-2), which is the Sellmeier
form n^2 = 1 + sum A l^2/(l^2 - B^2) with u = B^2 for the resonances below the window and
v = 1/B^2, C = A/B^2 for one above it. Written so, a pole that runs off to zero or to
infinite wavelength ends at u = 0 (a constant) or v = 0 (-C l^2), ordinary points.

All A and C are >= 0 and no pole lies inside the window. For given poles the strengths
follow from a linear problem, so a coarse grid over the poles alone gives safe starts; the
best few are then refined in all constants together.

References
----------
G. H. Golub and V. Pereyra, SIAM J. Numer. Anal. 10, 413 (1973), for the separation into
linear and nonlinear constants. R. E. Kass and A. E. Raftery, J. Am. Stat. Assoc. 90, 773
(1995), for the Bayesian information criterion and what difference counts as strong.
"""

from __future__ import annotations

import itertools
import math
from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
from scipy.optimize import least_squares, nnls

#: A further term must lower the information criterion by this much ("very strong").
_STRONG_EVIDENCE = 10.0

#: Structures of less posterior weight than this are forgotten.
_SMALLEST_WEIGHT = 1e-4

#: Poles keep this relative distance from the window.
_MARGIN = 1e-3

#: Starting poles: below the window as fractions of its lower end, above as multiples of
#: its upper end.
_NEAR_STARTS = (0.03, 0.1, 0.18, 0.28, 0.4, 0.55, 0.72, 0.9)
_FAR_STARTS = (1.1, 1.4, 2.0, 3.5, 8.0, 30.0)

#: Residuals of an index below this are rounding of the arithmetic.
_ROUNDING = 1e-13

#: How many of the best starts are refined.
_REFINED_STARTS = 4

#: Evaluations spent on each of those, on the best of them, and on the structure chosen
#: (each pass scales the constants afresh, which shortens a long narrow valley).
_FIRST_PASS = 40
_SECOND_PASS = 200
_LAST_PASS = 2000


@dataclass(frozen=True, slots=True)
class Structure:
    """Which terms a fit has: free poles below, a constant (pole at 0), the part above."""

    near: int
    background: bool
    far: str  # "none", "limit" (-C l^2) or "pole"

    @property
    def terms(self) -> int:
        return self.near + self.background + (self.far != "none")

    @property
    def parameters(self) -> int:
        return 2 * self.near + self.background + {"none": 0, "limit": 1, "pole": 2}[self.far]

    def free(self) -> np.ndarray:
        """Which of (C, v, A1, u1, A2, u2, ...) are fitted; the others are 0."""
        mask = [self.far != "none", self.far == "pole", *([True, True] * self.near)]
        return np.array(mask + [True, False] * self.background)


@dataclass(frozen=True, slots=True, eq=False)
class ResonanceFit:
    """A fit: coefficients of the formula ``fitted_resonances`` and what they rest on.

    Attributes
    ----------
    residual : ndarray, shape (points,)
        Fitted index minus measured index.
    chi_square : float
        Sum of squares of residual/sigma.
    root : ndarray, shape (n_coefficients, n_params)
        Root of the covariance of the coefficients, if sigma is right and the errors are
        independent.
    criterion : float
        Bayesian information criterion; less is better.
    alternatives : tuple of (float, ndarray)
        Other structures that the points do not rule out: posterior weight, coefficients.
    """

    coefficients: np.ndarray
    structure: Structure
    residual: np.ndarray
    chi_square: float
    root: np.ndarray
    criterion: float
    alternatives: tuple[tuple[float, np.ndarray], ...] = ()


def structures(terms: int) -> list[Structure]:
    """All structures of a number of terms, at least one free pole below the window."""
    out = []
    for far, background in itertools.product(("none", "limit", "pole"), (False, True)):
        near = terms - background - (far != "none")
        if near >= 1:
            out.append(Structure(near, background, far))
    return out


def permittivity(coefficients: np.ndarray, inverse_square: np.ndarray) -> np.ndarray:
    """n^2 at l^-2 = ``inverse_square`` (1/um^2)."""
    c = coefficients
    total = 1.0 - c[0] / (inverse_square - c[1])
    for strength, pole in zip(c[2::2], c[3::2], strict=True):
        total = total + strength / (1.0 - pole * inverse_square)
    return total


def _gradient(coefficients: np.ndarray, s: np.ndarray) -> np.ndarray:
    """Derivatives of n^2, shape (points, n_coefficients)."""
    c = coefficients
    far = 1.0 / (s - c[1])
    columns = [-far, -c[0] * far**2]
    for strength, pole in zip(c[2::2], c[3::2], strict=True):
        near = 1.0 / (1.0 - pole * s)
        columns += [near, strength * s * near**2]
    return np.stack(columns, axis=1)


class _Problem:
    """Points and weights of one fit, and the functions a solver needs."""

    def __init__(self, wavelength_um: np.ndarray, index: np.ndarray, sigma: np.ndarray):
        self.s = wavelength_um**-2.0
        self.index = index
        self.sigma = sigma
        self.near_limit = ((1.0 - _MARGIN) * wavelength_um.min()) ** 2
        self.far_limit = ((1.0 + _MARGIN) * wavelength_um.max()) ** -2.0
        self.shortest, self.longest = wavelength_um.min(), wavelength_um.max()

    def starts(self, structure: Structure) -> list[np.ndarray]:
        """Full coefficient vectors on the grid of poles, best first."""
        near = [(f * self.shortest) ** 2 for f in _NEAR_STARTS]
        far = [0.0]
        if structure.far == "pole":
            far = [(f * self.longest) ** -2.0 for f in _FAR_STARTS]
        found = []
        for poles in itertools.combinations(near, structure.near):
            found += [self._strengths(structure, poles, v) for v in far]
        found.sort(key=lambda pair: pair[0])
        return [coefficients for _, coefficients in found[:_REFINED_STARTS]]

    def _strengths(
        self, structure: Structure, poles: Sequence[float], v: float
    ) -> tuple[float, np.ndarray]:
        """Misfit and coefficients with the best strengths for given poles."""
        all_poles = [*poles, 0.0] if structure.background else list(poles)
        weight = 1.0 / (2.0 * self.index * self.sigma)
        columns = [1.0 / (1.0 - u * self.s) for u in all_poles]
        if structure.far != "none":
            columns.append(-1.0 / (self.s - v))
        matrix = np.stack(columns, axis=1) * weight[:, None]
        scale = np.linalg.norm(matrix, axis=0)
        strengths, misfit = nnls(matrix / scale, weight * (self.index**2 - 1.0))
        strengths = strengths / scale
        out = np.zeros(2 + 2 * len(all_poles))
        if structure.far != "none":
            out[0], out[1] = strengths[-1], v
        out[2::2] = strengths[: len(all_poles)]
        out[3::2] = all_poles
        return misfit, out

    def residual(self, coefficients: np.ndarray) -> np.ndarray:
        eps = np.maximum(permittivity(coefficients, self.s), 1e-6)
        return (np.sqrt(eps) - self.index) / self.sigma

    def jacobian(self, coefficients: np.ndarray) -> np.ndarray:
        eps = np.maximum(permittivity(coefficients, self.s), 1e-6)
        return _gradient(coefficients, self.s) / (2.0 * np.sqrt(eps) * self.sigma)[:, None]

    def refine(self, structure: Structure, start: np.ndarray, evaluations: int) -> np.ndarray:
        """Coefficients of the local optimum from ``start``, as far as the budget allows."""
        free = structure.free()
        upper = np.full(start.size, np.inf)
        upper[1] = self.far_limit
        upper[3::2] = self.near_limit
        scale = np.maximum(np.abs(start), 1e-12)[free]

        def full(x: np.ndarray) -> np.ndarray:
            out = np.zeros_like(start)
            out[free] = x * scale
            return out

        result = least_squares(
            lambda x: self.residual(full(x)),
            np.clip(start[free], 1e-9 * scale, 0.999999 * upper[free]) / scale,
            jac=lambda x: self.jacobian(full(x))[:, free] * scale,
            bounds=(0.0, upper[free] / scale),
            x_scale="jac",
            ftol=1e-15,
            xtol=1e-15,
            gtol=1e-15,
            max_nfev=evaluations,
        )
        return full(result.x)


def fit(
    wavelength_um: np.ndarray,
    index: np.ndarray,
    sigma: np.ndarray | None = None,
    terms: int | None = None,
) -> ResonanceFit:
    """Best fit with ``terms`` resonances, or with as many of 1 to 3 as the points warrant.

    Parameters
    ----------
    wavelength_um, index : ndarray of float, shape (points,)
    sigma : ndarray of float, shape (points,), optional
        Standard deviation of each index. Without it all points weigh the same.
    terms : int, optional
        A further term is taken only where it lowers the information criterion by 10.
    """
    known = sigma is not None
    problem = _Problem(wavelength_um, index, np.ones_like(index) if sigma is None else sigma)
    wanted = (1, 2, 3) if terms is None else (terms,)
    tried = [_all(problem, t, known) for t in wanted]
    best, *richer = (min(fits, key=lambda f: f.criterion) for fits in tried if fits)
    for candidate in richer:
        if candidate.criterion < best.criterion - _STRONG_EVIDENCE:
            best = candidate
    final = problem.refine(best.structure, best.coefficients, _LAST_PASS)
    chosen = _summary(problem, best.structure, final, known)
    others = [f for fits in tried for f in fits if f is not best]
    return replace(chosen, alternatives=_weighted(chosen, others))


def _weighted(
    chosen: ResonanceFit, others: list[ResonanceFit]
) -> tuple[tuple[float, np.ndarray], ...]:
    """Posterior weights of the other structures, exp(-criterion/2) normalised; small ones left out.

    A richer structure that contains the chosen one has its own optimum, so the distance
    between the two says how far the choice itself may be off.
    """
    evidence = np.array([chosen.criterion, *(f.criterion for f in others)])
    weight = np.exp(-0.5 * (evidence - evidence.min()))
    weight /= weight.sum()
    pairs = zip(weight[1:], others, strict=True)
    return tuple((float(w), f.coefficients) for w, f in pairs if w > _SMALLEST_WEIGHT)


def _enough(structure: Structure, points: int) -> bool:
    """Two points more than constants, so that the residual says something."""
    return points >= structure.parameters + 2


def _all(problem: _Problem, terms: int, known_sigma: bool) -> list[ResonanceFit]:
    """Best fit of each structure of a number of terms that the points can carry."""
    fits = []
    for structure in structures(terms):
        if _enough(structure, problem.index.size):
            refined = [problem.refine(structure, c, _FIRST_PASS) for c in problem.starts(structure)]
            best = min(refined, key=lambda c: float(np.sum(problem.residual(c) ** 2)))
            best = problem.refine(structure, best, _SECOND_PASS)
            fits.append(_summary(problem, structure, best, known_sigma))
    return fits


def _summary(
    problem: _Problem, structure: Structure, coefficients: np.ndarray, known_sigma: bool
) -> ResonanceFit:
    points = problem.index.size
    scaled = problem.residual(coefficients)
    chi_square = float(scaled @ scaled)
    floor = points * _ROUNDING**2 if not known_sigma else 0.0
    misfit = chi_square if known_sigma else points * math.log(max(chi_square, floor) / points)
    free = structure.free()
    jacobian = problem.jacobian(coefficients)[:, free]
    root = np.zeros((coefficients.size, structure.parameters))
    root[free] = _covariance_root(jacobian)
    return ResonanceFit(
        coefficients=coefficients,
        structure=structure,
        residual=scaled * problem.sigma,
        chi_square=chi_square,
        root=root,
        criterion=misfit + structure.parameters * math.log(points),
    )


def _covariance_root(jacobian: np.ndarray) -> np.ndarray:
    """R with R R^T = (J^T J)^-1, by singular values of J with unit columns.

    Directions that the points do not see at all (a term of strength 0) get no variation.
    """
    norms = np.linalg.norm(jacobian, axis=0)
    norms = np.where(norms > 0.0, norms, 1.0)
    _, values, rows = np.linalg.svd(jacobian / norms, full_matrices=False)
    seen = values > _ROUNDING * values[0]
    inverse = np.where(seen, 1.0 / np.where(seen, values, 1.0), 0.0)
    return (rows.T * inverse) / norms[:, None]
