"""(1) One dispersion curve against separate eigen-solves at 81 wavelengths on the same grids.

The plain way is given all it can use: the masses of each grid are built once, the shift is put
a ten-thousandth beside each eigenvalue, one mode is asked for, in the half of the guide that
its symmetry leaves. It yields n_eff, and beta2 by differences; the curve yields every quantity
with its error bar, and finds its mode by itself.
"""

from __future__ import annotations

import json
import math
import statistics
import subprocess
import sys
import time

import numpy as np
import scipy.sparse as sp
from cases import NITRIDE, TE_BOUNDARY, forget
from harness import Report, seconds_of
from scipy.sparse.linalg import eigs

import modesolve
from materials.common.constants import C_UM_PER_PS, PER_UM_TO_PER_KM, omega_from_um
from modesolve.eigen import Pencil
from modesolve.refine import LADDER, neville

FROM_UM, TO_UM, POINTS = 1.0, 2.2, 81
ROUNDS = 9

#: What is wanted.
LEAST_RATIO = 10.0

ALONE = """
import json, time
def peak_mb():
    status = open("/proc/self/status").read()  # getrusage would also tell of the parent process
    return int(status.split("VmHWM:")[1].split()[0]) / 1024
started = time.perf_counter()
import modesolve
imported = time.perf_counter()
before = peak_mb()
section = modesolve.CrossSection(core="Si3N4-Luke2015", cladding="SiO2-Malitson1965",
                                 substrate="SiO2-Malitson1965", width_um=1.6, height_um=0.8)
begun, used = time.perf_counter(), time.process_time()
modesolve.dispersion(section, 1.0, 2.2)
curve, used = time.perf_counter() - begun, time.process_time() - used
print(json.dumps(dict(imported=imported - started, curve=curve, used=used, before=before,
                      peak=peak_mb())))
"""


class PlainWay:
    """Separate solves on every grid of the ladder, wavelength by wavelength."""

    def __init__(self, curve: modesolve.DispersionCurve) -> None:
        self.layout = NITRIDE.layout
        # the box of the curve: sized at its long-wavelength end
        box = modesolve.solve_modes(NITRIDE.section, TO_UM, count=1)[0].report.box
        self.box = box
        self.curve = curve
        self.operators: list = []
        self.n_eff: list[list[float]] = []

    def build(self) -> None:
        """Masses of every grid."""
        for refinement in LADDER:
            grid = self.layout.grid(self.box, refinement)
            self.operators.append(self.layout.operators(grid, TE_BOUNDARY))

    @property
    def unknowns(self) -> int:
        """Of all grids together."""
        return sum(operators.topology.edges for operators in self.operators)

    def solve(self, wavelengths: np.ndarray) -> None:
        """The index of TE0 at each wavelength on each grid."""
        for wavelength in wavelengths:
            omega = omega_from_um(wavelength)
            k0 = omega / C_UM_PER_PS
            permittivity = self.layout.permittivity(omega, 0)[:, 0]
            shift = (k0 * self.curve.n_eff(wavelength)) ** 2 * (1.0 + 1e-4)
            found = []
            for operators in self.operators:
                pencil = Pencil(operators, k0, permittivity)
                matrix, mass = sp.csc_array(pencil.matrix), sp.csc_array(pencil.mass)
                values, _ = eigs(matrix, k=1, M=mass, sigma=shift)
                found.append(math.sqrt(values[0].real) / k0)
            self.n_eff.append(found)

    def beta2(self, wavelengths: np.ndarray) -> np.ndarray:
        """beta2 in ps2/km from five-point differences of n_eff, ends left out."""
        n = neville(LADDER[1:], list(np.array(self.n_eff).T[1:]))
        h = wavelengths[1] - wavelengths[0]
        inner = -n[4:] + 16 * n[3:-1] - 30 * n[2:-2] + 16 * n[1:-3] - n[:-4]
        at = wavelengths[2:-2]
        return PER_UM_TO_PER_KM * at**3 / (2 * math.pi * C_UM_PER_PS**2) * inner / (12 * h**2)


