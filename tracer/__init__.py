"""driftrose: where charged particles drift in the inner magnetosphere, and which of them get there."""

from __future__ import annotations

from importlib import import_module
from typing import Any

__version__ = "0.1.0"

# Public name -> module that holds it. Resolved on first use, so that `import tracer` loads nothing heavy.
_HOMES = {
    "InputError": "fields.errors",
    "Stopped": "tracer.stopping",
    "Result": "tracer.records",
    "Scenario": "tracer.scenario",
    "load": "tracer.runfile",
    "build": "tracer.runfile",
    "trace": "tracer.pipeline",
    "access": "tracer.access_run",
    "AccessResult": "tracer.access_records",
    "open": "tracer.opening",
    "repack": "tracer.store",
    "invariants": "tracer.adiabatic",
    "from_invariants": "tracer.adiabatic",
    "periods": "tracer.adiabatic",
    "drift_rate": "tracer.adiabatic",
    "hamiltonian_keV": "tracer.adiabatic",
    "bounce_T": "tracer.adiabatic",
    "bounce_Y": "tracer.adiabatic",
    "boundaries": "tracer.steady",
    "classify": "tracer.steady",
    "regions": "tracer.steady",
    "check": "tracer.preview",
    "draw": "tracer.figures",
}

__all__ = ["__version__", *_HOMES]


def __getattr__(name: str) -> Any:
    if name not in _HOMES:
        raise AttributeError(f"module 'tracer' has no attribute {name!r}")
    return getattr(import_module(_HOMES[name]), name)


def __dir__() -> list[str]:
    return sorted(__all__)
