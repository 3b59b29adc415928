"""Modes of single wavelengths put in the trade's terms, and joined to lines over wavelength."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, Any, NamedTuple

import numpy as np

from optics.kernels.halfstack import P
from optics.kernels.modal_fields import ELECTRIC, mode_profile
from optics.kernels.modal_follow import follow
from optics.kernels.modal_power import direction

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from optics.kernels.modal_sheet import Films
    from optics.kernels.poles import Modes

# Losses so faint that an attenuation length is rounding: |Im n_eff|.
_NO_LOSS = 1e-13


class Snapshot(NamedTuple):
    """All modes of a stack at one wavelength."""

    wavelength_nm: float
    films: Films
    modes: Modes
    share: NDArray[np.float64]  # (n,) of the power at this wavelength; nan for leaky modes
    content: NDArray[np.float64]  # (n, 3, m + 2)
    line: float  # largest outer light line
    plasmon_from: float  # effective index from which TM power counts as plasmon; inf if never


@dataclass(frozen=True, slots=True, eq=False)
class ModeLine:
    """One mode followed over wavelength. Arrays have one entry per wavelength where it exists.

    Attributes
    ----------
    name : str
        TE or TM (s or p polarized) and a number by falling effective index; leaky ones say so.
    polarization : {"s", "p"}
    leaky : bool
        Whether it loses power by radiation and is no bound mode.
    wavelength_nm : float (n,)
    effective_index : complex (n,)
        In-plane wavevector over that in vacuum, real part positive.
    attenuation_length_um : float (n,)
        Way on which the power falls to 1/e; inf where nothing absorbs.
    direction : tuple of str
        ``forward``; ``backward`` where power runs against the phase.
    kind : tuple of str
        ``guided``; ``plasmon``: TM, with its largest magnetic field (of all faces) at a metal
        next to which it does not oscillate, and with most of its |E|^2 in films where it does
        not; ``overdamped``: dies within a radian of its phase; ``leaky``.
    destination : tuple of str
        Where its power is in the light budget: ``guided``, ``surface_plasmon``, or
        ``below light line``, among what leaves or is absorbed.
    share : float (n,)
        Of the emitter's dissipated photons at that wavelength; nan for leaky modes and where it
        is overdamped.
    contribution : float (n,)
        What each wavelength adds to `overall_share`: share times its part of the photons.
    confinement : float (n, m + 2)
        Share of the integral of |E|^2 in the bottom medium, each film and the top medium.
    place : complex (n,)
        On the engine's sheet, for fields.
    overall_share : float or None
        Of all dissipated photons of the emitter. None where `share` is nan throughout.
    """

    name: str
    polarization: str
    leaky: bool
    wavelength_nm: NDArray[np.float64]
    effective_index: NDArray[np.complex128]
    attenuation_length_um: NDArray[np.float64]
    direction: tuple[str, ...]
    kind: tuple[str, ...]
    destination: tuple[str, ...]
    share: NDArray[np.float64]
    contribution: NDArray[np.float64]
    confinement: NDArray[np.float64]
    place: NDArray[np.complex128]
    overall_share: float | None

    @property
    def strongest(self) -> int:
        """Entry of the wavelength that adds most to the share; the middle one if leaky."""
        if self.leaky:
            return self.wavelength_nm.size // 2
        return int(self.contribution.argmax())

    def to_dict(self, media: Sequence[str]) -> dict[str, Any]:
        """Entry of the JSON result; None for infinite lengths and where there is no share."""
        return {
            "name": self.name,
            "polarization": self.polarization,
            "leaky": self.leaky,
            "share": self.overall_share,
            "wavelength_nm": plain(self.wavelength_nm),
            "effective_index": plain(self.effective_index.real),
            "effective_index_imaginary": plain(self.effective_index.imag),
            "attenuation_length_um": plain(self.attenuation_length_um),
            "direction": list(self.direction),
            "kind": list(self.kind),
            "destination": list(self.destination),
            "share_at_wavelength": plain(self.share),
            "contribution": plain(self.contribution),
            "confinement": {
                name: plain(part) for name, part in zip(media, self.confinement.T, strict=True)
            },
        }


def plain(values: NDArray[np.float64]) -> list[float | None]:
    """Numbers as JSON knows them: None for what is not finite."""
    return [value if np.isfinite(value) else None for value in values.tolist()]


def join(
    snapshots: Sequence[Snapshot], weight: NDArray[np.float64], *, leaky: bool = False
) -> tuple[ModeLine, ...]:
    """Join the modes of neighboring wavelengths to lines.

    Parameters
    ----------
    snapshots : sequence of Snapshot
        By ascending wavelength.
    weight : float (w,)
        Weights with which a line's shares sum to its overall share.
    leaky : bool
        Whether these are leaky modes.
    """
    open_lines: dict[int, list[tuple[int, int]]] = {}
    done: list[list[tuple[int, int]]] = []
    for row, now in enumerate(snapshots):
        continued: dict[int, list[tuple[int, int]]] = {}
        if row:
            before = snapshots[row - 1]
            onward = follow(before.films, now.films, before.modes, now.modes)
            for mode, line in open_lines.items():
                if onward[mode] >= 0:
                    continued[int(onward[mode])] = line
                else:
                    done.append(line)
        for mode in range(now.modes.s.size):
            continued.setdefault(mode, []).append((row, mode))
        open_lines = continued
    done += list(open_lines.values())
    lines = [_line(snapshots, line, weight, leaky=leaky) for line in done]
    return tuple(_named(lines, leaky=leaky))


def _named(lines: list[ModeLine], *, leaky: bool) -> list[ModeLine]:
    """Number the lines of each polarization by falling effective index."""
    lines.sort(key=lambda line: (line.polarization == "p", -line.effective_index.real.mean()))
    counts = {"s": 0, "p": 0}
    named = []
    for line in lines:
        stem = "TE" if line.polarization == "s" else "TM"
        number = counts[line.polarization]
        counts[line.polarization] += 1
        named.append(replace(line, name=f"{'leaky ' if leaky else ''}{stem}{number}"))
    return named


def _line(
    snapshots: Sequence[Snapshot],
    entries: list[tuple[int, int]],
    weight: NDArray[np.float64],
    *,
    leaky: bool,
) -> ModeLine:
    rows = [row for row, _ in entries]
    each = [(snapshots[row], mode) for row, mode in entries]
    wavelength_nm = np.array([now.wavelength_nm for now, _ in each])
    u = np.array([now.modes.u[mode] for now, mode in each])
    share = np.array([now.share[mode] for now, mode in each])
    electric = np.array([now.content[mode, ELECTRIC] for now, mode in each])
    loss = np.abs(u.imag)
    with np.errstate(divide="ignore"):
        length = np.where(loss > _NO_LOSS, wavelength_nm / (4e3 * np.pi * loss), np.inf)
    first, mode = each[0]
    return ModeLine(
        name="",
        polarization="p" if first.modes.polarization[mode] == P else "s",
        leaky=leaky,
        wavelength_nm=wavelength_nm,
        effective_index=u,
        attenuation_length_um=length,
        direction=tuple(
            "backward" if direction(now.modes.u[i], now.content[i]) < 0.0 else "forward"
            for now, i in each
        ),
        kind=tuple("leaky" if leaky else kind_of(now, i) for now, i in each),
        destination=tuple(destination_of(now, i) for now, i in each),
        share=share,
        contribution=np.nan_to_num(weight[rows] * share),
        confinement=electric / electric.sum(axis=1, keepdims=True),
        place=np.array([now.modes.s[i] for now, i in each]),
        overall_share=None if np.isnan(share).all() else float(np.nansum(weight[rows] * share)),
    )


def destination_of(now: Snapshot, mode: int) -> str:
    """Where the light budget counts a mode's power."""
    u = now.modes.u[mode].real
    if now.modes.polarization[mode] == P and u > now.plasmon_from:
        return "surface_plasmon"
    return "guided" if u > now.line else "below light line"


