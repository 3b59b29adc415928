"""Modes of whole devices: shares against the budget, lines, words, results."""

from __future__ import annotations

import json
from typing import Any

import devices
import numpy as np
import pytest

import optics
from optics.device.errors import CaseError
from optics.outcome.modes import modes
from optics.outcome.modes_result import EmitterModes, Modes


def lossless(**metal: float) -> dict[str, Any]:
    """The invented pixel without any loss; with a metal of Re eps < 0 if its k is given."""
    document = devices.pixel()
    document["materials"]["ito"] = {"n": 1.86}
    document["materials"]["metal"] = metal or {"n": 1.6}
    document["wavelength"] = {"values_nm": [500, 540, 580]}
    return document


def found(document: dict[str, Any], **options: Any) -> Modes:
    return modes(devices.case(document), **options)


@pytest.fixture(scope="module")
def pixel() -> Modes:
    document = devices.pixel()
    document["wavelength"] = {"start_nm": 490, "stop_nm": 610, "step_nm": 20}
    return found(document)


def only(result: Modes) -> EmitterModes:
    (emitter,) = result.emitters
    return emitter


def test_modes_make_up_the_trapped_light_of_a_lossless_device() -> None:
    emitter = only(found(lossless()))
    guided = emitter.trapped["guided"]
    assert guided.budget > 0.1
    assert guided.remainder == pytest.approx(0.0, abs=1e-6)
    assert guided.plasmons == 0.0
    total = sum(line.overall_share or 0.0 for line in emitter.lines)
    assert total == pytest.approx(guided.budget, abs=1e-6)
    assert all(np.isinf(line.attenuation_length_um).all() for line in emitter.lines)


def test_what_no_film_absorbs_stays_guided() -> None:
    emitter = only(found(lossless()))
    absorption = emitter.absorption
    assert absorption.elsewhere["guided"] == pytest.approx(emitter.trapped["guided"].budget, 1e-6)
    assert set(absorption.films.values()) == {0.0}
    assert abs(absorption.closure_error) < 1e-5


def test_tm_guided_modes_inside_the_plasmon_share_are_told_apart() -> None:
    """A high-index film guides TM light that the budget counts as plasmon."""
    document = lossless(n=0.0, k=3.4)
    document["materials"]["ito"] = {"n": 2.4}
    document["layers"][0]["thickness_nm"] = 220
    emitter = only(found(document))
    part = emitter.trapped["surface_plasmon"]
    assert part.guided_modes > 0.01
    assert part.plasmons > 0.01
    assert part.remainder == pytest.approx(0.0, abs=1e-6)
    assert emitter.trapped["guided"].remainder == pytest.approx(0.0, abs=1e-6)
    kinds = {line.name: set(line.kind) for line in emitter.lines if line.polarization == "p"}
    assert {"plasmon"} in kinds.values()
    assert {"guided"} in kinds.values()


def test_the_remainder_of_a_lossy_device_is_shown(pixel: Modes) -> None:
    for part in only(pixel).trapped.values():
        modes_take = part.guided_modes + part.plasmons
        assert part.budget == pytest.approx(modes_take + part.remainder, abs=1e-15)
        assert 1e-6 < abs(part.remainder) < 0.1


def test_shares_agree_with_the_budget(pixel: Modes) -> None:
    document = devices.pixel()
    document["wavelength"] = {"start_nm": 490, "stop_nm": 610, "step_nm": 20}
    expected = optics.budget(devices.case(document)).emitters[0].destinations
    for key, part in only(pixel).trapped.items():
        assert part.budget == pytest.approx(expected[key], abs=1e-12)


def test_lines_do_not_jump(pixel: Modes) -> None:
    for line in only(pixel).lines:
        assert (np.diff(line.wavelength_nm) == 20).all()
        steps = np.abs(np.diff(line.effective_index))
        assert (steps < 0.1).all()
        assert np.abs(np.diff(line.effective_index, 2)).max(initial=0.0) < 0.02


