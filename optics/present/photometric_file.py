"""Luminous intensity of a lighting panel, and its photometric file by ANSI/IES LM-63-2002.

The form of the file is written from memory of the open standard: a line that names it, keywords,
TILT, a line of ten numbers on lamp and geometry, a line of three on ballast and power, vertical
angles, horizontal angles, candela.
"""

from __future__ import annotations

import unicodedata
from collections.abc import Iterable, Iterator, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from optics._version import VERSION
from optics.device.errors import CaseError, Fault
from optics.outcome.angular import Angular, angular

if TYPE_CHECKING:
    from datetime import date

    from numpy.typing import NDArray

    from optics.device.case import Case

    Floats = NDArray[np.float64]

LONGEST_LINE = 254  # 256 with the two characters that end it
#: Largest difference between what the file integrates to and the luminous flux.
FLUX_TOLERANCE = 1e-3
# Angles get closer until the difference is a tenth of what is allowed.
_STEPS_DEG = (1.0, 0.5, 0.25, 0.125)
_AIM = 0.1 * FLUX_TOLERANCE
_DIGITS = 7
_MM_PER_M = 1e3
_ABSOLUTE = -1  # lumens of the lamp: candela are not relative to any
_TYPE_C, _METERS = 1, 2


@dataclass(frozen=True, slots=True, eq=False)
class Panel:
    """Luminous intensity of one side of a flat panel, the same at every azimuth.

    Attributes
    ----------
    title, case_sha256, side : str
    size_mm : (float, float)
        Width and length of the lit face.
    angle_deg, candela : float (n,)
        From the normal, 0 to 90.
    flux_lm : float
        Luminous exitance, from the light budget, times area.
    watts : float or None
        Electrical power; None without a voltage.
    remarks : tuple of str
        What a reader of the file should know.
    emission : Angular
    """

    title: str
    case_sha256: str
    side: str
    size_mm: tuple[float, float]
    angle_deg: Floats
    candela: Floats
    flux_lm: float
    watts: float | None
    remarks: tuple[str, ...]
    emission: Angular

    @property
    def flux_error(self) -> float:
        """Zonal flux of the angles listed over the flux itself, less 1."""
        return zonal_flux(self.angle_deg, self.candela) / self.flux_lm - 1.0


def panel(case: Case, size_mm: tuple[float, float], side: str | None = None) -> Panel:
    """Luminous intensity of a panel: luminance x area x cosine of the angle.

    Parameters
    ----------
    case : Case
        With a current density.
    size_mm : (float, float)
        Width and length of the lit face.
    side : {"bottom", "top"} or None
        Which side to hand on; None for the one with more lumens.

    Returns
    -------
    Panel
        At angles close enough that zones add up to the flux within `FLUX_TOLERANCE`.

    Raises
    ------
    CaseError
        Without a current density.
    ValueError
        If the size is none, the side is dark, or no angles are close enough.
    """
    if not all(0.0 < one < np.inf for one in size_mm):
        raise ValueError(
            f"size: found {size_mm[0]:g} x {size_mm[1]:g} mm; expected two lengths above 0"
        )
    if case.drive.current_density_mA_cm2 is None:
        key = "drive.current_density_mA_cm2"
        expected = "a current density: a photometric file holds candela"
        raise CaseError([Fault(case.label, key, "nothing", expected)])
    found = None
    for step in _STEPS_DEG:
        found = _at_step(case, size_mm, side, step)
        if abs(found.flux_error) <= _AIM:
            return found
    assert found is not None
    if abs(found.flux_error) > FLUX_TOLERANCE:
        raise ValueError(
            f"side {found.side}: angles of {_STEPS_DEG[-1]:g} deg miss the luminous flux by "
            f"{found.flux_error:.1e}; expected {FLUX_TOLERANCE:g} at most"
        )
    return found


def _at_step(case: Case, size_mm: tuple[float, float], side: str | None, step_deg: float) -> Panel:
    angle = np.linspace(0.0, 90.0, round(90.0 / step_deg) + 1)
    seen = angular(case, angle.tolist())
    exitance = {name: one.luminous_exitance_lm_m2 or 0.0 for name, one in seen.sides.items()}
    side = side or max(exitance, key=lambda name: exitance[name])
    if side not in exitance:
        raise ValueError(f"side: found {side!r}; expected bottom or top")
    if not exitance[side] > 0.0:
        raise CaseError([Fault(case.label, f"side {side}", "no visible light", "some to hand on")])
    luminance = seen.sides[side].luminance_cd_m2 or ()
    if any(one is None for one in luminance):
        found = "radiance that grows without bound toward 90 deg"
        raise CaseError([Fault(case.label, f"side {side}", found, "a face that turns it back")])
    area_m2 = size_mm[0] * size_mm[1] / _MM_PER_M**2
    cosine = np.cos(np.deg2rad(angle))
    cosine[-1] = 0.0
    drive = case.drive
    watts = None
    if drive.voltage_V is not None and drive.current_density_mA_cm2 is not None:
        watts = 10.0 * drive.current_density_mA_cm2 * drive.voltage_V * area_m2
    return Panel(
        title=case.title,
        case_sha256=case.sha256,
        side=side,
        size_mm=size_mm,
        angle_deg=angle,
        candela=np.array(luminance, dtype=np.float64) * area_m2 * cosine,
        flux_lm=exitance[side] * area_m2,
        watts=watts,
        remarks=tuple(_remarks(case, side, watts)),
        emission=seen,
    )


