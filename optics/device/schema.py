"""Shape of the case file: keys, types and ranges of single values.

What several values have to fulfill together is checked in `build`. The description of a field
says what belongs there; messages about a missing key and the JSON Schema use it.
"""

from __future__ import annotations

import json
import sys
from typing import Annotated, Any, Literal

from pydantic import BaseModel, Discriminator, Field, Tag

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
from optics.device.schema_parts import (
    TAG_MARK,
    AtLeastZero,
    FaceName,
    Name,
    Part,
    Positive,
    PositiveShare,
    Share,
    Thickness,
    ZoneLength,
    kinds,
)
from optics.device.study_schema import OptimizeModel, SweepModel, ToleranceModel

DEFAULT_UNIT = "device"


class WavelengthRange(Part):
    """Even steps, both ends included."""

    start_nm: Positive = Field(description="the first vacuum wavelength in nm")
    stop_nm: Positive = Field(description="the last vacuum wavelength in nm")
    step_nm: Positive = Field(description="the step in nm, which divides the range")


class WavelengthValues(Part):
    """Wavelengths one by one."""

    values_nm: list[Positive] = Field(min_length=1, description="ascending wavelengths in nm")


WavelengthModel = Annotated[
    Annotated[WavelengthRange, Tag("kind:range")] | Annotated[WavelengthValues, Tag("kind:values")],
    kinds(
        "either start_nm, stop_nm and step_nm, or values_nm",
        range=("start_nm", "stop_nm", "step_nm"),
        values=("values_nm",),
    ),
]


class SlabModel(Part):
    """A thick incoherent slab."""

    material: str = Field(description="name of an isotropic material")
    thickness_mm: Positive = Field(description="thickness in mm")
    exit: Literal["planar", "matched"] = Field(
        default="planar", description="planar face, or index-matched hemisphere"
    )


class SurroundingsModel(Part):
    """Media outside the device."""

    bottom: str = Field(default="air", description="name of an isotropic material")
    top: str = Field(default="air", description="name of an isotropic material")


class SideModel(Part):
    """What stands outside one side."""

    filter: str | None = Field(
        default=None, description="path of a table wavelength_nm,transmittance"
    )
    polarizer_transmittance: Share = Field(default=1.0, description="factor on s and p alike")


class SidesModel(Part):
    """Both sides."""

    bottom: SideModel = SideModel()
    top: SideModel = SideModel()


class LayerModel(Part):
    """A coherent thin film."""

    name: Name = Field(description="a name that no other layer has")
    material: str = Field(description="name of a material")
    thickness_nm: Thickness = Field(description="thickness in nm, at least 0")


class GaussianSpectrumModel(Part):
    """Gaussian in photon number per nm."""

    peak_nm: Positive = Field(description="peak wavelength in nm")
    fwhm_nm: Positive = Field(description="full width at half maximum in nm")


class LineSpectrumModel(Part):
    """A line, evaluated exactly there."""

    line_nm: Positive = Field(description="wavelength in nm")


class TableSpectrumModel(Part):
    """A measured spectrum."""

    table: str = Field(description="path of a table wavelength_nm,value, or a bundled spectrum")
    quantity: Literal["photons", "power"] = Field(description='"photons" or "power", per nm')


SpectrumModel = Annotated[
    Annotated[GaussianSpectrumModel, Tag("kind:gaussian_spectrum")]
    | Annotated[LineSpectrumModel, Tag("kind:line")]
    | Annotated[TableSpectrumModel, Tag("kind:table_spectrum")],
    kinds(
        "exactly one of: peak_nm with fwhm_nm, line_nm, table with quantity",
        gaussian_spectrum=("peak_nm", "fwhm_nm"),
        line=("line_nm",),
        table_spectrum=("table", "quantity"),
    ),
]


class UniformZoneModel(Part):
    """The same density everywhere."""

    shape: Literal["uniform"]


class PointZoneModel(Part):
    """All excitons at one position: `at`, or `at_nm` with `from`."""

    shape: Literal["point"]
    at: Share | None = Field(default=None, description="0 (bottom face) to 1")
    at_nm: AtLeastZero | None = Field(default=None, description="distance in nm from a face")
    start: FaceName | None = Field(default=None, alias="from", description='"top" or "bottom"')


class ExponentialZoneModel(Part):
    """Density that falls off from one face."""

    shape: Literal["exponential"]
    start: FaceName = Field(alias="from", description='"top" or "bottom"')
    decay_nm: ZoneLength = Field(description="distance in nm over which it falls to 1/e")


class GaussianZoneModel(Part):
    """Gaussian density."""

    shape: Literal["gaussian"]
    at: Share = Field(description="0 (bottom face) to 1")
    width_nm: ZoneLength = Field(description="standard deviation in nm")


class TableZoneModel(Part):
    """Density from a table."""

    shape: Literal["table"]
    table: str = Field(description="path of a table position,density or position_nm,density")


ZONE_SHAPES = ("uniform", "point", "exponential", "gaussian", "table")


def _choose_zone(value: Any) -> str | None:
    shape = value.get("shape") if isinstance(value, dict) else getattr(value, "shape", None)
    return f"{TAG_MARK}{shape}_zone" if shape in ZONE_SHAPES else None


