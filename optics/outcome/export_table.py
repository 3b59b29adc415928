"""Light outcoupling against position and wavelength: a table for electrical simulation.

A drift-diffusion program brings its own exciton profile; what it needs of optics is how fast
excitons decay at each position, which part of that gives light, and where it goes.
"""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np

from optics._version import VERSION
from optics.device.zone import zone_interval
from optics.kernels.budget import AIR_BOTTOM, AIR_TOP, light_budget
from optics.outcome.efficiency import orientation_average
from optics.outcome.light import problem_of
from optics.outcome.resolved import emitter_called

if TYPE_CHECKING:
    from collections.abc import Mapping

    import pandas
    import xarray
    from numpy.typing import NDArray

    from optics.device.case import Case
    from optics.device.emitter import Emitter

    Floats = NDArray[np.float64]

DEFAULT_POSITIONS = 40
#: Every column: name, unit, definition. Averages over the spectrum have no wavelength.
COLUMNS = (
    ("position_nm", "nm", "distance from the bottom face of the emitter's film"),
    ("stack_position_nm", "nm", "distance from the bottom face of the lowest film"),
    ("wavelength_nm", "nm", "in vacuum"),
    ("spectrum_weight", "1", "intrinsic photons times step, sum 1: averages are sums with it"),
    ("F", "1", "power dissipated by the dipoles over that in the unbounded emitter medium"),
    ("U", "1", "part of F that leaves the device, U_bottom + U_top"),
    ("U_bottom", "1", "part of F that leaves at the bottom, the substrate side"),
    ("U_top", "1", "part of F that leaves at the top"),
    ("effective_yield", "1", "q F/(1 - q + q F): radiative yield if all light had this wavelength"),
    ("F_average", "1", "average of F over the intrinsic photon spectrum"),
    ("U_average", "1", "average of U over the intrinsic photon spectrum"),
    ("U_bottom_average", "1", "average of U_bottom over the intrinsic photon spectrum"),
    ("U_top_average", "1", "average of U_top over the intrinsic photon spectrum"),
    ("effective_yield_average", "1", "q F_average/(1 - q + q F_average)"),
    ("decay_rate_ratio", "1", "1 - q + q F_average: decay rate over that in the bulk"),
    ("photons_out_bottom", "1", "q U_bottom_average/decay_rate_ratio: per exciton decayed here"),
    ("photons_out_top", "1", "q U_top_average/decay_rate_ratio: per exciton decayed here"),
)
_UNITS = {name: unit for name, unit, _ in COLUMNS}
_MEANING = {name: meaning for name, _, meaning in COLUMNS}


def coupling_by_position(
    case: Case, name: str, positions: int = DEFAULT_POSITIONS, tolerance: float = 1e-6
) -> xarray.Dataset:
    """Dissipated and leaving power of one emitter at every position of its film and wavelength.

    Orientation averages, on absolute rates. The case's exciton zone plays no part.

    Parameters
    ----------
    case : Case
    name : str
        Of the emitter.
    positions : int
        Centers of so many equal cells, which fill the film but for what lies within the closest
        approach of an absorber.
    tolerance : float
        Wanted accuracy of every destination as a fraction of the dissipated power.

    Returns
    -------
    xarray.Dataset
        Variables of `COLUMNS` by ``position`` and ``wavelength_nm``; attributes name the
        emitter, its film, q, and the cells' limits in nm.

    Raises
    ------
    KeyError
        If there is no such emitter.
    ValueError
        If there are no positions.
    """
    import xarray

    if positions < 1:
        raise ValueError(f"positions: found {positions}; expected 1 or more")
    emitter = emitter_called(case, name)
    low, high = zone_interval(case.stack, emitter, case.every_wavelength_nm)
    if not high > low:
        raise ValueError(
            f"emitter {name}: its film has no place outside the closest approach of an absorber"
        )
    position_nm = low + (high - low) * (np.arange(positions) + 0.5) / positions
    wavelength_nm = emitter.spectrum.grid_nm(case.wavelength_nm)
    problem = problem_of(case, emitter, wavelength_nm, position_nm)
    engine = light_budget(problem, tolerance)
    bulk, theta = problem.source.bulk, emitter.horizontal_fraction
    shares = orientation_average(engine.shares, bulk, theta)
    weight = emitter.spectrum.weights(wavelength_nm)
    values = _columns(
        orientation_average(engine.dissipation, bulk, theta),
        {"bottom": shares[:, :, AIR_BOTTOM], "top": shares[:, :, AIR_TOP]},
        weight,
        emitter.quantum_yield,
    )
    dims = {1: ("position",), 2: ("position", "wavelength_nm")}
    variables: dict[str, Any] = {
        key: (dims[value.ndim], value, _attrs(key)) for key, value in values.items()
    }
    variables["spectrum_weight"] = (("wavelength_nm",), weight, _attrs("spectrum_weight"))
    below = float(case.stack.thickness_nm[: emitter.film_index].sum())
    return xarray.Dataset(
        variables,
        coords={
            "position_nm": (("position",), position_nm, _attrs("position_nm")),
            "stack_position_nm": (("position",), below + position_nm, _attrs("stack_position_nm")),
            "wavelength_nm": (("wavelength_nm",), wavelength_nm, _attrs("wavelength_nm")),
        },
        attrs=_about(emitter, (low, high)) | {"integration_error": float(engine.error.max())},
    )