def test_lines_are_named_by_falling_index(pixel: Modes) -> None:
    lines = only(pixel).lines
    assert [line.name for line in lines[:1]] == ["TE0"]
    for polarization, stem in (("s", "TE"), ("p", "TM")):
        mine = [line for line in lines if line.polarization == polarization]
        assert [line.name for line in mine] == [f"{stem}{i}" for i in range(len(mine))]
        means = [line.effective_index.real.mean() for line in mine]
        assert means == sorted(means, reverse=True)


def test_confinement_sums_to_one_over_all_media(pixel: Modes) -> None:
    emitter = only(pixel)
    assert emitter.media == ("substrate", "ITO", "HTL", "EML", "ETL", "CAT", "top surroundings")
    for line in emitter.lines:
        assert line.confinement.sum(axis=1) == pytest.approx(1.0)
        assert (line.confinement >= 0.0).all()


def test_attenuation_length_is_that_of_the_power(pixel: Modes) -> None:
    for line in only(pixel).lines:
        k0 = 2 * np.pi / line.wavelength_nm
        expected = 1 / (2 * k0 * np.abs(line.effective_index.imag)) / 1e3
        assert line.attenuation_length_um == pytest.approx(expected, rel=1e-12)


def test_one_wavelength_is_that_of_the_whole_grid(pixel: Modes) -> None:
    document = devices.pixel()
    document["wavelength"] = {"start_nm": 490, "stop_nm": 610, "step_nm": 20}
    one = found(document, wavelength_nm=550.0)
    assert one.absorption is None
    whole = {line.name: line for line in only(pixel).lines}
    for line in only(one).lines:
        assert line.wavelength_nm.tolist() == [550.0]
        # Names may differ where a line does not exist here; the numbers must be among the whole.
        twins = [
            abs(other.effective_index[other.wavelength_nm == 550.0] - line.effective_index).max()
            for other in whole.values()
            if other.polarization == line.polarization and 550.0 in other.wavelength_nm
        ]
        assert min(twins) < 1e-12


def test_a_wavelength_that_is_none_of_the_cases_is_a_fault() -> None:
    with pytest.raises(CaseError, match=r"found 551 nm; expected a wavelength of the case"):
        found(devices.pixel(), wavelength_nm=551.0)


def test_leaky_modes_only_on_request_and_marked() -> None:
    document = lossless()
    plain, more = found(document), found(document, leaky=True)
    assert not any(line.leaky for line in only(plain).lines)
    leaky = [line for line in only(more).lines if line.leaky]
    assert leaky
    for line in leaky:
        assert line.name.startswith("leaky T")
        assert set(line.kind) == {"leaky"}
        assert line.overall_share is None
        assert np.isnan(line.share).all()
        assert (line.effective_index.imag > 0.0).all()
    bound = [line for line in only(more).lines if not line.leaky]
    assert [line.name for line in bound] == [line.name for line in only(plain).lines]


def test_every_emitter_has_its_modes_and_the_device_their_mean() -> None:
    document = devices.tandem()
    document["wavelength"] = {"start_nm": 520, "stop_nm": 580, "step_nm": 30}
    result = found(document)
    assert [one.name for one in result.emitters] == ["green", "red", "upper-green"]
    assert result.emitters[1].wavelength_nm.tolist() == [601.5]
    outcome = optics.budget(devices.case(document))
    generated = np.array([one.generated for one in outcome.emitters])
    shares = [one.absorption.films["CAT"] for one in result.emitters]
    assert result.absorption is not None
    expected = generated @ np.array(shares) / generated.sum()
    assert result.absorption.films["CAT"] == pytest.approx(expected)
    # What leaves was found on other nodes than the budget's.
    for side in ("air_bottom", "air_top"):
        assert result.absorption.elsewhere[side] == pytest.approx(
            outcome.destinations[side], abs=2e-6
        )


