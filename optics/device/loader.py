"""Files and materials that a case file names."""

from __future__ import annotations

import math
from collections.abc import Callable, Iterable, Mapping
from dataclasses import dataclass, field, replace
from pathlib import Path

from optics.device import catalogue, models
from optics.device.door import Faults
from optics.device.errors import CaseError, nearest
from optics.device.material_schema import (
    BirefringentModel,
    CauchyModel,
    ConstantModel,
    LorentzDrudeModel,
    MaterialModel,
    MixModel,
    PairModel,
    SellmeierModel,
    TableModel,
)
from optics.device.materials import Material, TableUse
from optics.device.salvage import intact, known
from optics.device.tables import Curve, IndexTable, read_curve, read_index_table

# Of changed copies of a case; those of studies that vary materials are not worth keeping.
_MOST_MATERIALS = 64


@dataclass(slots=True)
class Files:
    """Tables of one case, each read once.

    A changed copy of a case shares them: it is quick and rests on the very bytes the first one
    read.

    Attributes
    ----------
    folder : Path
        Folder of the case file; paths in it are relative to this.
    """

    folder: Path
    _read: dict[tuple[str, str], IndexTable | Curve] = field(default_factory=dict)
    _names: dict[str, str] = field(default_factory=dict)
    _materials: dict[tuple[object, ...], Material] = field(default_factory=dict)

    def kept(self, said: tuple[object, ...], make: Callable[[], Material]) -> Material:
        """Material that was made of the same words before, or else a new one.

        What is known of a material at the wavelengths of a case is known of the copies too.
        """
        material = self._materials.get(said)
        if material is None:
            material = make()
            if len(self._materials) >= _MOST_MATERIALS:
                self._materials.clear()
            self._materials[said] = material
        return material

    def index_table(self, path: str, key: str, faults: Faults) -> IndexTable | None:
        """Table of optical constants; faults are noted under `key`."""
        table = self._load(path, "index", key, faults, read_index_table)
        return table if isinstance(table, IndexTable) else None

    def curve(
        self, path: str, column: str, key: str, faults: Faults, *coordinates: str
    ) -> Curve | None:
        """Two-column table of `column` against one of `coordinates`."""

        def read(file: Path) -> Curve:
            return read_curve(file, column, coordinate=coordinates)

        table = self._load(path, column, key, faults, read)
        return table if isinstance(table, Curve) else None

    def spectrum(self, path: str, key: str, faults: Faults) -> Curve | None:
        """Spectrum table, from the case's folder or else the bundled one of that name."""
        if not (self.folder / path).is_file() and path in catalogue.spectra_names():
            name, path = path, str(catalogue.spectrum_path(path).resolve())
            self._names[path] = name
        return self.curve(path, "value", key, faults, "wavelength_nm")

    def hashes(self) -> dict[str, str]:
        """Hash of the bytes of every table read, by its path as the case file has it."""
        return {
            self._names.get(path, path): table.sha256 for (path, _), table in self._read.items()
        }

    def _load(
        self,
        path: str,
        kind: str,
        key: str,
        faults: Faults,
        read: Callable[[Path], IndexTable | Curve],
    ) -> IndexTable | Curve | None:
        if (path, kind) not in self._read:
            file = self.folder / path
            if not file.is_file():
                self._note_missing(path, key, faults)
                return None
            try:
                self._read[path, kind] = read(file)
            except CaseError as error:
                for fault in error.faults:
                    # The table's own line is what the user must mend; the key says who reads it.
                    place = f"{path}: {fault.key}" if fault.key else path
                    faults.add(f"{key}: {place}", fault.found, fault.expected, fault.near)
                return None
        return self._read[path, kind]

    def _note_missing(self, path: str, key: str, faults: Faults) -> None:
        folder = (self.folder / path).parent
        names = [entry.name for entry in folder.iterdir()] if folder.is_dir() else []
        if key.endswith("spectrum.table"):
            names += catalogue.spectra_names()
        faults.add(
            key,
            f'"{path}", no such file',
            "the path of a table, relative to the case file",
            nearest(Path(path).name, names),
        )


def table_use(curve: Curve) -> TableUse:
    """Record of a spectrum, filter or zone table; `range_nm` is the range of its coordinate."""
    span = (float(curve.x[0]), float(curve.x[-1]))
    return TableUse(curve.path.name, curve.header.get("source", ""), span, curve.sha256)


