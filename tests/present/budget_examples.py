"""Light budgets as dictionaries, with plain numbers made up for the layout tests."""

from __future__ import annotations

from typing import Any

DESTINATIONS = {
    "air_bottom": 0.25,
    "air_top": 0.0,
    "substrate": 0.30,
    "cover": 0.0,
    "guided": 0.15,
    "surface_plasmon": 0.20,
    "absorbed": 0.10,
}


def emitter(name: str, unit: str = "device", eqe: float = 0.2) -> dict[str, Any]:
    return {
        "name": name,
        "unit": unit,
        "purcell_factor": 1.2345,
        "decay_rate_ratio": 1.2,
        "radiative_efficiency": 0.8,
        "outcoupling_efficiency": 0.25,
        "horizontal_fraction": 0.76,
        "vertical_fraction": 0.24,
        "order_parameter": -0.14,
        "near_field_share": 1e-6,
        "lost_share": 0.0002,
        "destinations": dict(DESTINATIONS),
        "external_quantum_efficiency": eqe,
    }


def chain(unit: str) -> dict[str, Any]:
    dark = {"unbalanced": 0.0, "dark_excitons": 0.0, "nonradiative": 0.2}
    return {"unit": unit, **dark, **{key: 0.8 * share for key, share in DESTINATIONS.items()}}


def budget(*units: str) -> dict[str, Any]:
    units = units or ("device",)
    names = ["green", "red", "blue"][: len(units)]
    total = 0.2 * len(units)
    return {
        "schema": "outcouple.budget/1",
        "version": "0",
        "title": "made-up budget",
        "case_sha256": "0",
        "emitters": [emitter(name, unit) for name, unit in zip(names, units, strict=True)],
        "outcoupling_efficiency": 0.25,
        "destinations": dict(DESTINATIONS),
        "chain": [chain(unit) for unit in units],
        "external_quantum_efficiency": total,
        "external_quantum_efficiency_bottom": total,
        "external_quantum_efficiency_top": 0.0,
        "external_quantum_efficiency_matched": 0.44,
        "accuracy": {"energy_balance": 1.2e-9, "integration_error": 3.1e-8},
        "warnings": ["something [to] heed"],
    }
