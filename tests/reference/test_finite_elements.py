"""The finite-element code that checks the mode solver, itself checked against closed forms."""

from __future__ import annotations

import math
import tomllib
from pathlib import Path

import numpy as np
import pytest
import scipy.sparse as sp
import scipy.sparse.linalg as spla
from reference.finite_element_guides import (
    CHEAPEST,
    GuidedMode,
    Resolution,
    areas,
    channel,
    effective_index,
    eigenvalue_series,
    grid,
    lowest_mode,
    weight_series,
)
from reference.finite_elements import ELECTRIC, MAGNETIC, Pencil
from skfem import BilinearForm, CellBasis, ElementTriN3, ElementTriP3, MeshTri, asm
from skfem.helpers import dot, grad

COLLIN = "R. E. Collin, Field Theory of Guided Waves (1991), partially filled rectangular guide"
SLAB = "Okamoto; Snyder and Love: characteristic equation of the three-layer slab"
AREAS = "slab TM0 integrals in closed form"


def miss(value, reference):
    """Relative error."""
    return abs(value - reference) / abs(reference)


def box_lines(a, b, d, cells):
    """Grid lines of a box a x b with an interface at y = d, even in each part."""
    return np.linspace(0, a, cells + 1), np.unique(
        np.r_[np.linspace(0, d, cells + 1), np.linspace(d, b, cells + 1)]
    )


def solve_box(a, b, d, n1, n2, wavelength, order, cells, count):
    """Eigenvalue series (to first order in k0) of the highest modes of a conducting box."""
    x, y = box_lines(a, b, d, cells)
    pencil = Pencil(x, y, order)
    k0 = 2 * math.pi / wavelength
    inner = np.repeat((y[1:] + y[:-1]) / 2, cells) < d
    series = [weight_series(n, k0, 1) for n in (n1, n2)]
    weights = np.where(inner, series[0][:, None], series[1][:, None])
    lams, vecs = pencil.eigenpairs(weights[0], (0.8 * n1 * k0) ** 2, count + 1)
    out = []
    for lam, vec in list(zip(lams, vecs.T, strict=True))[:count]:
        s, _, _ = eigenvalue_series(pencil, weights, lam, vec, 1)
        out.append((math.sqrt(s[0]) / k0, s[1] / (2 * math.sqrt(s[0]))))
    return out


BOXES = [
    (
        (0.6, 0.5, 0.2, 2.0, 1.0, 1.0),
        [
            (1.455687638679405, 2.58229202029),
            (1.191599937803505, 2.443259220934),
            (0.8517428997818957, 3.418152985423),
        ],
    ),
    (
        (0.5, 0.4, 0.22, 3.48, 1.444, 1.55),
        [(2.649009489106684, 4.465619714071), (2.372978387430036, 4.368394747796)],
    ),
]


@pytest.mark.source(COLLIN, "LSE and LSM equations, computed with 25 digits", "1e-12")
@pytest.mark.parametrize(("box", "rows"), BOXES)
def test_conducting_box(box, rows):
    found = solve_box(*box, order=7, cells=3, count=len(rows))
    for (n_eff, n_group), (ref, ref_group) in zip(found, rows, strict=True):
        # no corner: order 7 on nine or so cells leaves rounding only
        assert miss(n_eff, ref) < 2e-10
        assert miss(n_group, ref_group) < 2e-10


@pytest.mark.source(COLLIN, "LSM m = 1 of the first box", "1e-12")
@pytest.mark.parametrize("order", [2, 3, 4])
def test_box_converges_with_twice_the_order(order):
    # beta^2 is a Rayleigh quotient: its error falls as h^(2 p)
    box, rows = BOXES[0]
    errors = [miss(solve_box(*box, order, cells, 1)[0][0], rows[0][0]) for cells in (2, 4)]
    assert math.log2(errors[0] / errors[1]) == pytest.approx(2 * order, abs=0.5)


