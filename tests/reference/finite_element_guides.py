"""Channels and ribs solved with the finite elements of ``finite_elements``, for the tests.

A guide is a table of regions between grid walls. Its mode is found in one symmetry class, and
the eigenvalue is expanded exactly in k0 = omega/c, so that group index and GVD are those of the
discrete problem without differencing. Lengths in um, k0 in rad/um.
"""

from __future__ import annotations

import itertools
import math
from collections.abc import Callable, Mapping
from dataclasses import dataclass, replace

import numpy as np
from numpy.polynomial import Chebyshev
from reference.finite_elements import ELECTRIC, MAGNETIC, Pencil

C_UM_PER_PS = 299.792458
Index = float | Callable[[float], float]


@dataclass(frozen=True)
class Guide:
    """Rectangles: ``regions[row][column]`` between the walls, margins outside the last ones.

    ``x_walls`` starts with the mirror plane x = 0. If ``mirror_y``, ``y_walls`` starts with a
    mirror plane too, and the bottom margin is absent. ``singular_y`` tells which of ``y_walls``
    meet a corner.
    """

    x_walls: tuple[float, ...]
    y_walls: tuple[float, ...]
    regions: tuple[tuple[str, ...], ...]
    singular_y: tuple[bool, ...]
    mirror_y: bool = False


def channel(width: float, height: float, slab: float = 0.0, *, mirror_y: bool = False) -> Guide:
    """Half of a channel or rib with regions "core", "substrate" and "cladding"."""
    half, sub, core, clad = width / 2, "substrate", "core", "cladding"
    if mirror_y:
        walls, rows = (height / 2, height), ((core, clad), (clad, clad))
        return Guide((0.0, half), walls, rows, (False, True), True)
    if slab > 0:
        rows = ((sub, sub), (core, core), (core, clad), (clad, clad))
        return Guide((0.0, half), (0.0, slab, height), rows, (False, True, True))
    rows = ((sub, sub), (core, clad), (clad, clad))
    return Guide((0.0, half), (0.0, height), rows, (True, True))


@dataclass(frozen=True)
class Resolution:
    """Order, and how the mesh is graded.

    layers : elements added towards a corner, each ``ratio`` times the one before;
    step : first element of a margin, um; growth : ratio of successive ones;
    margin_x, margin_y : margins, um (y: below, above); widest : largest element anywhere, um.
    """

    order: int = 6
    layers: int = 8
    ratio: float = 0.3
    step: float = 0.15
    growth: float = 2.0
    margin_x: float = 3.5
    margin_y: tuple[float, float] = (3.5, 3.5)
    widest: float = 0.8


#: The cheapest meshes found by a scan of some hundred that bring TE0 of a core in 1.444 at 1.55 um
#: to the accuracy named, half the section modelled: 2.0, 1.6 x 0.8 um, to 1e-7 (3033 unknowns),
#: and 3.48, 0.5 x 0.22 um, to 5e-7 (3033). They profit from errors of opposite sign; meshes that
#: need no such luck have 4800 and 8800 unknowns and take half as long again and twice as long.
CHEAPEST = {
    "nitride": Resolution(4, 1, 0.12, 0.3, 2.0, 1.8, (1.8, 1.8), 2.0),
    "silicon": Resolution(4, 1, 0.10, 0.15, 3.0, 1.7, (1.7, 1.7), 2.0),
}


def _between(a: float, b: float, low: bool, high: bool, res: Resolution) -> np.ndarray:
    """Grid lines from a to b, refined towards the ends that are ``low``, ``high`` singular."""
    span = (b - a) / 2 if low and high else b - a
    fine = span * res.ratio ** np.arange(res.layers, 0, -1)
    left, right = (a + fine if low else fine[:0]), (b - fine[::-1] if high else fine[:0])
    lo, hi = (left[-1] if low else a), (right[0] if high else b)
    inner = np.linspace(lo, hi, math.ceil((hi - lo) / res.widest - 1e-9) + 1)[1:-1]
    return np.concatenate([[a], left, inner, right, [b]])


