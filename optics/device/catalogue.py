"""The bundled optical constants and emission spectra."""

from __future__ import annotations

import tomllib
from collections.abc import Mapping
from dataclasses import dataclass
from functools import cache
from pathlib import Path
from typing import Any

from optics.device.errors import CaseError, Fault, nearest
from optics.device.materials import UNLIMITED_NM, Material
from optics.device.models import constant, pair, tabulated
from optics.device.tables import IndexTable, read_index_table

BUILT_IN = {"air": "air, n = 1", "vacuum": "vacuum, n = 1"}
WHERE = "bundled materials"


@dataclass(frozen=True, slots=True)
class Entry:
    """One table, pair or built-in material of the catalogue.

    Attributes
    ----------
    name : str
        What a case file calls it.
    title : str
        The material in words.
    source : str
        Primary source; empty for a built-in material.
    range_nm : tuple of float
        Wavelengths covered, nm.
    points : int
        Rows of the table; the smaller number of a pair, 0 without a table.
    origin : str
        Whether the source tabulates the values or they were sampled from its formula.
    aliases : tuple of str
        Plain names that stand for it.
    reasons : tuple of str
        Why, one for each alias.
    note : str
        What to know before use; may be empty.
    """

    name: str
    title: str
    source: str
    range_nm: tuple[float, float]
    points: int
    origin: str
    aliases: tuple[str, ...]
    reasons: tuple[str, ...]
    note: str

    @property
    def is_default(self) -> bool:
        """Whether a plain name stands for this entry."""
        return bool(self.aliases)


def names() -> tuple[str, ...]:
    """Every name that `load` knows, plain names and tables, in alphabetical order."""
    index = _index()
    known = {*BUILT_IN, *index["families"], *index["tables"], *index["pairs"]}
    return tuple(sorted(known))


@cache
def load(name: str) -> Material:
    """Return a bundled material.

    Parameters
    ----------
    name : str
        A plain name such as ``ag``, which stands for the default table of its family, or a
        table of one's own choice such as ``ag-yang``.

    Returns
    -------
    Material
        Named as asked; its `tables` name the table behind it.

    Raises
    ------
    CaseError
        For an unknown name, with the nearest known one.
    """
    if name in BUILT_IN:
        return constant(name, 1.0)
    index = _index()
    resolved = index["families"].get(name, {}).get("default", name)
    if resolved in index["tables"]:
        return tabulated(name, _table(resolved), resolved)
    if resolved in index["pairs"]:
        parts = index["pairs"][resolved]
        return pair(name, load(parts["ordinary"]), load(parts["extraordinary"]))
    known = names()
    expected = "the name of a bundled material"
    raise CaseError([Fault(WHERE, "", f"no material {name!r}", expected, nearest(name, known))])


@cache
def entries() -> tuple[Entry, ...]:
    """List the catalogue: one record for each table, pair and built-in material, by name."""
    index = _index()
    records = [
        Entry(name, title, "", UNLIMITED_NM, 0, "built in", (), (), "")
        for name, title in BUILT_IN.items()
    ]
    records += [_entry(name, index["tables"][name], (name,)) for name in index["tables"]]
    for name, parts in index["pairs"].items():
        records.append(_entry(name, parts, (parts["ordinary"], parts["extraordinary"])))
    return tuple(sorted(records, key=lambda record: record.name))


def spectra_names() -> tuple[str, ...]:
    """Names of the bundled emission spectra, in alphabetical order."""
    return tuple(sorted(path.stem for path in (data_folder() / "spectra").glob("*.csv")))


def spectrum_path(name: str) -> Path:
    """Return the file of a bundled emission spectrum.

    The file has the columns ``wavelength_nm,value``; its header says in ``quantity`` whether the
    values are photons or power per nm.

    Raises
    ------
    CaseError
        For an unknown name, with the nearest known one.
    """
    known = spectra_names()
    if name not in known:
        expected = f"one of {', '.join(known)}"
        found = f"no spectrum {name!r}"
        raise CaseError([Fault("bundled spectra", "", found, expected, nearest(name, known))])
    return data_folder() / "spectra" / f"{name}.csv"


@cache
def data_folder() -> Path:
    """Folder of the bundled files: inside an installed package, or beside it in a checkout."""
    package = Path(__file__).resolve().parents[1]
    installed = package / "_materials"
    return installed if installed.is_dir() else package.parent / "materials"


@cache
def _index() -> Mapping[str, Any]:
    return tomllib.loads((data_folder() / "index.toml").read_text(encoding="utf-8"))


@cache
def _table(name: str) -> IndexTable:
    return read_index_table(data_folder() / f"{name}.csv")


def _entry(name: str, described: Mapping[str, str], table_names: tuple[str, ...]) -> Entry:
    families = _index()["families"]
    tables = [_table(table_name) for table_name in table_names]
    aliases = tuple(alias for alias, family in families.items() if family["default"] == name)
    return Entry(
        name=name,
        title=families[described["family"]]["title"],
        source="; ".join(dict.fromkeys(table.header["source"] for table in tables)),
        range_nm=load(name).range_nm,
        points=min(table.wavelength_nm.size for table in tables),
        origin="; ".join(dict.fromkeys(table.header["values"] for table in tables)),
        aliases=aliases,
        reasons=tuple(families[alias]["reason"] for alias in aliases),
        note=described["note"],
    )
