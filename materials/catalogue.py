"""The media that ship with the project: one table (TOML) a medium, read when asked for.

A table holds the coefficients as printed, or the measured points and the window over
which they are fitted, with paper, range, temperature, axis, and records of Kerr index,
two-photon absorption and dn/dT, each with its own source. The first record of a kind is
the one used. A table whose file name ends in ``-x`` is a family of mixtures: its keys
end in the fraction, as in ``GeO2-SiO2-Fleming1984-x0.1``.

Most older indices were measured relative to air, the newer ones are absolute; the two
differ by the factor 1.00027, which is left as each paper has it.
"""

from __future__ import annotations

import difflib
import re
import tomllib
from collections.abc import Mapping
from dataclasses import dataclass
from functools import lru_cache
from importlib import resources
from importlib.resources.abc import Traversable
from typing import Any

from materials import formulas, mixtures
from materials.common.errors import InputError, OutOfRange, UnknownName
from materials.medium import Fit, Medium

_FAMILY = re.compile(r"(?P<stem>.+-x)(?P<fraction>\d*\.?\d+)")

#: Table section of each kind of coefficient, and the name used in messages.
_KINDS = {"n2": "n2", "dn_dt": "dn/dT", "two_photon": "two-photon absorption"}


@dataclass(frozen=True, slots=True)
class Record:
    """One published value of a coefficient, SI units (m2/W, m/W, 1/K).

    ``source_kind`` is "published data set", "abstract read", "from memory (confidence)",
    "computed ..." or "band gap".
    """

    value: float
    source_kind: str
    citation: str
    wavelength_um: float | None = None
    uncertainty: float | None = None
    axis: str | None = None
    method: str | None = None
    pulse_s: float | None = None
    remark: str = ""


@dataclass(frozen=True, slots=True)
class Entry:
    """What the catalogue knows about a medium; the first record of a kind is used."""

    key: str
    name: str
    form: str
    axis: str | None
    range_um: tuple[float, float] | None
    temperature_degc: float | None
    citation: str
    data_source: str
    note: str
    caveats: tuple[str, ...]
    fitted: bool
    n2: tuple[Record, ...]
    n2_choice: str
    n2_spread: str
    dn_dt: tuple[Record, ...]
    dn_dt_choice: str
    dn_dt_spread: str
    two_photon: tuple[Record, ...]
    two_photon_choice: str
    two_photon_spread: str

    @property
    def n2_m2_per_w(self) -> float | None:
        """Kerr index used, m2/W."""
        return self.n2[0].value if self.n2 else None

    @property
    def dn_dt_per_k(self) -> float | None:
        """Slope of the index with temperature used, 1/K."""
        return self.dn_dt[0].value if self.dn_dt else None

    @property
    def two_photon_m_per_w(self) -> float | None:
        """Two-photon absorption used, m/W."""
        return self.two_photon[0].value if self.two_photon else None

    @property
    def missing(self) -> tuple[str, ...]:
        """Names of the coefficients for which no source was found."""
        return tuple(what for kind, what in _KINDS.items() if not getattr(self, kind))


def load(key: str) -> Medium:
    """Medium of the catalogue.

    Parameters
    ----------
    key : str
        One of :func:`catalogue`, or the key of a family with any fraction from 0 to 1
        ("GeO2-SiO2-Fleming1984-x0.07").

    Returns
    -------
    Medium

    Raises
    ------
    UnknownName
        There is no such table; the message names the nearest keys.
    OutOfRange
        The fraction of a mixture is outside its range.

    Examples
    --------
    >>> round(load("SiO2-Malitson1965").index(1.55), 12)
    1.444023621703
    """
    if not isinstance(key, str):
        raise InputError(f"catalogue key {key!r}: give the key as a string")
    return _load(key)


@lru_cache(maxsize=256)
def _load(key: str) -> Medium:
    stem, fraction = _table_of(key)
    table = _read(stem)
    entry = _entry(key, stem, fraction)
    caveats = [*map(in_words, entry.caveats), *_memory_caveats(entry)]
    formula, coefficients, fit, of_fit = _law(table, fraction)
    if fit is not None:
        low, high = fit.window_um
        caveats.append(
            f"index fitted to {fit.points} points over {low:g}-{high:g} um "
            f"(residual {fit.residual_rms:.1e} rms)"
        )
        caveats += of_fit
    return Medium(
        key=key,
        name=entry.name,
        form=entry.form,
        formula=formula,
        coefficients=coefficients,
        axis=entry.axis,
        range_um=entry.range_um,
        temperature_degc=entry.temperature_degc,
        citation=in_words(entry.citation),
        n2_m2_per_w=entry.n2_m2_per_w,
        n2_citation=_used(entry.n2),
        n2_spread=in_words(entry.n2_spread),
        dn_dt_per_k=entry.dn_dt_per_k,
        dn_dt_citation=_used(entry.dn_dt),
        dn_dt_spread=in_words(entry.dn_dt_spread),
        two_photon_m_per_w=entry.two_photon_m_per_w,
        two_photon_citation=_used(entry.two_photon),
        two_photon_spread=in_words(entry.two_photon_spread),
        caveats=tuple(caveats),
        missing=entry.missing,
        fit=fit,
    )


@lru_cache(maxsize=1)
def catalogue() -> tuple[str, ...]:
    """Keys of all media, sorted; mixtures at the fractions that their table names."""
    keys: list[str] = []
    for stem in _stems():
        if stem.endswith("-x"):
            keys += [f"{stem}{x:g}" for x in _read(stem)["mixture"]["listed_fractions"]]
        else:
            keys.append(stem)
    return tuple(sorted(keys))


