"""The stacks of dipole_reference.json. Invented, but for the metals' Lorentz-Drude models."""

from __future__ import annotations

from typing import Any

HC_EV_NM = 1239.841984
# Rakic et al., Appl. Opt. 37, 5271 (1998): plasma energy, then (f, Gamma, omega), all eV.
SILVER = (9.01, [(0.845, 0.048, 0.0), (0.065, 3.886, 0.816), (0.124, 0.452, 4.481),
                 (0.011, 0.065, 8.185), (0.840, 0.916, 9.083), (5.646, 2.419, 20.29)])  # fmt: skip
ALUMINIUM = (14.98, [(0.523, 0.047, 0.0), (0.227, 0.333, 0.162), (0.050, 0.312, 1.544),
                     (0.166, 1.351, 1.808), (0.030, 3.382, 3.473)])  # fmt: skip

Film = tuple[complex, complex, float]


def lorentz_drude(metal: tuple[float, list[tuple[float, float, float]]], nm: float) -> complex:
    plasma, terms = metal
    w = HC_EV_NM / nm
    return 1 + sum(f * plasma**2 / (w0**2 - w * w - 1j * w * g) for f, g, w0 in terms)


def film(n: complex, d_nm: float, n_e: complex | None = None) -> Film:
    """A film by its indices."""
    return complex(n) ** 2, complex(n if n_e is None else n_e) ** 2, d_nm


def metal(eps: complex, d_nm: float) -> Film:
    return complex(eps), complex(eps), d_nm


def slab(exit: str = "planar", k: float = 0.0, mm: float = 0.7, outside: float = 1.0) -> Any:  # noqa: A002
    return {"k": k, "thickness_nm": mm * 1e6, "exit": exit, "outside_n": outside}


def stack(
    about: str,
    nm: float,
    films: list[Film],
    emitter: int,
    z: float,
    bottom: complex,
    top: complex = 1.0,
    substrate: Any = None,
    cover: Any = None,
) -> dict[str, Any]:
    """Name the parts of one record; `bottom`, `top` are indices here."""
    return {
        "about": about,
        "wavelength_nm": nm,
        "films": films,
        "bottom": complex(bottom) ** 2,
        "top": complex(top) ** 2,
        "emitter": emitter,
        "z_nm": z,
        "substrate": substrate,
        "cover": cover,
    }


AG550, AL550 = lorentz_drude(SILVER, 550), lorentz_drude(ALUMINIUM, 550)
AG390 = lorentz_drude(SILVER, 390)
ITO, HTL, ETL, EML = film(1.86 + 0.008j, 120), film(1.78, 60), film(1.72, 50), film(1.80, 24)
OLED = [ITO, film(1.68 + 0.002j, 20), HTL, EML, ETL, metal(AL550, 100)]
OPEN = [film(1.76, 70), film(1.8, 20), film(1.7, 60)]

