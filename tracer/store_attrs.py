"""The root attributes of a trajectory file: where it came from, what it was made with, the hash that guards them."""

from __future__ import annotations

import hashlib
import json
import platform
import sys
from collections.abc import Mapping
from datetime import UTC, datetime
from functools import cache
from importlib.metadata import PackageNotFoundError, version
from pathlib import Path
from typing import Any

import numpy as np

from fields.field import Field
from tracer import __version__
from tracer.records import CAUTION
from tracer.scenario import Scenario

FORMAT = "driftrose trajectories"
FORMAT_VERSION = 1
ACCESS_FORMAT = "driftrose access"
ACCESS_VERSION = 1
DIGEST = "attrs_sha256"
LIBRARIES = ("numba", "numpy", "scipy", "h5py")


def provenance(scenario: Scenario) -> dict[str, Any]:
    """What must be known of a run to believe it or to repeat it, as the root attributes of its file.

    Mappings and lists are JSON text: ``input_sha256`` (path as written -> hex), ``population_names``,
    ``species_names``, ``seeds`` (population -> seed), ``field`` (the models and their parameters), ``drivers``
    (name and hold of each).
    """
    domain, output = scenario.domain, scenario.output
    return {
        "format": FORMAT,
        "format_version": FORMAT_VERSION,
        **versions(),
        **processor(),
        "title": scenario.title,
        "caution": CAUTION,
        "run_file_name": scenario.origin.file,
        "run_file": scenario.origin.text,
        "input_sha256": json.dumps(scenario.origin.input_sha256, ensure_ascii=False, sort_keys=True),
        "start": iso_utc(scenario.start),
        "hours": float(scenario.hours),
        "backward": bool(scenario.backward),
        "outer_re": float(domain.outer_re),
        "inner_re": float(domain.inner_re),
        "foot_altitude_km": float(domain.foot_altitude_km),
        "loss_cone": scenario.loss_cone,
        "every_min": float(output.every_min),
        "tolerance_re": float(output.tolerance_re),
        "tracks": output.tracks,
        "population_names": json.dumps([p.name for p in scenario.populations], ensure_ascii=False),
        "species_names": json.dumps([s.name for s in scenario.species], ensure_ascii=False),
        "seeds": json.dumps({p.name: int(p.seed) for p in scenario.populations}, ensure_ascii=False),
        "drivers": json.dumps([{"name": d.name, "hold": d.hold} for d in scenario.field.drivers], ensure_ascii=False),
        "field": described_field(scenario.field),
    }


def described_field(field: Field) -> str:
    """The models of a field and their parameters, as JSON."""
    models = {"magnetic": field.magnetic.described(), "electric": [model.described() for model in field.electric]}
    return json.dumps(models, ensure_ascii=False, default=float)


def iso_utc(moment: datetime) -> str:
    """``2027-03-04T00:00:00Z``; a time without a zone is UTC; fractions of a second only where there are any."""
    utc = moment.replace(tzinfo=UTC) if moment.tzinfo is None else moment.astimezone(UTC)
    return utc.replace(tzinfo=None).isoformat() + "Z"


@cache
def versions() -> dict[str, str]:
    """Versions of this program, of Python and of the libraries that shape a result; none of them is loaded for it."""
    found = {"driftrose_version": __version__, "python_version": platform.python_version()}
    for name in LIBRARIES:
        try:
            found[f"{name}_version"] = version(name)
        except PackageNotFoundError:
            found[f"{name}_version"] = "not installed"
    return found


@cache
def processor() -> dict[str, str]:
    """Model and instruction sets of the processor: compiled code, and so the last bits of a result, depend on
    them."""
    listed: dict[str, str] = {}
    try:
        for line in Path("/proc/cpuinfo").read_text(encoding="utf-8", errors="replace").splitlines():
            name, _, value = line.partition(":")
            listed.setdefault(name.strip().lower(), value.strip())
    except OSError:  # not Linux
        pass
    model = listed.get("model name") or platform.processor() or "unknown"
    features = listed.get("flags") or listed.get("features") or ""
    return {
        "cpu": f"{model} ({platform.machine()}, {sys.byteorder}-endian)",
        "cpu_features": " ".join(sorted(features.split())),
    }


def digest(attrs: Mapping[str, Any]) -> str:
    """SHA-256 (hex) over the root attributes, `attrs_sha256` itself left out.

    The bytes hashed are UTF-8 JSON of one object, names sorted by code point, without blanks, non-ASCII characters as
    themselves: text as strings, truth values as true and false, integers in decimal, other numbers as the shortest
    decimal that gives back the same float64, arrays as lists. In Python: ``json.dumps(attrs, sort_keys=True,
    separators=(",", ":"), ensure_ascii=False)``.
    """
    plain = {name: plain_value(value) for name, value in attrs.items() if name != DIGEST}
    text = json.dumps(plain, sort_keys=True, separators=(",", ":"), ensure_ascii=False)
    return hashlib.sha256(text.encode("utf-8", errors="surrogatepass")).hexdigest()


def plain_value(value: Any) -> Any:
    """An attribute as str, bool, int, float or a list of them."""
    if isinstance(value, bytes):
        return value.decode("utf-8", errors="surrogateescape")
    if isinstance(value, (np.ndarray, np.generic)):
        return plain_value(value.tolist())
    if isinstance(value, (list, tuple)):
        return [plain_value(item) for item in value]
    return value