def _outside(margin: float, singular: bool, res: Resolution) -> np.ndarray:
    """Distances from a wall out to ``margin``, the wall itself left out."""
    fine = res.step * res.ratio ** np.arange(res.layers, 0, -1) if singular else np.empty(0)
    coarse, size = [res.step], res.step
    while coarse[-1] < margin:
        size = min(size * res.growth, res.widest)
        coarse.append(coarse[-1] + size)
    coarse = np.array(coarse) - res.step
    return np.concatenate([fine, res.step + coarse * (margin - res.step) / coarse[-1]])


def grid(guide: Guide, res: Resolution) -> tuple[np.ndarray, np.ndarray]:
    """Grid lines along x and y."""
    xw, yw, sing = guide.x_walls, guide.y_walls, guide.singular_y
    x = [_between(a, b, i > 0, True, res) for i, (a, b) in enumerate(itertools.pairwise(xw))]
    x.append(xw[-1] + _outside(res.margin_x, True, res))
    y = [
        _between(a, b, sing[i], sing[i + 1], res) for i, (a, b) in enumerate(itertools.pairwise(yw))
    ]
    if not guide.mirror_y:
        y.insert(0, yw[0] - _outside(res.margin_y[0], sing[0], res)[::-1])
    y.append(yw[-1] + _outside(res.margin_y[1], sing[-1], res))
    return np.unique(np.concatenate(x)), np.unique(np.concatenate(y))


def weight_series(index: Index, k0: float, order: int) -> np.ndarray:
    """Taylor coefficients of k0^2 n^2 in k0, shape (order + 1,).

    A medium's are those of its Chebyshev interpolant over +-12 % of k0 (19 nodes), so that
    they owe nothing to the series of the package under test.
    """
    if not callable(index):
        series = np.zeros(max(order, 2) + 1)
        series[:3] = index**2 * np.array([k0**2, 2 * k0, 1.0])
        return series[: order + 1]
    square = np.vectorize(lambda k: (k * index(2 * math.pi / k)) ** 2)
    poly = Chebyshev.interpolate(square, 18, domain=[0.88 * k0, 1.12 * k0])
    terms = [poly(k0)] + [poly.deriv(j)(k0) / math.factorial(j) for j in range(1, order + 1)]
    return np.array(terms)


@dataclass(frozen=True, eq=False)
class GuidedMode:
    """One mode: its dispersion at one wavelength and its vector on the mesh."""

    wavelength_um: float
    beta: np.ndarray  # d^k beta / d k0^k, k = 0, 1, ...
    pencil: Pencil
    vector: np.ndarray
    index: np.ndarray  # refractive index per element
    region: np.ndarray  # region name per element
    residual: float
    x_fraction: float
    copies: int  # how many times the modelled part makes the whole cross-section

    @property
    def n_eff(self) -> float:
        """Effective index."""
        return float(self.beta[0] * self.wavelength_um / (2 * math.pi))

    @property
    def n_group(self) -> float:
        """Group index."""
        return float(self.beta[1])

    def beta_ps_per_km(self, k: int) -> float:
        """beta_k = d^k beta/d omega^k in ps^k/km."""
        return float(self.beta[k] / C_UM_PER_PS**k * 1e9)


def _project(vec, mode, n_mode):
    return vec - mode * (n_mode @ vec)


def _solve_singular(pencil, factor, weight, lam, mode, n_mode, rhs):
    """z with (K - lam N) z = rhs and mode^T N z = 0, from a factorisation near ``lam``."""
    z = np.zeros(pencil.size)
    for _ in range(30):
        old = z
        step = rhs + (lam - factor.sigma) * pencil.apply_n(weight, z)
        z = _project(factor.solve(step), mode, n_mode)
        if np.linalg.norm(z - old) <= 1e-13 * np.linalg.norm(z):
            break
    return z


