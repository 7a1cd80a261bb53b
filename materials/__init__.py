"""What a medium is: its index and exact frequency series, nonlinearity and dn/dT.

>>> import materials
>>> silica = materials.load("SiO2-Malitson1965")
>>> print(f"{silica.index(1.55):.6f} {silica.beta2_ps2_per_km(1.55):.3f}")
1.444024 -27.947
>>> silica.permittivity_series(1215.0, order=2).shape
(3,)
>>> print(materials.constant(1.9963, name="core").group_index(1.55))
1.9963
"""

from materials.catalogue import Entry, Record, catalogue, describe, entries, load
from materials.measured import from_table
from materials.medium import Fit, Medium
from materials.nondispersive import constant

__all__ = [
    "Entry",
    "Fit",
    "Medium",
    "Record",
    "catalogue",
    "constant",
    "describe",
    "entries",
    "from_table",
    "load",
]
