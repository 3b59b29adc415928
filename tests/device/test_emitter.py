"""Orientation numbers of emitters and what drives the device."""

from __future__ import annotations

import pickle

import pytest
from hypothesis import given
from hypothesis import strategies as st

from optics.device.drive import ByUnit, Drive
from optics.device.emitter import (
    ISOTROPIC_FRACTION,
    Emitter,
    horizontal_fraction_from,
    orientation_from,
)
from optics.device.spectrum import LineSpectrum
from optics.device.zone import UniformZone

KEYS = ("horizontal_fraction", "vertical_fraction", "order_parameter")


def emitter(horizontal_fraction: float) -> Emitter:
    return Emitter(
        "green", "EML", 2, "device", LineSpectrum(520.0), UniformZone(), 0.5,
        horizontal_fraction, 0.9, 1.0, 1.0,
    )  # fmt: skip


@pytest.mark.parametrize(
    ("horizontal", "vertical", "order"),
    [(1.0, 0.0, -0.5), (0.0, 1.0, 1.0), (ISOTROPIC_FRACTION, 1 / 3, 0.0), (0.76, 0.24, -0.14)],
)
def test_orientation(horizontal: float, vertical: float, order: float) -> None:
    one = emitter(horizontal)
    assert one.vertical_fraction == pytest.approx(vertical, abs=1e-15)
    assert one.order_parameter == pytest.approx(order, abs=1e-15)


@given(st.sampled_from(KEYS), st.floats(0, 1))
def test_orientation_numbers_go_there_and_back(key: str, horizontal: float) -> None:
    there = orientation_from(key, horizontal)
    assert horizontal_fraction_from(key, there) == pytest.approx(horizontal, abs=1e-15)


def test_by_unit_is_an_immutable_mapping() -> None:
    balance = ByUnit((("lower", 1.0), ("upper", 0.9)))
    assert dict(balance) == {"lower": 1.0, "upper": 0.9}
    assert balance == {"lower": 1.0, "upper": 0.9}
    assert pickle.loads(pickle.dumps(Drive(balance))) == Drive(balance)
    assert len(balance) == 2
    with pytest.raises(KeyError):
        balance["middle"]
    with pytest.raises(AttributeError):
        balance.pairs = ()  # type: ignore[attr-defined,misc]