def eigenvalue_series(pencil: Pencil, weights, lam: float, mode, order: int):
    """Taylor coefficients of lambda in k0, from the matrices' own series (symmetric pencil).

    With (K - lambda N) x = 0 expanded in k0: r_k is the sum of all known terms of order k,
    lambda_k = x_0^T r_k, (K_0 - lambda_0 N_0) x_k = -(r_k - lambda_k N_0 x_0). Returns the
    coefficients, the mode normalised to x^T N x = 1 and the relative residual.
    """
    w0 = weights[0]
    factor = pencil.factorise(w0, lam * (1 + 2e-4))
    for _ in range(3):
        mode = factor.solve(pencil.apply_n(w0, mode))
        n_mode = pencil.apply_n(w0, mode)
        scale = mode @ n_mode
        mode, n_mode = mode / math.sqrt(scale), n_mode / math.sqrt(scale)
        lam = mode @ pencil.apply_k(w0, mode)
    bad = factor.solve(pencil.apply_k(w0, mode) - lam * n_mode)
    residual = np.linalg.norm(_project(bad, mode, n_mode)) / np.linalg.norm(mode)

    def n_term(j, vec):
        return pencil.apply_n(weights[j], vec, fixed=j == 0)

    lams, vecs = [lam], [mode]
    for k in range(1, order + 1):
        r = np.zeros(pencil.size)
        for j in range(k + 1):
            if j > 0:
                r += pencil.apply_k(weights[j], vecs[k - j], curl=False)
            for i in range(k - j + 1):
                m = k - i - j
                if i < k and m < k:
                    r -= lams[i] * n_term(j, vecs[m])
        lams.append(mode @ r)
        if k < order:
            rhs = -(r - lams[k] * n_mode)
            vecs.append(_solve_singular(pencil, factor, w0, lam, mode, n_mode, rhs))
    return np.array(lams), mode, residual


def _beta_derivatives(lams: np.ndarray) -> np.ndarray:
    """Derivatives of sqrt(lambda) from its Taylor coefficients."""
    b = [math.sqrt(lams[0])]
    for k in range(1, len(lams)):
        b.append((lams[k] - sum(b[j] * b[k - j] for j in range(1, k))) / (2 * b[0]))
    return np.array([c * math.factorial(k) for k, c in enumerate(b)])


def pencil_of(guide: Guide, polarisation: str, res: Resolution) -> tuple[Pencil, np.ndarray]:
    """Pencil in the symmetry class of the lowest "TE" or "TM" mode; region name per element."""
    x, y = grid(guide, res)
    te = polarisation == "TE"
    bottom = (MAGNETIC if te else ELECTRIC) if guide.mirror_y else ELECTRIC
    pencil = Pencil(x, y, res.order, (ELECTRIC if te else MAGNETIC, ELECTRIC, bottom, ELECTRIC))
    column = np.searchsorted(guide.x_walls[1:], (x[1:] + x[:-1]) / 2)
    walls = guide.y_walls[1:] if guide.mirror_y else guide.y_walls
    row = np.searchsorted(walls, (y[1:] + y[:-1]) / 2)
    names = np.array(guide.regions)
    return pencil, names[np.repeat(row, len(column)), np.tile(column, len(row))]


def _find(guide, media, k0, polarisation, res, guess, rtol=1e-12):
    """(lambda, vector, share of Ex, pencil, regions) of TE0 or TM0, by Arnoldi iteration."""
    pencil, region = pencil_of(guide, polarisation, res)
    square = {name: weight_series(media[name], k0, 0)[0] for name in np.unique(region)}
    weight = np.array([square[name] for name in region])
    top = (guess * k0) ** 2 if guess else weight.max()
    lams, vecs = pencil.eigenpairs(weight, top, 2 if guess else 5, rtol)
    for lam, vec in zip(lams, vecs.T, strict=True):
        f = pencil.fields(vec, 2 * res.order + 1)
        parts = [(f[c] ** 2 * f["area"]).sum() for c in ("ex", "ey")]
        fraction = parts[0] / sum(parts)
        if lam > 0 and (fraction >= 0.5) == (polarisation == "TE"):
            return lam, vec, float(fraction), pencil, region
    raise RuntimeError("no mode of this polarisation among those found")


