"""Finite-element meshes: how one is described; the most economical ones that `scan.py` found."""

from __future__ import annotations

from dataclasses import dataclass, replace

from reference.finite_element_guides import Resolution

ORDER = 3


@dataclass(frozen=True)
class Mesh:
    """A graded mesh, lengths in decay lengths of the field beside the core.

    layers : elements added towards a corner, each ``ratio`` times the one before;
    step : first element of a margin; growth : ratio of successive ones; widest : largest one.
    """

    layers: int
    ratio: float
    step: float
    growth: float
    widest: float
    margin: float
    order: int = ORDER

    def resolution(self, decay_um: float) -> Resolution:
        """The same in um."""
        return Resolution(
            order=self.order,
            layers=self.layers,
            ratio=self.ratio,
            step=self.step * decay_um,
            growth=self.growth,
            widest=self.widest * decay_um,
            margin_x=self.margin * decay_um,
            margin_y=(self.margin * decay_um,) * 2,
        )

    def refinements(self) -> tuple[Mesh, ...]:
        """Finer ones: one more layer, smaller elements, slower growth, wider margins."""
        return (
            replace(self, layers=self.layers + 1),
            replace(self, widest=0.75 * self.widest, step=0.75 * self.step),
            replace(self, growth=1.0 + 0.5 * (self.growth - 1.0)),
            replace(self, margin=1.25 * self.margin),
        )


#: Mesh on which the mode is looked for.
COARSE = Mesh(1, 0.2, 1.5, 3.0, 6.0, 6.0, order=2)


def _meshes(table: str) -> tuple[Mesh, ...]:
    rows = (line.split() for line in table.strip().splitlines())
    return tuple(Mesh(int(layers), *map(float, rest)) for layers, *rest in rows)


#: layers, ratio, step, growth, widest, margin: the best of either guide, each tried on both.
MESHES = _meshes(
    """
    1  0.08741  1.018   1.391   3.096   7.27
    1  0.1076  1.379   2.089   5.065   6.31
    1  0.1274  1.109   1.753   3.960   6.51
    1  0.2429  0.8872  1.278   2.587   7.79
    1  0.2734  1.029   1.258   2.893   7.77
    1  0.3458  1.509   1.963   5.058   5.91
    2  0.1131  0.4240  1.442   1.482   7.36
    2  0.1374  0.5080  1.220   1.204   6.84
    2  0.1457  0.4947  1.866   1.427   6.36
    2  0.2632  0.7236  1.881   0.9247  8.71
    2  0.3482  0.4274  2.003   4.583   7.08
    2  0.3814  0.5066  1.400   2.573   8.31
    2  0.4065  1.023   1.260   3.257   6.91
    3  0.1269  0.5210  1.486   1.355   7.41
    3  0.1380  0.5105  1.155   1.320   8.78
    3  0.4243  0.4606  1.486   2.576   9.12
    3  0.4422  0.5967  1.366   2.458   9.05
    3  0.4527  0.4817  1.360   2.734   8.46
    4  0.3925  0.9427  1.274   0.6331  9.03
    4  0.4452  0.8344  1.529   0.8331  8.44
    4  0.4893  0.6323  1.100   2.242   10.48
    5  0.3645  0.7654  1.100   0.5287  9.41
    5  0.4592  0.8782  1.123   0.6480  9.34
    6  0.4792  1.225   1.770   0.8515  9.79
    7  0.4907  1.160   1.100   0.7366  11.00
    """
)
