"""HDF5 files that netCDF-4 readers open: dimension scales, units, long names.

``xarray.open_dataset(path, engine="h5netcdf")`` reads them.
"""

from __future__ import annotations

import json
import os
from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np

from materials.common.errors import StorageError
from materials.common.files import ADVICE, Variable, axes, parts, plain, whole_file


def write_hdf5(
    path: str | os.PathLike[str],
    variables: Sequence[Variable],
    *,
    title: str,
    inputs: Mapping[str, Any] | None = None,
    notes: Sequence[str] = (),
    provenance: Mapping[str, Any] | None = None,
) -> None:
    """Write variables to an HDF5 file that netCDF-4 readers open, whole or not at all.

    Root attributes: ``title``, ``inputs`` and ``provenance`` (JSON), ``notes`` (one a
    line). Complex values are ``_re`` and ``_im`` pairs, booleans int8 (0 and 1), strings
    UTF-8; an error bar is the dataset ``<name>_error``. Parameters and errors as for
    `csv_file.csv_text`, and `StorageError`.
    """
    import h5py  # here, because reading it takes longer than the rest of this package

    lengths = axes(variables)
    attributes = {
        "title": title,
        "inputs": json.dumps(plain(inputs or {})),
        "notes": "\n".join(notes),
        "provenance": json.dumps(plain(provenance or {})),
    }
    with whole_file(path) as temporary:
        try:
            with h5py.File(temporary, "w", track_order=True) as file:
                file.attrs.update(attributes)
                _write_datasets(file, variables, lengths)
        except RuntimeError as exc:  # how h5py reports a failed flush
            raise StorageError(f"cannot write {path}: {exc}; {ADVICE}") from exc


def _write_datasets(file: Any, variables: Sequence[Variable], lengths: dict[str, int]) -> None:
    scales = {v.name: v for v in variables if v.dims == (v.name,)}
    for dim, length in lengths.items():
        if dim in scales:
            _dataset(file, scales[dim], dim, np.asarray(scales[dim].values)).make_scale(dim)
        else:  # the netCDF-4 form of an axis without values
            blank = file.create_dataset(dim, shape=(length,), dtype="f4")
            blank.make_scale(f"This is a netCDF dimension but not a netCDF variable.{length:10d}")
    for variable in variables:
        for name, values in parts(variable):
            if name not in lengths:
                dataset = _dataset(file, variable, name, values)
                for axis, dim in enumerate(variable.dims):
                    dataset.dims[axis].attach_scale(file[dim])


def _dataset(file: Any, variable: Variable, name: str, values: np.ndarray) -> Any:
    import h5py

    attributes: dict[str, Any] = {"units": variable.unit, "long_name": variable.long_name}
    if name.endswith("_error") and name != variable.name:
        attributes["long_name"] = f"error bar of {variable.long_name}"
    if values.dtype == bool:
        values = values.astype(np.int8)
        attributes["flag_values"] = np.array([0, 1], dtype=np.int8)
        attributes["flag_meanings"] = "false true"
    if values.dtype.kind in "UO":
        dataset = file.create_dataset(name, data=values.astype(object), dtype=h5py.string_dtype())
    else:
        dataset = file.create_dataset(name, data=values)
    dataset.attrs.update(attributes)
    return dataset
