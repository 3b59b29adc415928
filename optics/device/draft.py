"""What of a case file could be parsed, and the workspace in which a case takes shape."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Any

import numpy as np
from pydantic import BaseModel

from optics.device.door import Faults, entry_key, parse, shown
from optics.device.errors import CaseError, Fault
from optics.device.loader import Files, Materials
from optics.device.material_schema import MaterialModel
from optics.device.materials import Material, TableUse, span_text
from optics.device.salvage import doubtful, intact, known, salvage
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
from optics.device.stack import absorbs
from optics.device.study_schema import OptimizeModel, SweepModel, ToleranceModel

if TYPE_CHECKING:
    from numpy.typing import NDArray

# A step of a thousandth of a nanometer over the visible range is already beyond any use.
MOST_WAVELENGTHS = 1_000_000
# Steps are typed as decimals: the number of steps is whole up to rounding only.
STEP_SLACK = 1e-9


@dataclass(slots=True)
class Parts:
    """Sections of a document, salvaged where it is at fault (see `salvage`).

    None, or None in a list, where nothing of a section is of use or it is absent; `doubtful` are
    the sections that seem to be there under a misspelled key or are missing.
    """

    wavelength: WavelengthRange | WavelengthValues | None
    materials: dict[str, MaterialModel | None] | None
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
    doubtful: frozenset[str] = frozenset()

    @classmethod
    def of(cls, model: BaseModel) -> Parts:
        """Sections of a parsed or salvaged case."""
        names = [name for name in cls.__dataclass_fields__ if name != "doubtful"]
        values = {name: known(model, name) for name in names}
        for name in ("layers", "emitters"):
            values[name] = values[name] or []
        return cls(**values, doubtful=frozenset(name for name in names if doubtful(model, name)))


@dataclass(slots=True)
class Draft:
    """Workspace of `build`.

    Attributes
    ----------
    document : mapping
        The document as it came.
    model : CaseModel or None
        The parsed document, if it has no fault of shape.
    salvaged : BaseModel
        The same, or what can be used of a document at fault.
    shape_faults : tuple of Fault
        Faults of keys, types and single values.
    grid_nm, every_nm : array or None
        Wavelength grid; grid and lines together. None if not known. On a fault of the grid what
        is certain of it.
    grid_is_whole : bool
        Whether `grid_nm` is the very grid and not its ends alone.
    """

    document: Mapping[str, Any]
    files: Files
    faults: Faults
    model: CaseModel | None
    salvaged: BaseModel
    parts: Parts
    materials: Materials
    shape_faults: tuple[Fault, ...]
    grid_nm: NDArray[np.float64] | None = None
    grid_is_whole: bool = False
    every_nm: NDArray[np.float64] | None = None
    warnings: list[str] = field(default_factory=list)
    tables: list[TableUse] = field(default_factory=list)

    @classmethod
    def start(cls, document: Mapping[str, Any], files: Files, label: str) -> Draft:
        """Parse a document and lay out its wavelengths."""
        faults = Faults(label)
        model = parse(document, faults)
        salvaged = model or salvage(CaseModel, document)
        parts = Parts.of(salvaged)
        materials = Materials(parts.materials, files, faults)
        shape = tuple(faults.found)
        draft = cls(document, files, faults, model, salvaged, parts, materials, shape)
        draft.grid_nm, draft.grid_is_whole = wavelength_grid(parts.wavelength, faults)
        lines = [line for line in map(_line_nm, parts.emitters) if line is not None]
        if draft.grid_nm is not None or lines:
            grid = np.empty(0) if draft.grid_nm is None else draft.grid_nm
            draft.every_nm = np.unique(np.concatenate((grid, lines)))
            draft.every_nm.setflags(write=False)
        return draft

    def permittivity(
        self, material: Material
    ) -> tuple[NDArray[np.float64], NDArray[np.complex128], NDArray[np.complex128]]:
        """Permittivity at the wavelengths of the case at which a material is defined.

        Returns
        -------
        wavelength_nm, ordinary, extraordinary : arrays, shape (n,)
            n = 0 where nothing is certain; a lack of coverage is a fault of its own.
        """
        every = np.empty(0) if self.every_nm is None else self.every_nm
        if not material.covers(every):
            low, high = material.range_nm
            every = every[(every >= low) & (every <= high)]
        try:
            return every, *material.permittivity(every)
        except CaseError:
            nothing = np.empty(0, dtype=np.complex128)
            return np.empty(0), nothing, nothing

    def absorbs(self, material: Material) -> bool:
        """Whether a material certainly has k > 0 at some wavelength of the case."""
        return absorbs(material, self.permittivity(material)[0])

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

    def has_sure_names(self, section: str) -> bool:
        """Whether every entry of a list has a name of its own, so that others can be refused."""
        entries = self.raw(section)
        parts = self.parts.layers if section == "layers" else self.parts.emitters
        names = [known(part, "name") for part in parts]
        return None not in names and len(set(names)) == len(entries)

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
    line: float | None = known(known(emitter, "spectrum"), "line_nm")
    return line


def wavelength_grid(
    part: WavelengthRange | WavelengthValues | None, faults: Faults
) -> tuple[NDArray[np.float64] | None, bool]:
    """Ascending wavelengths in nm, read-only, and whether they are the whole grid; notes faults.

    On a fault those that are certain, None where none are.
    """
    if isinstance(part, WavelengthValues):
        grid, whole = _values(part, faults), intact(part)
    elif isinstance(part, WavelengthRange):
        grid, whole = _steps(part, faults)
    else:
        return None, False
    if grid is not None:
        grid.setflags(write=False)
    return grid, whole and grid is not None


def _values(part: WavelengthValues, faults: Faults) -> NDArray[np.float64] | None:
    values = [value for value in known(part, "values_nm") or [] if value is not None]
    if not values:
        return None
    grid = np.array(values, dtype=np.float64)
    falls = np.flatnonzero(np.diff(grid) <= 0)
    if falls.size == 0:
        return grid
    index = int(falls[0]) + 1
    place = [i for i, value in enumerate(known(part, "values_nm")) if value is not None][index]
    faults.add(
        f"wavelength.values_nm[{place}]",
        f"{grid[index]:.10g} after {grid[index - 1]:.10g}",
        "ascending wavelengths",
    )
    return np.unique(grid)


def _steps(part: WavelengthRange, faults: Faults) -> tuple[NDArray[np.float64] | None, bool]:
    start, stop, step = (known(part, name) for name in ("start_nm", "stop_nm", "step_nm"))
    if start is None or stop is None:
        return None, False
    if not stop > start:
        faults.add(
            "wavelength.stop_nm",
            shown(stop),
            f"a wavelength above start_nm = {start:.10g}; a single one goes into values_nm",
        )
        return None, False
    # Whatever the step, the range is known, so the rest of the case can be checked against it.
    ends = np.array([start, stop])
    if step is None:
        return ends, False
    span = stop - start
    steps = span / step
    if steps > MOST_WAVELENGTHS:
        faults.add("wavelength.step_nm", shown(step), f"at most {MOST_WAVELENGTHS} wavelengths")
        return ends, False
    if abs(steps - round(steps)) > STEP_SLACK * max(steps, 1) or round(steps) < 1:
        expected = f"a step that divides the range of {span:.10g} nm into whole steps"
        faults.add("wavelength.step_nm", shown(step), expected)
        return ends, False
    return np.linspace(start, stop, round(steps) + 1), True


def grid_text(wavelength_nm: NDArray[np.float64]) -> str:
    """Range of a grid for a message."""
    return span_text((float(wavelength_nm[0]), float(wavelength_nm[-1])))
