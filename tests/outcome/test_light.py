"""Devices that the engine computes together come out as each one alone, to the last bit."""

from __future__ import annotations

import numpy as np
from devices import case, pixel, tandem

from optics.device.case import Case
from optics.outcome.budget import shine, shine_together
from optics.outcome.light import emitter_lights


def unlike() -> list[Case]:
    """Devices of several shapes, some of one; the last has wavelengths that need more care."""
    plain, thick, short, thin = (case(pixel()) for _ in range(4))
    hard = pixel()
    # Modes of a guide behind a thick film of low index leak into the glass by tunneling only.
    hard["materials"] |= {"ito": {"n": 1.86}, "low": {"n": 1.3}, "metal": {"n": 0.05, "k": 1.2}}
    hard["layers"][1] |= {"material": "low", "thickness_nm": 600}
    return [
        plain.replace("layers.ETL.thickness_nm", 53.0),
        thick.replace("layers.EML.thickness_nm", 140.0),
        case(tandem()),
        thin.replace("layers.HTL.thickness_nm", 0.0),
        short.replace("emitters.green.quantum_yield", 0.5),
        case(hard),
    ]


def test_together_is_each_alone() -> None:
    devices = unlike()
    together = shine_together(devices, 1e-6)
    assert together[-1][0].light.engine.careful.any()
    for device, lit in zip(devices, together, strict=True):
        for one, alone in zip(lit, shine(device, 1e-6), strict=True):
            assert one.emitter is alone.emitter
            for mine, own in zip(one.light.engine, alone.light.engine, strict=True):
                assert mine.tobytes() == own.tobytes()
            assert one.emission.shares.tobytes() == alone.emission.shares.tobytes()


def test_how_many_go_together_changes_no_number() -> None:
    first = case(pixel())
    values = np.linspace(40.0, 90.0, 7)
    devices = [first.replace("layers.HTL.thickness_nm", float(value)) for value in values]
    wanted = [(device, device.emitters[0]) for device in devices]
    every = emitter_lights(wanted, 1e-6, threads=2)
    pairs = [emitter_lights(wanted[at : at + 2], 1e-6, threads=1) for at in range(0, 7, 2)]
    for mine, own in zip(every, [one for pair in pairs for one in pair], strict=True):
        assert mine.engine.shares.tobytes() == own.engine.shares.tobytes()
        assert mine.engine.error.tobytes() == own.engine.error.tobytes()
