"""What of a case file could be parsed, and the workspace in which a case takes shape."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Any

import numpy as np

from optics.device.door import Faults, entry_key, parse, parse_part, shown
from optics.device.loader import Files, Materials
from optics.device.material_schema import MaterialModel
from optics.device.materials import TableUse, span_text
from optics.device.schema import (
    CaseModel,
    DriveModel,
    EmitterModel,
    LayerModel,
    SidesModel,
    SlabModel,
    SurroundingsModel,
    WavelengthRange,
    WavelengthValues,
)
from optics.device.study_schema import OptimizeModel, SweepModel, ToleranceModel

if TYPE_CHECKING:
    from numpy.typing import NDArray

# A step of a thousandth of a nanometer over the visible range is already beyond any use.
MOST_WAVELENGTHS = 1_000_000
# Steps are typed as decimals: the number of steps is whole up to rounding only.
STEP_SLACK = 1e-9


@dataclass(slots=True)
class Parts:
    """Sections that parsed; None, or None in a list, where a section is at fault or absent."""

    wavelength: WavelengthRange | WavelengthValues | None
    materials: dict[str, MaterialModel | None]
    substrate: SlabModel | None
    cover: SlabModel | None
    surroundings: SurroundingsModel | None
    sides: SidesModel | None
    layers: list[LayerModel | None]
    emitters: list[EmitterModel | None]
    drive: DriveModel | None
    sweep: SweepModel | None
    optimize: OptimizeModel | None
    tolerance: ToleranceModel | None

    @classmethod
    def from_model(cls, model: CaseModel) -> Parts:
        """Everything, from a document without fault."""
        values = {name: getattr(model, name) for name in cls.__dataclass_fields__}
        return cls(**values)

    @classmethod
    def from_document(cls, document: Mapping[str, Any]) -> Parts:
        """Parse what can be used of a document at fault, so that its other faults show too."""
        values: dict[str, Any] = {}
        for name in cls.__dataclass_fields__:
            raw = document.get(name)
            if name in ("layers", "emitters"):
                listed = raw if isinstance(raw, list) else []
                values[name] = [parse_part(name, entry) for entry in listed]
            elif name == "materials":
                named = raw if isinstance(raw, Mapping) else {}
                values[name] = {
                    key: parse_part(name, entry)
                    for key, entry in named.items()
                    if isinstance(key, str)
                }
            elif name in document:
                values[name] = parse_part(name, raw)
            else:
                values[name] = CaseModel.model_fields[name].get_default()
                if CaseModel.model_fields[name].is_required():
                    values[name] = None
        return cls(**values)


@dataclass(slots=True)
class Draft:
    """Workspace of `build`.

    Attributes
    ----------
    document : mapping
        The document as it came.
    model : CaseModel or None
        The parsed document, if it has no fault of shape.
    grid_nm, every_nm : array or None
        Wavelength grid; grid and lines together. None if not known.
    """

    document: Mapping[str, Any]
    files: Files
    faults: Faults
    model: CaseModel | None
    parts: Parts
    materials: Materials
    grid_nm: NDArray[np.float64] | None = None
    every_nm: NDArray[np.float64] | None = None
    warnings: list[str] = field(default_factory=list)
    tables: list[TableUse] = field(default_factory=list)

    @classmethod
    def start(cls, document: Mapping[str, Any], files: Files, label: str) -> Draft:
        """Parse a document and lay out its wavelengths."""
        faults = Faults(label)
        model = parse(document, faults)
        parts = Parts.from_model(model) if model else Parts.from_document(document)
        materials = Materials(parts.materials, files, faults)
        draft = cls(document, files, faults, model, parts, materials)
        draft.grid_nm = wavelength_grid(parts.wavelength, faults)
        if draft.grid_nm is not None:
            lines = [line for line in map(_line_nm, parts.emitters) if line is not None]
            draft.every_nm = np.unique(np.concatenate((draft.grid_nm, lines)))
            draft.every_nm.setflags(write=False)
        return draft

    def key(self, section: str, index: int) -> str:
        """Dotted key of a list entry."""
        return entry_key(self.document, section, index)

    def raw(self, section: str) -> list[Mapping[str, Any]]:
        """Entries of a list as the document has them, even where they are at fault."""
        raw = self.document.get(section)
        entries = raw if isinstance(raw, list) else []
        return [entry if isinstance(entry, Mapping) else {} for entry in entries]

    def names(self, section: str) -> list[str | None]:
        """Names in a list as the document has them, even where an entry is at fault."""
        names = [entry.get("name") for entry in self.raw(section)]
        return [name if isinstance(name, str) else None for name in names]

    def check_names(self, section: str) -> None:
        """Note names that occur more than once."""
        names = self.names(section)
        for index, name in enumerate(names):
            if name is not None and name in names[:index]:
                first = names.index(name)
                self.faults.add(
                    f"{section}[{index}].name",
                    f"{shown(name)} again, already the name of {section}[{first}]",
                    "a name of its own",
                )


def _line_nm(emitter: EmitterModel | None) -> float | None:
    return getattr(emitter.spectrum, "line_nm", None) if emitter else None


def wavelength_grid(
    part: WavelengthRange | WavelengthValues | None, faults: Faults
) -> NDArray[np.float64] | None:
    """Ascending wavelengths in nm, read-only; None where the range is unknown. Notes faults."""
    if part is None:
        return None
    grid = _values(part, faults) if isinstance(part, WavelengthValues) else _steps(part, faults)
    if grid is not None:
        grid.setflags(write=False)
    return grid


def _values(part: WavelengthValues, faults: Faults) -> NDArray[np.float64] | None:
    grid = np.array(part.values_nm, dtype=np.float64)
    falls = np.flatnonzero(np.diff(grid) <= 0)
    if falls.size == 0:
        return grid
    index = int(falls[0]) + 1
    faults.add(
        f"wavelength.values_nm[{index}]",
        f"{grid[index]:.10g} after {grid[index - 1]:.10g}",
        "ascending wavelengths",
    )
    return None


def _steps(part: WavelengthRange, faults: Faults) -> NDArray[np.float64] | None:
    if not part.stop_nm > part.start_nm:
        faults.add(
            "wavelength.stop_nm",
            shown(part.stop_nm),
            f"a wavelength above start_nm = {part.start_nm:.10g}; a single one goes into values_nm",
        )
        return None
    span = part.stop_nm - part.start_nm
    steps = span / part.step_nm
    if steps > MOST_WAVELENGTHS:
        faults.add(
            "wavelength.step_nm", shown(part.step_nm), f"at most {MOST_WAVELENGTHS} wavelengths"
        )
        return None
    if abs(steps - round(steps)) > STEP_SLACK * max(steps, 1) or round(steps) < 1:
        expected = f"a step that divides the range of {span:.10g} nm into whole steps"
        faults.add("wavelength.step_nm", shown(part.step_nm), expected)
        # The range is known all the same, so the rest of the case can be checked against it.
        return np.array([part.start_nm, part.stop_nm])
    return np.linspace(part.start_nm, part.stop_nm, round(steps) + 1)


def grid_text(wavelength_nm: NDArray[np.float64]) -> str:
    """Range of a grid for a message."""
    return span_text((float(wavelength_nm[0]), float(wavelength_nm[-1])))