def solve_slab(d, media, polarisation, derivatives):
    """Jet of the slab's lowest mode on a strip 0.1 um wide.

    A slab's TE mode lies between electric side walls, its TM mode between magnetic ones.
    """
    wall = ELECTRIC if polarisation == "TE" else MAGNETIC
    k0 = 2 * math.pi / 1.55
    out = np.array([0.2, 0.5, 1.0, 2.0, 4.0])
    y = np.concatenate([-out[::-1], np.linspace(0, d, 3), d + out])
    pencil = Pencil([0.0, 0.1], y, 8, (wall, wall, ELECTRIC, ELECTRIC))
    mid = (y[1:] + y[:-1]) / 2
    names = np.where(mid < 0, "substrate", np.where(mid < d, "core", "cladding"))
    series = {m: weight_series(media[m], k0, derivatives) for m in set(names)}
    weights = np.array([series[m] for m in names]).T
    top = math.sqrt(weights[0].max())
    lams, vecs = pencil.eigenpairs(weights[0], top**2, 2)
    s, vec, _ = eigenvalue_series(pencil, weights, lams[0], vecs[:, 0], derivatives)
    return k0, pencil, np.sqrt(weights[0]) / k0, names, s, vec


def derivatives_of(lams):
    """n-th derivatives of the square root of a series, by polynomial arithmetic."""
    root = np.zeros(len(lams))
    root[0] = math.sqrt(lams[0])
    for k in range(1, len(lams)):
        root[k] = (lams[k] - np.dot(root[1:k], root[k - 1 : 0 : -1])) / (2 * root[0])
    return [c * math.factorial(k) for k, c in enumerate(root)]


def sellmeier(terms):
    """n(lambda) from (B, C) pairs, n^2 = 1 + sum B lambda^2/(lambda^2 - C^2)."""
    return lambda w: math.sqrt(1 + sum(b * w * w / (w * w - c * c) for b, c in terms))


SILICA = sellmeier([(0.6961663, 0.0684043), (0.4079426, 0.1162414), (0.8974794, 9.896161)])
NITRIDE = sellmeier([(3.0249, 0.1353406), (40314.0, 1239.842)])
SILICON = sellmeier([(10.6684293, 0.301516485), (0.0030434748, 1.13475115), (1.54133408, 1104.0)])


@pytest.mark.source(SLAB, "dispersive rows, 25 digits, 8th-order stencil", "1e-9 or better")
@pytest.mark.parametrize(
    ("core", "d", "polarisation", "n_eff", "n_group", "dispersion", "beta3", "beta4"),
    [
        (
            SILICON, 0.22, "TE", 2.849489467429103, 3.70669351037895,
            -1469.487789, -1.301878, 0.01161247,
        ),
        (
            SILICON, 0.22, "TM", 2.054618547356907, 3.97575382401877,
            -10256.39719, -55.24982, -0.0919855,
        ),
        (
            NITRIDE, 0.80, "TE", 1.883832236046577, 2.08066118762045,
            -11.86403243, -0.0321068, 0.00091614,
        ),
        (
            NITRIDE, 0.80, "TM", 1.844915465669867, 2.11961026620283,
            45.21368156, -0.4004446, 0.00410381,
        ),
    ],
)  # fmt: skip
def test_slab_dispersion(core, d, polarisation, n_eff, n_group, dispersion, beta3, beta4):
    media = {"core": core, "substrate": SILICA, "cladding": SILICA}
    k0, *_, series, _ = solve_slab(d, media, polarisation, 4)
    beta = derivatives_of(series)
    c, wavelength = 299.792458, 1.55
    beta2 = beta[2] / c**2 * 1e9
    # budget: the elements leave 1e-12, margins of 4 um exp(-2 * 4 * 4.7) = 5e-17; for the
    # rest the last printed digit (n_g agrees beyond it), for D also 1e-9 from the interpolant
    assert miss(beta[0] / k0, n_eff) < 5e-12
    assert miss(beta[1], n_group) < 1e-11
    assert abs(-2e-3 * math.pi * c * beta2 / wavelength**2 - dispersion) < 5e-7 + 2e-9 * abs(beta2)
    assert abs(beta[3] / c**3 * 1e9 - beta3) < 1e-6 + 1e-7 * abs(beta3)
    assert abs(beta[4] / c**4 * 1e9 - beta4) < 1e-7 + 1e-6 * abs(beta4)