def kind_of(now: Snapshot, mode: int) -> str:
    """Plasmon, guided or overdamped."""
    u, films = now.modes.u[mode], now.films
    if abs(u.imag) > u.real:
        return "overdamped"
    if now.modes.polarization[mode] != P:
        return "guided"
    faces = np.concatenate([[0.0], np.cumsum(films.kd)])
    field = np.zeros((2, faces.size), dtype=np.complex128)
    mode_profile(films, P, now.modes.s[mode], faces, field)
    face = int(np.abs(field[0]).argmax())
    eps_o = np.concatenate([[films.bottom], films.eps_o, [films.top]])
    eps_e = np.concatenate([[films.bottom], films.eps_e, [films.top]])
    oscillates = (eps_o * (1.0 - u * u / eps_e)).real > 0.0
    metal = eps_o.real < 0.0
    here = slice(face, face + 2)
    bound_to_metal = bool((metal[here].sum() == 1) and not oscillates[here][~metal[here]][0])
    # An outer medium counts where it touches a metal: there its decaying wave is the plasmon's,
    # elsewhere that of any guided mode.
    counts = ~metal
    counts[[0, -1]] &= metal[[1, -2]]
    electric = np.where(counts, now.content[mode, ELECTRIC], 0.0)
    mostly_decays = electric[~oscillates].sum() > electric[oscillates].sum()
    return "plasmon" if bound_to_metal and mostly_decays else "guided"


__all__ = ["ModeLine", "Snapshot", "destination_of", "join", "kind_of"]
