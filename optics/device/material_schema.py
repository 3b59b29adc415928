"""Shape of local materials in the case file."""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import Field, Tag

from optics.device.schema_parts import AtLeastZero, ModelNumber, Part, Share, kinds


class ConstantModel(Part):
    """The same n + ik at every wavelength."""

    n: AtLeastZero = Field(description="refractive index")
    k: AtLeastZero = Field(default=0.0, description="extinction coefficient, for loss")


class TableModel(Part):
    """Optical constants from a table."""

    table: str = Field(description="path of a table, relative to the case file")


class BirefringentModel(Part):
    """Constant ordinary and extraordinary index, optic axis normal to the film."""

    n_ordinary: AtLeastZero = Field(description="refractive index in the film plane")
    n_extraordinary: AtLeastZero = Field(description="refractive index along the normal")
    k_ordinary: AtLeastZero = Field(default=0.0, description="extinction in the film plane")
    k_extraordinary: AtLeastZero = Field(default=0.0, description="extinction along the normal")


class PairModel(Part):
    """Two isotropic materials, optic axis normal to the film."""

    ordinary: str = Field(description="name of the isotropic material in the film plane")
    extraordinary: str = Field(description="name of the isotropic material along the normal")


class CauchyModel(Part):
    """Index A + B/λ² (+ C/λ⁴), λ in nm."""

    cauchy_nm: list[float] = Field(min_length=2, max_length=3, description="A, B and optionally C")
    k: AtLeastZero = Field(default=0.0, description="extinction coefficient, for loss")


class SellmeierTerms(Part):
    """Terms of n² = 1 + Σ b λ²/(λ² - c), λ in µm."""

    b: list[float] = Field(min_length=1, description="a list of strengths")
    c_um2: list[AtLeastZero] = Field(min_length=1, description="a list of resonances in µm²")


class SellmeierModel(Part):
    """A lossless material by Sellmeier's formula."""

    sellmeier: SellmeierTerms


class LorentzDrudeTerms(Part):
    """Free and bound electrons."""

    plasma_eV: ModelNumber = Field(description="plasma energy in eV")
    f0: ModelNumber = Field(description="strength of the free electrons")
    gamma0_eV: ModelNumber = Field(description="damping of the free electrons in eV")
    oscillators: list[Annotated[list[ModelNumber], Field(min_length=3, max_length=3)]] = Field(
        default=[], description="a list of [f, Γ in eV, ω in eV]"
    )


class LorentzDrudeModel(Part):
    """A metal by the Lorentz-Drude model."""

    lorentz_drude: LorentzDrudeTerms


class MixModel(Part):
    """A mixture of isotropic materials."""

    mix: Annotated[dict[str, Share], Field(min_length=1)] = Field(
        description="volume fractions by material, sum 1"
    )
    rule: Literal["bruggeman", "linear"] = Field(default="bruggeman", description="mixing rule")


MaterialModel = Annotated[
    Annotated[ConstantModel, Tag("kind:constant")]
    | Annotated[TableModel, Tag("kind:table")]
    | Annotated[BirefringentModel, Tag("kind:birefringent")]
    | Annotated[PairModel, Tag("kind:pair")]
    | Annotated[CauchyModel, Tag("kind:cauchy")]
    | Annotated[SellmeierModel, Tag("kind:sellmeier")]
    | Annotated[LorentzDrudeModel, Tag("kind:lorentz_drude")]
    | Annotated[MixModel, Tag("kind:mix")],
    kinds(
        "exactly one kind of material: n, table, n_ordinary with n_extraordinary, ordinary with "
        "extraordinary, cauchy_nm, sellmeier, lorentz_drude or mix",
        constant=("n",),
        table=("table",),
        birefringent=("n_ordinary", "n_extraordinary"),
        pair=("ordinary", "extraordinary"),
        cauchy=("cauchy_nm",),
        sellmeier=("sellmeier",),
        lorentz_drude=("lorentz_drude",),
        mix=("mix",),
    ),
]