def lowest_mode(
    guide: Guide,
    media: Mapping[str, Index],
    wavelength_um: float,
    polarisation: str,
    res: Resolution,
    *,
    derivatives: int = 2,
    guess: float | None = None,
) -> GuidedMode:
    """TE0 or TM0 of ``guide``: the highest mode of its class with that main field.

    Parameters
    ----------
    media : mapping of region name to an index or a function of the wavelength in um
    derivatives : highest derivative of beta wanted
    guess : an index close to n_eff from above, to start the search from
    """
    k0 = 2 * math.pi / wavelength_um
    lam, vec, fraction, pencil, region = _find(guide, media, k0, polarisation, res, guess)
    series = {name: weight_series(media[name], k0, derivatives) for name in np.unique(region)}
    weights = np.array([series[name] for name in region]).T
    lam_series, mode, residual = eigenvalue_series(pencil, weights, lam, vec, derivatives)
    beta = _beta_derivatives(lam_series)
    index = np.sqrt(weights[0]) / k0
    return GuidedMode(
        wavelength_um,
        beta,
        pencil,
        mode,
        index,
        region,
        residual,
        fraction,
        4 if guide.mirror_y else 2,
    )


def effective_index(
    guide: Guide,
    media: Mapping[str, Index],
    wavelength_um: float,
    polarisation: str,
    res: Resolution,
) -> tuple[float, Pencil]:
    """Index of TE0 or TM0 alone, as cheaply as this method gives it; and the mesh's pencil.

    A coarse mesh of order 2 finds the mode; one factorisation of the fine one with the shift
    put there, and a few passes of inverse iteration, give its index.
    """
    k0 = 2 * math.pi / wavelength_um
    coarse = replace(res, order=2, layers=1, ratio=0.2)
    near = _find(guide, media, k0, polarisation, coarse, None, rtol=1e-3)[0]
    pencil, region = pencil_of(guide, polarisation, res)
    square = {name: weight_series(media[name], k0, 0)[0] for name in np.unique(region)}
    weight = np.array([square[name] for name in region])
    lam, _ = pencil.nearest(weight, near)
    return math.sqrt(lam) / k0, pencil


def areas(mode: GuidedMode, n2_um2_per_w: Mapping[str, float] | None = None) -> dict[str, float]:
    """Areas (um^2), gamma (1/(W m)) and the weights dn_eff/dn of every region.

    h' = Z0 h = curl E/(i k0) gives (e x h').z = (beta/k0) e.(e - grad phi); e_z = i beta phi.
    The part modelled holds 1/copies of every integral.
    """
    f = mode.pencil.fields(mode.vector, 4 * mode.pencil.order + 1)
    w, k0 = f["area"] * mode.copies, 2 * math.pi / mode.wavelength_um
    transverse, along = f["ex"] ** 2 + f["ey"] ** 2, (mode.beta[0] * f["phi"]) ** 2
    sz = f["ex"] * (f["ex"] - f["gx"]) + f["ey"] * (f["ey"] - f["gy"])
    sz *= mode.beta[0] / k0
    norm, square = (sz * w).sum(), transverse + along
    out = {
        "intensity": (square * w).sum() ** 2 / (square**2 * w).sum(),
        "power": norm**2 / (sz**2 * w).sum(),
    }
    for name in np.unique(mode.region):
        part = mode.region == name
        out["weight_" + name] = (mode.index[part] @ (square * w)[part].sum(1)) / norm
    if n2_um2_per_w:
        n2 = np.array([n2_um2_per_w.get(name, 0.0) for name in mode.region])
        kerr = (2 * square**2 + (transverse - along) ** 2) / 3
        gamma = k0 * ((mode.index**2 * n2) @ (kerr * w).sum(1)) / norm**2
        out["gamma_per_w_m"] = gamma * 1e6
        out["nonlinear"] = k0 * n2_um2_per_w["core"] / gamma
    return out