def run() -> None:
    """Print and keep the figures."""
    report = Report("curve", f"(1) nitride 1.6 x 0.8 um, TE0, {FROM_UM} to {TO_UM} um")
    wavelengths = np.linspace(FROM_UM, TO_UM, POINTS)

    def curve():
        forget()
        return modesolve.dispersion(NITRIDE.section, FROM_UM, TO_UM)

    solved = curve()
    plain = PlainWay(solved)
    plain_seconds, _ = seconds_of(plain.build)
    nodes = len(solved.report.nodes_um)
    if nodes * plain.unknowns != solved.report.unknowns:
        raise SystemExit("the curve and the plain way do not solve on the same grids")
    curve_seconds = []
    for part in np.array_split(wavelengths, ROUNDS):
        plain_seconds += seconds_of(lambda part=part: plain.solve(part))[0]
        curve_seconds.append(seconds_of(curve)[0])
    median = statistics.median(curve_seconds)
    report.table(
        ("way", "eigen-problems", "seconds"),
        [
            ("separate solves", POINTS * len(LADDER), f"{plain_seconds:.2f}"),
            ("curve", solved.report.factorisations, f"{median:.2f}"),
        ],
    )
    report.say(
        f"ratio {plain_seconds / median:.1f}, wanted {LEAST_RATIO:g} (separate solves: all "
        f"{POINTS} wavelengths on grids {':'.join(map(str, LADDER))}, once; curve: median of "
        f"{ROUNDS} runs in between, {min(curve_seconds):.2f} to {max(curve_seconds):.2f} s)"
    )
    _agreement(report, plain, solved, wavelengths)
    _costs(report)
    report.save()


def _agreement(report: Report, plain: PlainWay, solved, wavelengths: np.ndarray) -> None:
    """How far apart the two ways are: they must show the same curve."""
    n = neville(LADDER[1:], list(np.array(plain.n_eff).T[1:]))
    apart = np.max(np.abs(n - solved.n_eff(wavelengths)))
    inner = wavelengths[2:-2]
    beta2 = np.max(np.abs(plain.beta2(wavelengths) - solved.beta2_ps2_per_km(inner)))
    bar = np.max(solved.error["beta2_ps2_per_km"](inner))
    report.say(
        f"largest difference of the two: n_eff {apart:.1e}, beta2 {beta2:.2g} ps2/km "
        f"(the curve's own error bar: {bar:.1g} ps2/km at most)"
    )


def _costs(report: Report) -> None:
    """Absolute cost of one mode and of the curve, in seconds and in memory."""
    walls, used = [], []
    for _ in range(15):
        forget()
        begun, at = time.perf_counter(), time.process_time()
        modesolve.solve_modes(NITRIDE.section, 1.55, count=1)
        walls.append(time.perf_counter() - begun)
        used.append(time.process_time() - at)
    run = [sys.executable, "-c", ALONE]
    runs = [
        json.loads(subprocess.run(run, check=True, capture_output=True, text=True).stdout)
        for _ in range(5)
    ]

    def least(key: str) -> float:
        return min(run[key] for run in runs)

    def seconds(value: float) -> str:
        return f"{value:.2f} s"

    report.table(
        ("best of several", "wall", "processor", "allowed"),
        [
            ("one mode, all quantities, bars", seconds(min(walls)), seconds(min(used)), "0.6 s"),
            ("curve in a fresh process", seconds(least("curve")), seconds(least("used")), "3 s"),
            ("import of modesolve", seconds(least("imported")), "", "1.5 s"),
            ("peak memory of that process", "", f"{least('peak'):.0f} MB", "500 MB"),
            ("  of it after import", "", f"{least('before'):.0f} MB", ""),
        ],
    )