def _columns(
    dissipated: Floats, leaving: Mapping[str, Floats], weight: Floats, q: float
) -> dict[str, Floats]:
    """Everything that follows from F and U by side (w, z); by position first."""
    f, out = dissipated.T, {side: power.T for side, power in leaving.items()}
    f_average = f @ weight
    decay = 1.0 - q + q * f_average
    found = {"F": f, "U": out["bottom"] + out["top"]}
    found |= {f"U_{side}": power for side, power in out.items()}
    found["effective_yield"] = q * f / (1.0 - q + q * f)
    averages = {f"{key}_average": found[key] @ weight for key in ("F", "U", "U_bottom", "U_top")}
    return {
        **found,
        **averages,
        "effective_yield_average": q * f_average / decay,
        "decay_rate_ratio": decay,
        **{
            f"photons_out_{side}": q * averages[f"U_{side}_average"] / decay
            for side in ("bottom", "top")
        },
    }


def _attrs(key: str) -> dict[str, str]:
    return {"units": _UNITS[key], "long_name": _MEANING[key]}


def _about(emitter: Emitter, limits: tuple[float, float]) -> dict[str, Any]:
    return {
        "emitter": emitter.name,
        "layer": emitter.layer,
        "unit": emitter.unit,
        "quantum_yield": emitter.quantum_yield,
        "horizontal_fraction": emitter.horizontal_fraction,
        "first_nm": limits[0],
        "last_nm": limits[1],
    }


def coupling_frame(tables: Mapping[str, xarray.Dataset]) -> pandas.DataFrame:
    """One row for each emitter, position and wavelength; columns emitter, layer, `COLUMNS`.

    Parameters
    ----------
    tables : mapping of str to xarray.Dataset
        By emitter, from `coupling_by_position`.
    """
    import pandas

    names = [name for name, _, _ in COLUMNS]
    parts = []
    for data in tables.values():
        part = data.to_dataframe().reset_index()[names]
        part.insert(0, "layer", data.attrs["layer"])
        part.insert(0, "emitter", data.attrs["emitter"])
        parts.append(part)
    return pandas.concat(parts, ignore_index=True)


def coupling_tree(case: Case, tables: Mapping[str, xarray.Dataset]) -> xarray.DataTree:
    """One group for each emitter below a head that names the case."""
    import xarray

    head = {
        "schema": "outcouple.coupling/1",
        "version": VERSION,
        "title": case.title,
        "case_sha256": case.sha256,
    }
    groups: dict[str, Any] = {f"/{name}": data for name, data in tables.items()}
    return xarray.DataTree.from_dict({"/": xarray.Dataset(attrs=head), **groups})
