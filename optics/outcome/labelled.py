"""Results as labelled arrays: names, coordinates and units travel with the numbers."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from typing import TYPE_CHECKING, Any

from optics.outcome.efficiency import DESTINATIONS

if TYPE_CHECKING:
    import pandas
    import xarray

    from optics.device.emitter import Emitter
    from optics.outcome.efficiency import Emission
    from optics.outcome.light import Light

ORIENTATIONS = ("vertical", "horizontal")
_SHARE_NAMES = {
    "air_bottom": "power that leaves the device at the bottom",
    "air_top": "power that leaves the device at the top",
    "substrate": "power trapped in the substrate",
    "cover": "power trapped in the cover",
    "guided": "power in guided modes of the films",
    "surface_plasmon": "TM power beyond the light lines, next to a metal",
    "absorbed": "power absorbed on its way out",
}


def emitter_dataset(emitter: Emitter, light: Light, found: Emission) -> xarray.Dataset:
    """F and every destination of one emitter against wavelength, position and orientation.

    Relative to the same orientation's power in the unbounded emitter medium.
    """
    import xarray

    dims = ("wavelength_nm", "position", "orientation")
    # The engine's order is vertical, horizontal.
    variables = {"F": (dims, light.engine.dissipation, _relative("dissipated power"))}
    for name, place in DESTINATIONS.items():
        variables[name] = (dims, light.engine.shares[..., place], _relative(_SHARE_NAMES[name]))
    averages = {
        "zone_weight": (("position",), light.zone_weight, _pure("exciton formation, sum 1")),
        "emitted_profile": (("position",), found.emitted_profile, _pure("emission, sum 1")),
        "spectrum_weight": (
            ("wavelength_nm",),
            found.spectrum_weight,
            _pure("intrinsic photon spectrum times trapezoid weight, sum 1"),
        ),
    }
    return xarray.Dataset(
        {**variables, **averages},
        coords={
            "wavelength_nm": (
                "wavelength_nm",
                light.wavelength_nm,
                {"units": "nm", "long_name": "vacuum wavelength"},
            ),
            "position_nm": (
                "position",
                light.position_nm,
                {"units": "nm", "long_name": "distance from the bottom face of the emitter film"},
            ),
            "orientation": list(ORIENTATIONS),
        },
        attrs={
            "emitter": emitter.name,
            "layer": emitter.layer,
            "horizontal_fraction": emitter.horizontal_fraction,
            "relative_to": "power of the same dipole in the unbounded emitter medium",
        },
    )


def _relative(long_name: str) -> dict[str, str]:
    return {"units": "1", "long_name": f"{long_name} over bulk power"}


def _pure(long_name: str) -> dict[str, str]:
    return {"units": "1", "long_name": long_name}


class Spectral(Mapping[str, "xarray.Dataset"]):
    """Datasets by emitter, labelled when first asked for, so that no one else pays for it."""

    def __init__(self, parts: Mapping[str, tuple[Emitter, Light, Emission]]) -> None:
        self._parts = dict(parts)
        self._made: dict[str, xarray.Dataset] = {}

    def __getitem__(self, name: str) -> xarray.Dataset:
        if name not in self._made:
            self._made[name] = emitter_dataset(*self._parts[name])
        return self._made[name].copy(deep=True)

    def __iter__(self) -> Iterator[str]:
        return iter(self._parts)

    def __len__(self) -> int:
        return len(self._parts)


def budget_frame(result: Mapping[str, Any]) -> pandas.DataFrame:
    """Long table of a budget's JSON result: columns scope, name, quantity, value, unit."""
    import pandas

    rows: list[tuple[str, str, str, float | None]] = []
    for key, value in result.items():
        if isinstance(value, float) or value is None:
            rows.append(("device", "", key, value))
    rows += [("device", "", f"destinations.{k}", v) for k, v in result["destinations"].items()]
    rows += [("accuracy", "", key, value) for key, value in result["accuracy"].items()]
    for unit in result["chain"]:
        rows += [("unit", unit["unit"], f"chain.{k}", v) for k, v in unit.items() if k != "unit"]
    for emitter in result["emitters"]:
        for key, value in emitter.items():
            if key == "destinations":
                rows += [("emitter", emitter["name"], f"{key}.{k}", v) for k, v in value.items()]
            elif key not in ("name", "unit"):
                rows.append(("emitter", emitter["name"], key, value))
    frame = pandas.DataFrame(rows, columns=["scope", "name", "quantity", "value"])
    # Every number of a budget is a ratio.
    return frame.assign(unit="1")


def budget_tree(
    result: Mapping[str, Any], spectral: Mapping[str, xarray.Dataset]
) -> xarray.DataTree:
    """Labelled arrays of a budget: totals at the root, one node with spectra per emitter."""
    import numpy as np
    import xarray

    def number(value: float | None) -> float:
        return np.nan if value is None else value

    pure = {"units": "1"}
    variables: dict[str, Any] = {
        key: ((), number(value), pure)
        for key, value in result.items()
        if isinstance(value, float) or value is None
    }
    names = [emitter["name"] for emitter in result["emitters"]]
    scalars = [
        k for k, v in result["emitters"][0].items() if k not in ("name", "unit", "destinations")
    ]
    for key in scalars:
        values = [number(emitter[key]) for emitter in result["emitters"]]
        variables[f"emitter_{key}"] = (("emitter",), values, pure)
    variables["destinations"] = (
        ("destination",),
        [number(result["destinations"][name]) for name in DESTINATIONS],
        {**pure, "long_name": "share of the photons generated in the device"},
    )
    variables["emitter_destinations"] = (
        ("emitter", "destination"),
        [
            [emitter["destinations"][name] for name in DESTINATIONS]
            for emitter in result["emitters"]
        ],
        {**pure, "long_name": "share of the emitter's photons"},
    )
    parts = [key for key in result["chain"][0] if key != "unit"]
    variables["chain"] = (
        ("unit", "part"),
        [[unit[key] for key in parts] for unit in result["chain"]],
        {**pure, "long_name": "share of the charge injected into the unit"},
    )
    root = xarray.Dataset(
        variables,
        coords={
            "emitter": names,
            "destination": list(DESTINATIONS),
            "unit": [unit["unit"] for unit in result["chain"]],
            "part": parts,
        },
        attrs={
            **{key: result[key] for key in ("schema", "version", "title", "case_sha256")},
            **result["accuracy"],
            "warnings": "\n".join(result["warnings"]),
        },
    )
    return xarray.DataTree.from_dict(
        {"/": root, **{f"/emitters/{name}": data for name, data in spectral.items()}}
    )