STACKS: dict[str, dict[str, Any]] = {
    "bottom_oled_planar": stack("six films, glass, planar exit", 550, OLED, 3, 8, 1.52,
                                substrate=slab()),
    "bottom_oled_matched": stack("the same, matched exit", 550, OLED, 3, 8, 1.52,
                                 substrate=slab("matched")),
    "bottom_oled_absorbing_glass": stack("slab k = 2e-8", 550, OLED, 3, 16, 1.52,
                                         substrate=slab(k=2e-8)),
    "bottom_oled_absorbing_matched": stack("slab k = 1e-7, matched", 550, OLED, 3, 16, 1.52,
                                           substrate=slab("matched", k=1e-7)),
    "top_oled_thin_silver": stack(
        "thick Al, thin Ag and capping, no slab above; thick glass below", 550,
        [metal(AL550, 150), film(1.78, 130), film(1.8, 20), film(1.72, 45), metal(AG550, 15),
         film(1.85, 65)], 2, 10, 1.52, substrate=slab()),
    "birefringent_transport": stack(
        "uniaxial HTL and ETL, one lossy in its normal direction", 550,
        [ITO, film(1.82, 60, 1.68 + 0.003j), EML, film(1.75, 50, 1.66), metal(AG550, 80)],
        2, 12, 1.52, substrate=slab()),
    "birefringent_emitter": stack(
        "uniaxial emitter film, n_e < n_o", 550,
        [ITO, HTL, film(1.80, 30, 1.66), ETL, metal(AL550, 100)], 2, 10, 1.52, substrate=slab()),
    "birefringent_emitter_positive": stack(
        "uniaxial emitter film, n_e > n_o, on silver", 550,
        [ITO, HTL, film(1.70, 30, 1.90), ETL, metal(AG550, 100)], 2, 20, 1.52, substrate=slab()),
    "two_slabs_unequal_planar": stack(
        "open stack between unequal slabs, both planar, one in water", 550,
        [film(1.9 + 0.005j, 90), *OPEN], 2, 7, 1.52, 1.65,
        slab(k=1e-8), slab(k=3e-8, mm=0.5, outside=1.33)),
    "two_slabs_one_matched": stack(
        "open stack between unequal slabs, the upper matched", 550,
        [film(1.9 + 0.005j, 90), *OPEN], 2, 7, 1.52, 1.65, slab(), slab("matched", k=2e-8)),
    "no_slabs": stack("free-standing films in air, lossless", 550, OPEN, 1, 5, 1.0),
    "slab_dense_inside": stack("textbook lossless slab guide", 550, [film(1.8, 200)], 0, 50, 1.5),
    "emitter_outermost": stack("emitter film at the very top", 600,
                               [ITO, film(1.7, 40), film(1.75, 30)], 2, 22, 1.52,
                               substrate=slab()),
    "silicon_bottom": stack("absorbing surroundings below, no slab there; cover above", 600,
                            [film(1.46, 100), film(1.7, 60), film(1.75, 40), film(1.9, 30)],
                            2, 15, 3.94 + 0.02j, 1.52, None, slab()),
    "metal_surroundings": stack("surroundings of silver below, Re eps < 0", 550,
                                [film(1.7, 70), film(1.75, 30), film(1.9, 40)], 1, 12,
                                AG550**0.5, 1.0),
    "thick_metal": stack("1 um of aluminium", 550, [*OLED[:5], metal(AL550, 1000)], 3, 8, 1.52,
                         substrate=slab()),
    "thick_lossless_film": stack("10 um lossless film of n = 1.6 below the emitter", 550,
                                 [film(1.6, 10000), film(1.75, 40)], 1, 15, 1.5,
                                 substrate=slab()),
    "lossless_guide_with_shielded_metal": stack(
        "lossless guide shielded by a thick metal: numerically real poles", 550,
        [metal(AL550, 1500), film(1.45, 4000), film(1.8, 150), film(1.7, 60)], 2, 60, 1.0),
    "equal_everywhere": stack("film = slab = emitter, exactly equal indices", 550,
                              [film(1.5, 100), film(1.5, 50)], 1, 20, 1.5, substrate=slab()),
    "film_equals_outer": stack("film index exactly that of an outer medium", 550,
                               [film(1.5, 80), film(1.75, 40), film(1.5, 60)], 1, 15, 1.5, 1.0,
                               slab()),
    "zero_thickness": stack("films of zero thickness inside a device, one a metal", 550,
                            [ITO, film(2.2, 0.0), HTL, EML, metal(AG550, 0.0), ETL,
                             metal(AL550, 100)], 3, 8, 1.52, substrate=slab()),
    "close_to_silver": stack("emitter 0.5 nm from silver: quenching", 550,
                             [ITO, HTL, film(1.8, 20), metal(AG550, 100)], 2, 19.5, 1.52,
                             substrate=slab()),
    "thin_emitter_index": stack("emitter index below that of the slab", 550,
                                [film(1.9 + 0.002j, 60), film(1.5, 40), film(1.7, 50),
                                 metal(AG550, 100)], 1, 18, 1.9, substrate=slab()),
    "water_above": stack("water above without a slab, glass to air below", 550,
                         [ITO, film(1.75, 60), film(1.8, 30), film(1.7, 50)], 2, 11, 1.52, 1.33,
                         slab()),
    "near_resonance_metal": stack(
        "eps = -4 + 0.2i, 20 nm, between films of n = 1.9: forward modes only", 400,
        [film(1.9, 60), metal(-4 + 0.2j, 20), film(1.9, 60)], 0, 40, 1.5),
    "backward_model_metal": stack(
        "eps = -3.3 + 0.2i, 20 nm: backward pole at 7.85 - 1.74i", 400,
        [film(1.9, 60), metal(-3.3 + 0.2j, 20), film(1.9, 60)], 0, 40, 1.5),
    "backward_silver_embedded": stack(
        "25 nm silver between half spaces of n = 2.5; backward pole at 1.65 - 2.28i", 390,
        [film(2.5, 40), metal(AG390, 25)], 0, 22, 2.5, 2.5),
    "backward_silver": stack(
        "25 nm silver between ZnS-like films; backward pole at 1.77 - 2.57i", 390,
        [film(2.5, 50), metal(AG390, 25), film(2.5, 50)], 0, 30, 1.0),
    "metal_gap": stack("8 nm gap between silver films", 550,
                       [metal(AG550, 60), film(1.7, 8), metal(AG550, 60)], 1, 3, 1.52,
                       substrate=slab()),
    "high_q_cavity": stack("600 nm cavity between 35 nm silver", 550,
                           [metal(AG550, 35), film(1.7, 600), metal(AG550, 35)], 1, 260, 1.52,
                           substrate=slab()),
    "near_cutoff": stack("TE0 of an asymmetric guide just above its cut-off at 74.2 nm", 550,
                         [film(1.8, 75.0)], 0, 20, 1.5),
    "lossless_metal": stack("Re eps < 0 and no loss at all: modes on the axis", 550,
                            [film(1.7, 40), metal(-9.0, 30), film(1.6, 50)], 0, 20, 1.5,
                            substrate=slab()),
    "backward_lossless_metal": stack(
        "lossless eps = -3: a backward mode exactly on the axis", 400,
        [film(1.9, 60), metal(-3.0, 20), film(1.9, 60)], 0, 40, 1.5),
    "emitter_film_with_k": stack("the emitter film's own k is to be ignored", 550,
                                 [ITO, HTL, film(1.8 + 0.01j, 30), ETL, metal(AL550, 100)],
                                 2, 10, 1.52, substrate=slab()),
}  # fmt: skip
