"""Films, slabs and surroundings."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.testing import assert_allclose

from optics.device import models
from optics.device.stack import Film, Stack, absorbs, without_loss

WAVELENGTH_NM = np.array([450.0, 550.0, 650.0])
AIR = models.constant("air", 1.0)
LOSSY = models.constant("lossy", 1.8, 0.1)
HOST = models.birefringent("host", 1.8, 1.66, 0.0, 0.02)
METAL = models.constant("metal", 0.1, 4.0)


def stack(*films: Film, bottom: models.Material = AIR) -> Stack:
    return Stack(films, None, None, bottom, AIR)


def test_permittivity_by_wavelength_and_film() -> None:
    device = stack(Film("a", LOSSY, 10.0), Film("b", HOST, 20.0))
    ordinary, extraordinary = device.permittivity(WAVELENGTH_NM)
    assert ordinary.shape == extraordinary.shape == (3, 2)
    assert_allclose(ordinary, np.tile([(1.8 + 0.1j) ** 2, 1.8**2], (3, 1)), rtol=1e-15)
    assert_allclose(extraordinary[:, 1], (1.66 + 0.02j) ** 2, rtol=1e-15)
    assert_allclose(device.thickness_nm, [10.0, 20.0])
    assert device.film_index("b") == 1
    with pytest.raises(KeyError):
        device.film_index("c")


def test_without_loss_keeps_n() -> None:
    device = stack(Film("a", LOSSY, 10.0), Film("b", HOST, 20.0))
    ordinary, extraordinary = map(without_loss, device.permittivity(WAVELENGTH_NM))
    assert_allclose(ordinary[:, 0], 1.8**2, rtol=1e-15)
    assert_allclose(extraordinary[:, 1], 1.66**2, rtol=1e-15)
    assert_allclose(without_loss(np.array([(0.1 + 4j) ** 2])), [0.01], rtol=1e-12)


def test_absorbing_looks_at_both_axes_and_surroundings() -> None:
    device = stack(Film("a", LOSSY, 1.0), Film("b", HOST, 1.0), Film("c", AIR, 1.0), bottom=METAL)
    films, surroundings = device.absorbing(WAVELENGTH_NM)
    assert films.tolist() == [True, True, False]
    assert surroundings == (True, False)


def test_one_absorbing_wavelength_is_enough() -> None:
    from optics.device import catalogue

    silicon = catalogue.load("si")
    assert absorbs(silicon, np.array([500.0]))
    lossless = models.mix("m", [(models.constant("x", 1.7), 0.3), (AIR, 0.7)])
    assert not absorbs(lossless, WAVELENGTH_NM)
    assert absorbs(models.constant("weak", 1.5, 1e-9), WAVELENGTH_NM)