def describe(key: str) -> Entry:
    """What the catalogue knows about a medium, with all its records (nothing is fitted)."""
    stem, fraction = _table_of(key)
    return _entry(key, stem, fraction)


def entries() -> tuple[Entry, ...]:
    """:func:`describe` of every key of :func:`catalogue`, for a listing."""
    return tuple(describe(key) for key in catalogue())


# -- tables ----------------------------------------------------------------------------


def _folder() -> Traversable:
    return resources.files("materials") / "tables"


@lru_cache(maxsize=1)
def _stems() -> tuple[str, ...]:
    names = (item.name for item in _folder().iterdir())
    return tuple(sorted(name.removesuffix(".toml") for name in names if name.endswith(".toml")))


@lru_cache(maxsize=256)
def _read(stem: str) -> Mapping[str, Any]:
    text = (_folder() / f"{stem}.toml").read_text(encoding="utf-8")
    return tomllib.loads(text)


def _table_of(key: str) -> tuple[str, float | None]:
    """File of a key, and the fraction if it is a mixture."""
    if key in _stems() and not key.endswith("-x"):
        return key, None
    match = _FAMILY.fullmatch(key)
    if match and match["stem"] in _stems():
        stem, fraction = match["stem"], float(match["fraction"])
        low, high = _read(stem)["mixture"]["fraction_range"]
        if not low <= fraction <= high:
            raise OutOfRange(f"fraction {fraction:g} of {stem}: give one from {low:g} to {high:g}")
        return stem, fraction
    near = _nearest(key)
    hint = f"nearest: {', '.join(near)}; " if near else ""
    raise UnknownName(
        f"no medium {key!r} in the catalogue; {hint}materials.catalogue(), or on the command "
        'line "idlermap materials list", shows all'
    )


def _nearest(key: str) -> list[str]:
    """Keys that look like ``key`` or begin with it, at most four."""
    lower = {name.lower(): name for name in catalogue()}
    starts = [name for low, name in lower.items() if key and low.startswith(key.lower())]
    close = [lower[k] for k in difflib.get_close_matches(key.lower(), lower, n=4, cutoff=0.5)]
    return list(dict.fromkeys([*starts, *close]))[:4]


@lru_cache(maxsize=256)
def _entry(key: str, stem: str, fraction: float | None) -> Entry:
    table = _read(stem)
    records: dict[str, Any] = {}
    for kind in _KINDS:
        section = table.get(kind, {})
        records[kind] = tuple(_record(r) for r in section.get("records", ()))
        records[f"{kind}_choice"] = section.get("choice", "")
        records[f"{kind}_spread"] = section.get("spread", "")
    window = table["points"]["window_um"] if "points" in table else table.get("range_um")
    name = table["name"] if fraction is None else table["name"].format(fraction=fraction)
    return Entry(
        key=key,
        name=name,
        form=table["form"],
        axis=table.get("axis"),
        range_um=None if window is None else (float(window[0]), float(window[1])),
        temperature_degc=_maybe_float(table.get("temperature_degc")),
        citation=table["citation"],
        data_source=table["data_source"],
        note=table.get("note", ""),
        caveats=tuple(table.get("caveats", ())),
        fitted="points" in table,
        **records,
    )


def _maybe_float(value: float | None) -> float | None:
    return None if value is None else float(value)


def _record(fields: Mapping[str, Any]) -> Record:
    """Record of a table; whole numbers in TOML become floats."""
    values: dict[str, Any] = {k: float(v) if isinstance(v, int) else v for k, v in fields.items()}
    return Record(**values)


def _law(
    table: Mapping[str, Any], fraction: float | None
) -> tuple[str, tuple[float, ...], Fit | None, tuple[str, ...]]:
    """Formula, coefficients and fit of a table, and what to say of the fit."""
    if "points" in table:
        from materials import measured  # lazily: fits need scipy.optimize

        points = table["points"]
        return measured.fit_window(
            points["wavelength_um"], points["index"], points["window_um"], points["terms"]
        )
    if fraction is not None:
        formula, coefficients = mixtures.law(table["mixture"], fraction)
        return formula, coefficients, None, ()
    formula = table["formula"]
    if formula not in formulas.FORMULAS:
        raise UnknownName(f"table of {table['key']}: no formula {formula!r}")
    return formula, tuple(float(c) for c in table["coefficients"]), None, ()


def _memory_caveats(entry: Entry) -> list[str]:
    """One caveat for each value in use that was written down from memory."""
    out = []
    for kind, what in _KINDS.items():
        records = getattr(entry, kind)
        if records and "from memory" in records[0].source_kind:
            kind_words = records[0].source_kind
            value = "value " if kind_words.startswith("from memory") else ""
            out.append(in_words(f"{what}: {value}{kind_words}"))
    return out


def _used(records: tuple[Record, ...]) -> str:
    """Citation of the record in use, with wavelength, source and remark."""
    if not records:
        return ""
    first = records[0]
    at = "" if first.wavelength_um is None else f", at {first.wavelength_um:g} um"
    remark = f"; {first.remark}" if first.remark else ""
    return in_words(f"{first.citation}{at} [{first.source_kind}]{remark}")


def in_words(text: str) -> str:
    """A text of a table with what it says of its sources in plain words.

    Examples
    --------
    >>> in_words("n2: value from memory (high)")
    'n2: value from memory, not checked against its source (high confidence)'
    >>> in_words("law from memory (high), checked against the published table")
    'law from memory (high confidence), checked against the published table'
    """
    text = re.sub(r"from memory \((\w+)\)(?=, checked)", r"from memory (\1 confidence)", text)
    return re.sub(
        r"from memory \((\w+)\)",
        r"from memory, not checked against its source (\1 confidence)",
        text,
    )