ZoneModel = Annotated[
    Annotated[UniformZoneModel, Tag("kind:uniform_zone")]
    | Annotated[PointZoneModel, Tag("kind:point_zone")]
    | Annotated[ExponentialZoneModel, Tag("kind:exponential_zone")]
    | Annotated[GaussianZoneModel, Tag("kind:gaussian_zone")]
    | Annotated[TableZoneModel, Tag("kind:table_zone")],
    Discriminator(
        _choose_zone,
        custom_error_type="kind",
        custom_error_message="kind",
        custom_error_context={
            "expected": "one of uniform, point, exponential, gaussian, table",
            "options": " ".join(ZONE_SHAPES),
            "key": "shape",
        },
    ),
]


class EmitterModel(Part):
    """One kind of emitter in one layer."""

    name: Name = Field(description="a name that no other emitter has")
    layer: str = Field(description="name of a layer")
    unit: Name = Field(default=DEFAULT_UNIT, description="emission unit of a tandem")
    spectrum: SpectrumModel = Field(
        description="a table: peak_nm with fwhm_nm, line_nm, or table with quantity"
    )
    zone: ZoneModel = Field(description='a table such as { shape = "uniform" }')
    closest_approach_nm: AtLeastZero = Field(
        default=0.5, description="distance from absorbers within which no excitons form"
    )
    horizontal_fraction: Share | None = Field(
        default=None, description="share of the squared dipole moment in the film plane"
    )
    vertical_fraction: Share | None = Field(default=None, description="1 - horizontal_fraction")
    order_parameter: Annotated[float, Field(ge=-0.5, le=1)] | None = Field(
        default=None, description="1 - 1.5 horizontal_fraction"
    )
    quantum_yield: Share = Field(description="intrinsic radiative yield, 0 to 1")
    exciton_fraction: Share = Field(default=1.0, description="share of excitons that may radiate")
    share: Share = Field(default=1.0, description="share of its unit's excitons on this emitter")


def _choose_balance(value: Any) -> str:
    return TAG_MARK + ("by_unit" if isinstance(value, dict) else "number")


ChargeBalance = Annotated[
    Annotated[Share, Tag("kind:number")] | Annotated[dict[str, Share], Tag("kind:by_unit")],
    Discriminator(_choose_balance),
]


class DriveModel(Part):
    """Electrical side."""

    charge_balance: ChargeBalance = Field(default=1.0, description="a number or a table by unit")
    current_density_mA_cm2: Positive | None = Field(
        default=None, description="average over the display area"
    )
    voltage_V: Positive | None = Field(default=None, description="drive voltage")
    aperture_ratio: PositiveShare = Field(default=1.0, description="emitting share of the area")
    duty: PositiveShare = Field(default=1.0, description="share of the time")


class CaseModel(Part):
    """A device, its drive, and studies on it."""

    title: str = Field(description="a title in quotes")
    wavelength: WavelengthModel = Field(
        description="a table with start_nm, stop_nm and step_nm, or values_nm"
    )
    materials: dict[Name, MaterialModel] = Field(default={}, description="local materials")
    substrate: SlabModel | None = Field(default=None, description="slab below the films")
    cover: SlabModel | None = Field(default=None, description="slab above the films")
    surroundings: SurroundingsModel = SurroundingsModel()
    sides: SidesModel = SidesModel()
    layers: list[LayerModel] = Field(min_length=1, description="at least one [[layers]]")
    emitters: list[EmitterModel] = Field(min_length=1, description="at least one [[emitters]]")
    drive: DriveModel = DriveModel()
    sweep: SweepModel | None = Field(default=None, description="a grid of numbers")
    optimize: OptimizeModel | None = Field(default=None, description="best values of numbers")
    tolerance: ToleranceModel | None = Field(default=None, description="process spread")


TAGS: dict[str, type[BaseModel]] = {
    "range": WavelengthRange,
    "values": WavelengthValues,
    "constant": ConstantModel,
    "table": TableModel,
    "birefringent": BirefringentModel,
    "pair": PairModel,
    "cauchy": CauchyModel,
    "sellmeier": SellmeierModel,
    "lorentz_drude": LorentzDrudeModel,
    "mix": MixModel,
    "gaussian_spectrum": GaussianSpectrumModel,
    "line": LineSpectrumModel,
    "table_spectrum": TableSpectrumModel,
    **{
        f"{model.__name__.removesuffix('ZoneModel').lower()}_zone": model
        for model in (
            UniformZoneModel,
            PointZoneModel,
            ExponentialZoneModel,
            GaussianZoneModel,
            TableZoneModel,
        )
    },
}


def json_schema() -> dict[str, Any]:
    """JSON Schema of the case file, for editors.

    Returns
    -------
    dict
        Checks keys, types and ranges of single values; `read_case` checks more.
    """
    schema = CaseModel.model_json_schema(by_alias=True)
    return {
        "$schema": "https://json-schema.org/draft/2020-12/schema",
        **schema,
        "title": "outcouple case file",
    }


def schema_text() -> str:
    """Return the JSON Schema as ``docs/case.schema.json`` holds it."""
    return json.dumps(json_schema(), indent=2, ensure_ascii=False) + "\n"


if __name__ == "__main__":  # python -m optics.device.schema > docs/case.schema.json
    sys.stdout.reconfigure(encoding="utf-8")  # type: ignore[union-attr]
    sys.stdout.write(schema_text())