@pytest.mark.source(AREAS, "width x gamma, dn_eff/dn of slab TM0 .22, 3.48/1.444", "10 digits")
def test_areas_and_gamma_of_a_slab():
    width = 0.1
    media = {"core": 3.48, "substrate": 1.444, "cladding": 1.444}
    _, pencil, index, names, s, vec = solve_slab(0.22, media, "TM", 1)
    beta = np.array(derivatives_of(s))
    mode = GuidedMode(1.55, beta, pencil, vec, index, names, 0.0, 0.0, copies=1)
    n2 = {"core": 1e-6, "substrate": 1e-7, "cladding": 1e-7}
    found = areas(mode, n2)
    assert miss(found["intensity"] / width, 0.51341007872) < 1e-9
    assert miss(found["power"] / width, 0.4125942704) < 1e-9
    assert miss(found["nonlinear"] / width, 0.44560703836) < 1e-9
    core_only = areas(mode, {"core": 1e-6})
    assert miss(core_only["nonlinear"] / width, 0.48085688373) < 1e-9
    # 1e-6 um^2/W over 1 um^2 is 1e-6/(W um), that is 1/(W m)
    assert miss(core_only["gamma_per_w_m"] * width, 2 * math.pi / 1.55 / 0.48085688373) < 1e-9
    assert miss(found["weight_core"], 0.74363905841) < 1e-9
    outer = found["weight_substrate"] + found["weight_cladding"]
    assert miss(outer, 0.88846190989) < 1e-9


def triangles(guide_lines, weight_of, wavelength):
    """The same eigenproblem with scikit-fem's own third-order triangles, forms and assembly."""
    mesh = MeshTri.init_tensor(*guide_lines).with_defaults()
    edge = CellBasis(mesh, ElementTriN3(), intorder=6)
    node = edge.with_element(ElementTriP3())
    centre = mesh.p[:, mesh.t].mean(axis=1)
    eps = weight_of(*centre)[:, None]
    k0sq = (2 * math.pi / wavelength) ** 2

    curl = asm(BilinearForm(lambda u, v, w: u.curl * v.curl), edge)
    mass = asm(BilinearForm(lambda u, v, w: dot(u, v)), edge)
    filled = asm(BilinearForm(lambda u, v, w: w["eps"] * dot(u, v)), edge, eps=eps)
    mixed = asm(BilinearForm(lambda u, v, w: dot(grad(u), v)), node, edge)
    stiff = asm(BilinearForm(lambda u, v, w: dot(grad(u), grad(v))), node)
    inside = asm(BilinearForm(lambda u, v, w: w["eps"] * u * v), node, eps=eps)
    k = sp.block_array([[k0sq * filled - curl, None], [None, sp.csr_array(stiff.shape)]])
    n = sp.block_array([[mass, -mixed], [-mixed.T, stiff - k0sq * inside]])

    def on(basis, side):
        return np.asarray(basis.get_dofs(side).all())

    # quasi-TE: electric wall at x = 0, magnetic at the mirror y = min, electric outside
    fixed = np.concatenate(
        [on(b, s) + off for b, off in ((edge, 0), (node, edge.N)) for s in ("left", "right", "top")]
    )
    free = np.setdiff1d(np.arange(edge.N + node.N), fixed)
    k, n = k.tocsr()[free][:, free], n.tocsr()[free][:, free]
    # N is indefinite, so ARPACK is given the inverse applied to N, not the pair (K, N)
    sigma = k0sq * 2.6**2
    lu = spla.splu((k - sigma * n).tocsc())
    op = spla.LinearOperator(k.shape, lambda v: lu.solve(n @ v), dtype=float)
    mu = spla.eigs(op, 1, v0=np.ones(len(free)), return_eigenvectors=False)[0].real
    return math.sqrt((sigma + 1 / mu) / k0sq)


@pytest.mark.source(
    "scikit-fem's own ElementTriN3 and ElementTriP3", "same cross-section", "2.5e-5"
)
def test_against_library_triangles():
    guide = channel(0.5, 0.22, mirror_y=True)
    res = Resolution(order=3, layers=5, ratio=0.4, margin_x=2.0, margin_y=(2.0, 2.0))
    media = {"core": 3.48, "cladding": 1.444}

    def permittivity(x, y):
        return np.where((x < 0.25) & (y < 0.22), 3.48**2, 1.444**2)

    other = triangles(grid(guide, res), permittivity, 1.55)
    ours = lowest_mode(guide, media, 1.55, "TE", res, derivatives=1).n_eff
    # both of order 3 on the same lines: each is within 2.5e-5 of the limit
    assert other == pytest.approx(2.44964706, abs=2.5e-5)
    assert ours == pytest.approx(other, abs=2.5e-5)


