"""Numbers of a side that are asked for one by one are those of the whole."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np
import pytest
from angular_devices import DEVICES, driven, same
from devices import case

from optics.outcome.budget import shine
from optics.outcome.directional import sources
from optics.outcome.side import NUMBERS, side_angular, side_number
from optics.outcome.view import View

ANGLES = np.array([55.0, 20.5])


@pytest.mark.parametrize("name", DEVICES)
def test_one_by_one_is_all_at_once(name: str) -> None:
    device = case(driven(DEVICES[name]()))
    emitting = sources(device, shine(device, 1e-6))
    for side in range(2):
        whole = side_angular(View(device, emitting, side, ANGLES, thorough=True))
        for key in NUMBERS:
            alone = side_number(View(device, emitting, side, ANGLES, threads=1), key)
            # Sums over a few angles may add up in another order.
            assert same(plain(alone), plain(side_number(whole, key))), (side, key)


def plain(value: Any) -> Any:
    """Lists for tuples and arrays."""
    if isinstance(value, Mapping):
        return [plain(one) for one in value.values()]
    if isinstance(value, tuple | np.ndarray):
        return [plain(one) for one in value]
    return value


def test_nothing_is_computed_that_nobody_asks_for(monkeypatch: pytest.MonkeyPatch) -> None:
    device = case(driven(DEVICES[next(iter(DEVICES))]()))
    view = View(device, sources(device, shine(device, 1e-6)), 0, ANGLES)
    monkeypatch.setattr("optics.outcome.view.radiance", refused)
    assert side_number(view, "external_quantum_efficiency") > 0.0
    with pytest.raises(AssertionError, match="radiance"):
        side_number(view, "x_normal")


def refused(*_: Any) -> None:
    raise AssertionError("radiance was computed")