@dataclass(slots=True)
class Materials:
    """Materials by name: those of the case file first, then the bundled catalogue.

    Attributes
    ----------
    parts : mapping of str to parsed or salvaged material or None
        Local materials; None where nothing of a description is of use, or if [materials] itself
        is at fault: then no name can be called unknown.
    """

    parts: Mapping[str, MaterialModel | None] | None
    files: Files
    faults: Faults
    _made: dict[str, Material | None] = field(default_factory=dict)
    _open: list[str] = field(default_factory=list)

    def get(self, name: str, key: str) -> Material | None:
        """Material called `name`; an unknown one is noted under `key`.

        Returns None where the material is at fault (noted before).
        """
        if name in self._open:
            cycle = " → ".join([*self._open[self._open.index(name) :], name])
            self.faults.add(key, f"the cycle {cycle}", "materials that do not contain themselves")
            return None
        if name in (self.parts or {}):
            if name not in self._made:
                self._open.append(name)
                self._made[name] = self._make(name)
                self._open.pop()
            return self._made[name]
        if name in catalogue.names():
            return catalogue.load(name)
        if self.parts is not None:
            expected = "a material of [materials] or of the catalogue"
            near = _nearest_material(name, self.parts)
            self.faults.add(key, f'"{name}", no such material', expected, near)
        return None

    def _make(self, name: str) -> Material | None:
        part = self.parts[name] if self.parts else None
        key = f"materials.{name}"
        if part is None:
            return None
        try:
            return self._construct(name, key, part)
        except CaseError as error:
            for fault in error.faults:
                inner = f"{key}.{fault.key}" if fault.key else key
                self.faults.add(inner, fault.found, fault.expected, fault.near)
            return None

    def _construct(self, name: str, key: str, part: MaterialModel) -> Material | None:
        match part:
            case TableModel():
                return self._table(name, key, part)
            case PairModel():
                return self._pair(name, key, part)
            case MixModel():
                return self._mix(name, key, part)
            case _ if not intact(part):
                return None  # noted before, and nothing in it leads elsewhere
            case _:
                said = (name, part.model_dump_json())
                return self.files.kept(said, lambda: _from_numbers(name, part))

    def _table(self, name: str, key: str, part: TableModel) -> Material | None:
        path = known(part, "table")
        table = self.files.index_table(path, f"{key}.table", self.faults) if path else None
        if table is None:
            return None
        return self.files.kept((name, "table", path), lambda: models.tabulated(name, table))

    def _pair(self, name: str, key: str, part: PairModel) -> Material | None:
        axes = {axis: known(part, axis) for axis in ("ordinary", "extraordinary")}
        made = {axis: self.get(of, f"{key}.{axis}") for axis, of in axes.items() if of is not None}
        present = {axis: material for axis, material in made.items() if material is not None}
        if len(present) < len(axes):
            for axis, material in present.items():
                self._check_isotropic(f"{key}.{axis}", material.name, material)
            return None
        return self.files.kept(
            (name, "pair", *present.values()),
            lambda: models.pair(name, present["ordinary"], present["extraordinary"]),
        )

    def _mix(self, name: str, key: str, part: MixModel) -> Material | None:
        fractions: Mapping[str, float | None] = known(part, "mix") or {}
        made = {component: self.get(component, f"{key}.mix.{component}") for component in fractions}
        whole = [
            (component, material, fraction)
            for component, fraction in fractions.items()
            if (material := made[component]) is not None and fraction is not None
        ]
        if len(whole) == len(fractions) and intact(part):
            # Faults of a mixture name its components as the case file does.
            return self.files.kept(
                (name, part.rule, *whole),
                lambda: models.mix(
                    name, [(replace(of, name=called), share) for called, of, share in whole],
                    part.rule,
                ),
            )  # fmt: skip
        for component, material in made.items():
            if material is not None:
                self._check_isotropic(f"{key}.mix.{component}", component, material)
        self._check_sum(f"{key}.mix", fractions)
        return None

    def _check_isotropic(self, key: str, name: str, material: Material) -> None:
        """Check a component of a material that cannot be made for other reasons."""
        if not material.isotropic:
            self.faults.add(key, f"{name}, which is birefringent", "an isotropic material")

    def _check_sum(self, key: str, fractions: Mapping[str, float | None]) -> None:
        """Check the fractions of a mixture that cannot be made for other reasons.

        Fractions at fault can only add to the others.
        """
        total = math.fsum(fraction for fraction in fractions.values() if fraction is not None)
        lacking = bool(fractions) and None not in fractions.values()
        slack = models.FRACTION_SUM_SLACK
        if total > 1 + slack or (lacking and total < 1 - slack):
            self.faults.add(key, f"fractions that sum to {total:.10g}", "a sum of 1")


def _from_numbers(name: str, part: MaterialModel) -> Material:
    """Material that numbers alone describe."""
    match part:
        case ConstantModel():
            return models.constant(name, part.n, part.k)
        case BirefringentModel():
            return models.birefringent(
                name, part.n_ordinary, part.n_extraordinary, part.k_ordinary, part.k_extraordinary
            )
        case CauchyModel():
            return models.cauchy(name, part.cauchy_nm, part.k)
        case SellmeierModel():
            return models.sellmeier(name, part.sellmeier.b, part.sellmeier.c_um2)
        case LorentzDrudeModel():
            terms = part.lorentz_drude
            return models.lorentz_drude(
                name, terms.plasma_eV, terms.f0, terms.gamma0_eV, terms.oscillators
            )
    raise AssertionError(f"{type(part).__name__} is made of other materials or of a table")


def _nearest_material(name: str, local: Iterable[str]) -> str | None:
    """Name that was probably meant: one spelled alike, or that of a material described so.

    Descriptions count as a whole and by their last word, the noun: crystalline silicon.
    """
    meant = {spelled: spelled for spelled in (*local, *catalogue.names())}
    for entry in catalogue.entries():
        for alias in entry.aliases[:1]:
            title = entry.title.lower()
            for words in (title, title.split()[-1]):
                meant.setdefault(words, alias)
    near = nearest(name, meant)
    return None if near is None else meant[near]