def _remarks(case: Case, side: str, watts: float | None) -> Iterator[str]:
    if watts is None:
        yield "the case states no voltage: 0 stands for the input watts"
    slab = case.stack.substrate if side == "bottom" else case.stack.cover
    if slab is not None and slab.exit == "matched":
        yield (
            "the exit is matched: intensities are those inside the slab; a hemisphere around the "
            "whole panel, which is not modeled, would keep them"
        )
    if case.drive.aperture_ratio * case.drive.duty != 1.0:
        yield "luminance is the average over the panel's face and over time"


def zonal_flux(angle_deg: Floats, candela: Floats) -> float:
    """Luminous flux in lumens as photometric programs add it up: zone by zone.

    Mean intensity of both edges times the zone's solid angle, 2 pi (cos a - cos b).

    Parameters
    ----------
    angle_deg, candela : float (n,)
        Ascending.
    """
    cosine = np.cos(np.deg2rad(angle_deg))
    zones = 2.0 * np.pi * (cosine[:-1] - cosine[1:])
    return float(zones @ (0.5 * (candela[:-1] + candela[1:])))


def photometric_file(given: Panel, issued: date, cautions: Sequence[str] = ()) -> str:
    """Write a panel as a photometric file.

    Parameters
    ----------
    given : Panel
    issued : date
        Of the file.
    cautions : sequence of str
        Go into the keywords.

    Returns
    -------
    str
        ASCII, lines of at most `LONGEST_LINE` characters that end in CR LF.
    """
    width_m, length_m = (one / _MM_PER_M for one in given.size_mm)
    lines = ["IESNA:LM-63-2002", *_keywords(given, issued, cautions), "TILT=NONE"]
    # Lamps, lumens of each, multiplier, vertical and horizontal angles, type, unit, opening.
    head = [1, _ABSOLUTE, 1, given.angle_deg.size, 1, _TYPE_C, _METERS]
    lines.append(" ".join([*map(str, head), _plain(width_m), _plain(length_m), "0"]))
    lines.append(f"1 1 {_plain(given.watts or 0.0)}")
    lines += _wrapped(map(_plain, given.angle_deg))
    lines.append("0")
    lines += _wrapped(map(_plain, given.candela))
    return "".join(f"{line}\r\n" for line in lines)


def _keywords(given: Panel, issued: date, cautions: Sequence[str]) -> Iterator[str]:
    width, length = given.size_mm
    yield from _keyword("TEST", f"computed by outcouple {VERSION}, not measured")
    yield from _keyword("TESTLAB", "none: a computation")
    yield from _keyword("ISSUEDATE", issued.isoformat())
    yield from _keyword("MANUFAC", "not stated")
    yield from _keyword("LUMINAIRE", given.title)
    yield from _keyword("LAMP", f"flat panel {width:g} x {length:g} mm, light of its {given.side}")
    yield from _keyword("OTHER", f"case sha256 {given.case_sha256}")
    yield from _keyword("OTHER", f"luminous flux {given.flux_lm:.6g} lm")
    for line in (*given.remarks, *(f"Caution: {line}" for line in cautions)):
        yield from _keyword("OTHER", line)


def _keyword(name: str, text: str) -> Iterator[str]:
    """One keyword; what exceeds a line goes on as MORE."""
    plain = unicodedata.normalize("NFKD", text).encode("ascii", "ignore").decode("ascii")
    words, line = plain.split(), f"[{name}]"
    for whole in words:
        word = whole[: LONGEST_LINE - len("[MORE] ")]
        if len(line) + 1 + len(word) > LONGEST_LINE:
            yield line
            line = "[MORE]"
        line = f"{line} {word}"
    yield line


def _wrapped(words: Iterable[str]) -> Iterator[str]:
    line = ""
    for word in words:
        if line and len(line) + 1 + len(word) > LONGEST_LINE:
            yield line
            line = ""
        line = f"{line} {word}" if line else word
    yield line


def _plain(value: float) -> str:
    """Write a number without an exponent, which not every reader knows."""
    if value == 0.0:
        return "0"
    return np.format_float_positional(
        value, precision=_DIGITS, unique=False, fractional=False, trim="-"
    )