CONVERGED = tomllib.loads(Path(__file__).with_name("channel_values.toml").read_text())


@pytest.mark.source(
    "independent high-order full-vector solution; first row also Bienstman et al., "
    "Opt. Quantum Electron. 38, 731 (2006), eight methods (from memory, high confidence)",
    "n_eff, n_g, beta2, areas",
    "one of the last printed",
)
@pytest.mark.parametrize(
    ("name", "key", "printed", "last"),
    [
        ("silicon-wire-eight-methods-TE", "n_eff", 2.412372, 1e-6),
        ("silicon-wire-eight-methods-TE", "n_group", 4.24431, 1e-5),
        ("rib-low-contrast-TE", "n_eff", 3.3887005, 3e-7),
        ("rib-low-contrast-TM", "n_eff", 3.3878673, 3e-7),
        ("buried-silicon-constant-TE", "n_eff", 2.44964706, 3e-8),
        ("buried-silicon-constant-TE", "n_group", 4.0584107, 1e-7),
        ("buried-silicon-constant-TE", "power_area_um2", 0.112681, 1e-6),
        ("buried-silicon-constant-TE", "intensity_area_um2", 0.18939, 1e-5),
        ("buried-silicon-constant-TM", "n_eff", 1.7726375, 3e-7),
        ("buried-silicon-constant-TM", "n_group", 3.661288, 1e-6),
        ("buried-silicon-constant-TM", "power_area_um2", 0.29404, 1e-5),
        ("buried-nitride-constant-TE", "n_eff", 1.8381769, 1e-7),
        ("buried-nitride-constant-TE", "n_group", 2.0812844, 1e-6),
        ("buried-nitride-constant-TE", "power_area_um2", 1.01917, 1e-5),
        ("buried-nitride-constant-TE", "intensity_area_um2", 1.10847, 1e-5),
        ("buried-nitride-constant-TM", "n_eff", 1.8068046, 1e-7),
        ("buried-nitride-constant-TM", "n_group", 2.1082327, 1.1e-6),
        ("buried-nitride-constant-TM", "power_area_um2", 1.03507, 1e-5),
        ("nitride-1600x800-in-silica-TE", "n_eff", 1.83454380, 5e-8),
        ("nitride-1600x800-in-silica-TE", "n_group", 2.121081, 1e-6),
        ("nitride-1600x800-in-silica-TE", "beta2_ps2_per_km", -137.847, 3e-3),
        ("silicon-500x300-in-silica-TE", "n_eff", 2.6739871, 1e-7),
        ("silicon-500x300-in-silica-TE", "n_group", 4.203917, 1e-6),
        ("silicon-500x300-in-silica-TE", "beta2_ps2_per_km", -1525.84, 1e-2),
    ],
)
def test_converged_values_agree_with_others(name, key, printed, last):
    entry = CONVERGED[name][key]
    assert abs(entry["value"] - printed) <= last
    assert entry["uncertainty"] < last / 10


@pytest.mark.source("definitions of Goell, Bell Syst. Tech. J. 48, 2133 (1969)", "P^2", "7")
def test_converged_square_guide():
    n_eff = CONVERGED["square-goell-TE"]["n_eff"]["value"]
    assert (n_eff**2 - 1) / 1.25 == pytest.approx(0.6719374, abs=1e-7)


@pytest.mark.source("channel_values.toml", "core .50 x .22 and 1.6 x .8 um", "n_eff 4e-10")
@pytest.mark.parametrize(
    ("which", "size", "core", "reached"),
    [("nitride", (1.6, 0.8), 2.0, 1e-7), ("silicon", (0.5, 0.22), 3.48, 5e-7)],
)
def test_cheapest_meshes_reach_what_they_claim(which, size, core, reached):
    media = {"core": core, "substrate": 1.444, "cladding": 1.444}
    n_eff, _ = effective_index(channel(*size), media, 1.55, "TE", CHEAPEST[which])
    reference = CONVERGED[f"buried-{which}-constant-TE"]["n_eff"]["value"]
    assert abs(n_eff - reference) < reached
