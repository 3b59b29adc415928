"""Modes of a device as objects, and as the tables and labelled arrays that others read."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from optics._version import VERSION
from optics.outcome.modes_profile import fields_at, heights, index_at

if TYPE_CHECKING:
    import pandas
    import xarray
    from numpy.typing import NDArray

    from optics.kernels.modal_sheet import Films
    from optics.outcome.film_absorption import FilmAbsorption
    from optics.outcome.modes_lines import ModeLine

SCHEMA = "outcouple.modes/1"
_WORDS = ("direction", "kind", "destination")
_NM = {"units": "nm"}
_ONE = {"units": "1"}


@dataclass(frozen=True, slots=True)
class Trapped:
    """A trapped destination of the light budget, split up.

    Attributes
    ----------
    budget : float
        Share of the dissipated photons, from the light budget.
    guided_modes, plasmons : float
        What bound modes of either kind take of it, by their residues. Guided modes of TM
        polarization are inside ``surface_plasmon`` where a metal is near.
    remainder : float
        The rest: near field, overdamped waves, the tails of lines that reach over the light
        line. 0 where nothing absorbs.
    """

    budget: float
    guided_modes: float
    plasmons: float
    remainder: float

    def to_dict(self) -> dict[str, float]:
        """Entry of the JSON result."""
        return {
            "budget": self.budget,
            "guided_modes": self.guided_modes,
            "plasmons": self.plasmons,
            "remainder": self.remainder,
        }


@dataclass(frozen=True, slots=True, eq=False)
class EmitterModes:
    """Modes as one emitter meets them; its own film is taken as lossless.

    Attributes
    ----------
    name : str
    media : tuple of str
        Bottom medium, films, top medium.
    wavelength_nm : float (w,)
    stacks : tuple of Films
        The engine's stack at each wavelength, for fields.
    lines : tuple of ModeLine
        Bound modes, then leaky ones if asked for.
    trapped : mapping of str to Trapped
        ``guided`` and ``surface_plasmon``.
    absorption : FilmAbsorption
    missing : int
        Modes that were counted but not found: 0.
    """

    name: str
    media: tuple[str, ...]
    wavelength_nm: NDArray[np.float64]
    stacks: tuple[Films, ...]
    lines: tuple[ModeLine, ...]
    trapped: Mapping[str, Trapped]
    absorption: FilmAbsorption
    missing: int

    def line(self, name: str) -> ModeLine:
        """Return the line of a mode.

        Raises
        ------
        KeyError
            If there is no such mode.
        """
        for line in self.lines:
            if line.name == name:
                return line
        raise KeyError(name)

    def field_profile(self, mode: str, wavelength_nm: float) -> xarray.Dataset:
        """Field of a mode against height.

        Parameters
        ----------
        mode : str
            Name of the line, such as ``TE0``.
        wavelength_nm : float
            One at which the line exists.

        Returns
        -------
        xarray.Dataset
            By ``height_nm`` above the lowest film's bottom face, each face from both sides:
            ``electric`` and ``magnetic``, |E|^2 and |H|^2, each over its largest value, and
            ``index``, Re n in the film plane. Attribute ``faces_nm``.

        Raises
        ------
        KeyError
            If there is no such mode.
        ValueError
            If the mode does not exist at that wavelength.
        """
        import xarray

        line = self.line(mode)
        where = np.flatnonzero(line.wavelength_nm == wavelength_nm)
        if where.size == 0:
            first, last = line.wavelength_nm[0], line.wavelength_nm[-1]
            raise ValueError(
                f"wavelength_nm: found {wavelength_nm!r}; expected one of {line.name}, which runs "
                f"from {first:g} to {last:g} nm"
            )
        films = self.stacks[int(np.flatnonzero(self.wavelength_nm == wavelength_nm)[0])]
        place = complex(line.place[where[0]])
        height_nm, faces_nm = heights(films, wavelength_nm, place)
        electric, magnetic = fields_at(films, line.polarization, place, wavelength_nm, height_nm)
        index = index_at(films, wavelength_nm, height_nm)
        return xarray.Dataset(
            {
                "electric": ("height_nm", electric, _ONE),
                "magnetic": ("height_nm", magnetic, _ONE),
                "index": ("height_nm", index, _ONE),
            },
            coords={"height_nm": ("height_nm", height_nm, _NM)},
            attrs={"faces_nm": faces_nm, "wavelength_nm": wavelength_nm, "mode": line.name},
        )

    def to_dict(self) -> dict[str, Any]:
        """Entry of ``emitters`` in the JSON result."""
        return {
            "name": self.name,
            "wavelength_nm": self.wavelength_nm.tolist(),
            "modes": [line.to_dict(self.media) for line in self.lines],
            "trapped": {key: part.to_dict() for key, part in self.trapped.items()},
            "absorption": self.absorption.to_dict(),
        }

    def to_dataset(self) -> xarray.Dataset:
        """Lay everything out as labelled arrays.

        Returns
        -------
        xarray.Dataset
            Over mode, wavelength_nm and medium: the lines; nan where a mode is not.
            ``electric``, ``magnetic`` also over height_nm, with ``index``. ``trapped`` over
            trapped_as and part, ``absorption`` over place.
        """
        import xarray

        height_nm, faces_nm = heights(self.stacks[0], float(self.wavelength_nm[0]))
        trapped = {key: part.to_dict() for key, part in self.trapped.items()}
        parts = ["budget", "guided_modes", "plasmons", "remainder"]
        absorption = self.absorption.by_place()
        behind = [
            index_at(films, nm, height_nm)
            for films, nm in zip(self.stacks, self.wavelength_nm.tolist(), strict=True)
        ]
        return xarray.Dataset(
            {
                **self._laid_out(),
                **self._fields(height_nm),
                "index": (("wavelength_nm", "height_nm"), behind, _ONE),
                "trapped": (
                    ("trapped_as", "part"),
                    [[one[part] for part in parts] for one in trapped.values()],
                    _ONE,
                ),
                "absorption": ("place", list(absorption.values()), _ONE),
            },
            coords={
                "mode": [line.name for line in self.lines],
                "polarization": ("mode", [line.polarization for line in self.lines]),
                "leaky": ("mode", [line.leaky for line in self.lines]),
                "wavelength_nm": (
                    "wavelength_nm",
                    self.wavelength_nm,
                    {"units": "nm", "long_name": "vacuum wavelength"},
                ),
                "medium": list(self.media),
                "height_nm": (
                    "height_nm",
                    height_nm,
                    {"units": "nm", "long_name": "height above the lowest film's bottom face"},
                ),
                "trapped_as": list(trapped),
                "part": parts,
                "place": list(absorption),
            },
            attrs={
                "emitter": self.name,
                "faces_nm": faces_nm,
                "closure_error": self.absorption.closure_error,
                "integration_error": self.absorption.integration_error,
            },
        )

    def _laid_out(self) -> dict[str, Any]:
        """Lines over mode, wavelength_nm and medium."""
        shape = (len(self.lines), self.wavelength_nm.size)
        index = np.full(shape, np.nan, dtype=np.complex128)
        length, share = np.full(shape, np.nan), np.full(shape, np.nan)
        contribution = np.zeros(shape)
        confinement = np.full((*shape, len(self.media)), np.nan)
        words = {key: np.full(shape, "", dtype=object) for key in _WORDS}
        for i, line in enumerate(self.lines):
            at = np.searchsorted(self.wavelength_nm, line.wavelength_nm)
            index[i, at], length[i, at] = line.effective_index, line.attenuation_length_um
            share[i, at], confinement[i, at] = line.share, line.confinement
            contribution[i, at] = line.contribution
            for key, values in words.items():
                values[i, at] = getattr(line, key)
        dims = ("mode", "wavelength_nm")
        return {
            "effective_index": (dims, index.real, _ONE),
            "effective_index_imaginary": (dims, index.imag, _ONE),
            "attenuation_length_um": (dims, length, {"units": "um"}),
            "share": (dims, share, _ONE),
            "contribution": (dims, contribution, _ONE),
            "confinement": ((*dims, "medium"), confinement, _ONE),
            **{key: (dims, values.astype(str)) for key, values in words.items()},
        }

    def _fields(self, height_nm: NDArray[np.float64]) -> dict[str, Any]:
        """Fields over mode, wavelength_nm and height_nm."""
        field = np.full((2, len(self.lines), self.wavelength_nm.size, height_nm.size), np.nan)
        for i, line in enumerate(self.lines):
            at = np.searchsorted(self.wavelength_nm, line.wavelength_nm).tolist()
            for w, place in zip(at, line.place.tolist(), strict=True):
                nm = float(self.wavelength_nm[w])
                field[:, i, w] = fields_at(self.stacks[w], line.polarization, place, nm, height_nm)
        dims = ("mode", "wavelength_nm", "height_nm")
        return {"electric": (dims, field[0], _ONE), "magnetic": (dims, field[1], _ONE)}


@dataclass(frozen=True, slots=True, eq=False)
class Modes:
    """Modes of a device and where its light is absorbed.

    Attributes
    ----------
    title, case_sha256 : str
    emitters : tuple of EmitterModes
    absorption : FilmAbsorption or None
        Of the device: emitters by the photons they generate. None without any.
    warnings : tuple of str
    """

    title: str
    case_sha256: str
    emitters: tuple[EmitterModes, ...]
    absorption: FilmAbsorption | None
    warnings: tuple[str, ...]

    def to_dict(self) -> dict[str, Any]:
        """Build the JSON result, ``outcouple.modes/1``: plain types only."""
        return {
            "schema": SCHEMA,
            "version": VERSION,
            "title": self.title,
            "case_sha256": self.case_sha256,
            "emitters": [emitter.to_dict() for emitter in self.emitters],
            "absorption": None if self.absorption is None else self.absorption.to_dict(),
            "warnings": list(self.warnings),
        }

    def to_frame(self) -> pandas.DataFrame:
        """Build a table with a row per emitter, mode and wavelength."""
        import pandas

        rows = []
        for emitter in self.emitters:
            for line in emitter.lines:
                for i, nm in enumerate(line.wavelength_nm.tolist()):
                    inside = dict(zip(emitter.media, line.confinement[i].tolist(), strict=True))
                    rows.append(
                        {
                            "emitter": emitter.name,
                            "mode": line.name,
                            "polarization": line.polarization,
                            "leaky": line.leaky,
                            "wavelength_nm": nm,
                            "effective_index": line.effective_index[i].real,
                            "effective_index_imaginary": line.effective_index[i].imag,
                            "attenuation_length_um": line.attenuation_length_um[i],
                            "share": line.share[i],
                            "contribution": line.contribution[i],
                            **{key: getattr(line, key)[i] for key in _WORDS},
                            **{f"confinement.{name}": share for name, share in inside.items()},
                        }
                    )
        return pandas.DataFrame(rows)

    def trapped_frame(self) -> pandas.DataFrame:
        """Build a table of the budget's trapped light: a row per emitter and destination."""
        import pandas

        return pandas.DataFrame(
            [
                {"emitter": one.name, "destination": key, **part.to_dict()}
                for one in self.emitters
                for key, part in one.trapped.items()
            ]
        )

    def absorption_frame(self) -> pandas.DataFrame:
        """Build a table of where the light ends: a row per emitter and place.

        The device has rows of its own, with an empty emitter.
        """
        import pandas

        parts = [(one.name, one.absorption) for one in self.emitters]
        if self.absorption is not None:
            parts.insert(0, ("", self.absorption))
        return pandas.DataFrame(
            [
                {"emitter": name, "place": place, "share": share}
                for name, part in parts
                for place, share in part.by_place().items()
            ]
        )

    def fields_frame(self) -> pandas.DataFrame:
        """Build a table of fields: a row per emitter, mode and height.

        Each mode at the wavelength that adds most to its share.
        """
        import pandas

        frames = []
        for emitter in self.emitters:
            for line in emitter.lines:
                nm = float(line.wavelength_nm[line.strongest])
                frame = emitter.field_profile(line.name, nm).to_dataframe().reset_index()
                frame.insert(0, "wavelength_nm", nm)
                frame.insert(0, "mode", line.name)
                frame.insert(0, "emitter", emitter.name)
                frames.append(frame)
        return pandas.concat(frames, ignore_index=True) if frames else pandas.DataFrame()

    def to_tree(self) -> xarray.DataTree:
        """Build labelled arrays: a node per emitter, `EmitterModes.to_dataset`."""
        import xarray

        tree = {f"/{one.name}": one.to_dataset() for one in self.emitters}
        root = xarray.Dataset(attrs={"title": self.title, "case_sha256": self.case_sha256})
        if self.absorption is not None:
            everything = self.absorption.by_place()
            root = root.assign_coords(place=list(everything))
            root["absorption"] = ("place", list(everything.values()), _ONE)
        return xarray.DataTree.from_dict({"/": root, **tree})


__all__ = ["SCHEMA", "EmitterModes", "Modes", "Trapped"]