def test_results_in_plain_types_tables_and_arrays(pixel: Modes) -> None:
    result = pixel.to_dict()
    assert json.loads(json.dumps(result, allow_nan=False)) == result
    assert result["schema"] == "outcouple.modes/1"
    entry = result["emitters"][0]["modes"][0]
    assert entry["name"] == "TE0"
    assert len(entry["effective_index"]) == len(entry["wavelength_nm"])
    data = only(pixel).to_dataset()
    te0 = data.sel(mode="TE0")
    assert te0["effective_index"].to_numpy() == pytest.approx(entry["effective_index"])
    assert data["attenuation_length_um"].attrs["units"] == "um"
    frame = pixel.to_frame()
    assert len(frame) == sum(line.wavelength_nm.size for line in only(pixel).lines)
    assert frame["share"].sum() > 0.0
    assert (frame["leaky"] == False).all()  # noqa: E712
    assert "/green" in pixel.to_tree().groups


def test_fields_absorption_and_trapped_light_are_in_arrays_and_tables(pixel: Modes) -> None:
    emitter = only(pixel)
    data = emitter.to_dataset()
    profile = emitter.field_profile("TE0", 550.0)
    shown = data["electric"].sel(mode="TE0", wavelength_nm=550.0)
    # Over its largest value at the heights of each, which differ.
    same = profile["electric"].interp(height_nm=shown["height_nm"].to_numpy()[150:450:50])
    assert same.to_numpy() == pytest.approx(shown.to_numpy()[150:450:50], abs=2e-3)
    assert data["index"].sel(wavelength_nm=550.0, height_nm=50.0, method="nearest") == 1.86
    assert float(data["absorption"].sum()) == pytest.approx(
        1.0 + emitter.absorption.closure_error, abs=1e-12
    )
    for key, part in emitter.trapped.items():
        found = data["trapped"].sel(trapped_as=key)
        assert dict(zip(data["part"].to_numpy().tolist(), found.to_numpy(), strict=True)) == (
            part.to_dict()
        )
    assert not data["leaky"].any()
    assert pixel.trapped_frame()["budget"].tolist() == [
        part.budget for part in emitter.trapped.values()
    ]
    places = pixel.absorption_frame().set_index(["emitter", "place"])["share"]
    assert places["green", "films.CAT"] == emitter.absorption.films["CAT"]
    assert places["", "air_bottom"] == pixel.absorption.elsewhere["air_bottom"]  # type: ignore[union-attr]
    assert places["green"].sum() == pytest.approx(1.0, abs=1e-5)
    fields = pixel.fields_frame()
    assert set(fields["mode"]) == {line.name for line in emitter.lines}
    assert fields.groupby("mode")["electric"].max().to_numpy() == pytest.approx(1.0)


def test_a_mode_that_is_not_there_has_no_field(pixel: Modes) -> None:
    with pytest.raises(KeyError, match="TE9"):
        only(pixel).field_profile("TE9", 550.0)


def test_field_profile_meets_the_indices_of_the_films(pixel: Modes) -> None:
    line = only(pixel).lines[0]
    data = only(pixel).field_profile("TE0", 550.0)
    assert float(data["electric"].max()) == 1.0
    faces = data.attrs["faces_nm"]
    assert faces == pytest.approx([0, 110, 170, 200, 250, 350])
    inside = data["index"].sel(height_nm=[-20, 50, 150, 185, 220, 300, 360], method="nearest")
    assert inside.to_numpy() == pytest.approx([1.52, 1.86, 1.78, 1.80, 1.72, 0.12, 1.0])
    # Confinement is the integral of the same field.
    height, electric = data["height_nm"].to_numpy(), data["electric"].to_numpy()
    htl = (height > 110) & (height < 170)
    ito = (height > 0) & (height < 110)
    ratio = np.trapezoid(electric[htl], height[htl]) / np.trapezoid(electric[ito], height[ito])
    at = int(np.flatnonzero(line.wavelength_nm == 550.0)[0])
    assert ratio == pytest.approx(line.confinement[at, 2] / line.confinement[at, 1], rel=2e-3)
    with pytest.raises(ValueError, match=r"wavelength_nm: found 551.0; expected one of TE0"):
        only(pixel).field_profile("TE0", 551.0)
