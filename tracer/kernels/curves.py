"""From a field to the search for its level curves: that is compiled once, the Hamiltonian of a field called by
address."""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache
from types import ModuleType

import numpy as np

from fields.field import Field
from fields.units import Floats
from tracer.kernels import arith
from tracer.kernels.build import driver_table, field_source, function_files, load_module
from tracer.kernels.loading import load_library


@dataclass(frozen=True, eq=False)
class Hamiltonian:
    """The Hamiltonian of a field in compiled form.

    Attributes
    ----------
    module : module
        ``source/hamiltonian.py`` with the field's point functions.
    constants : ndarray
        Arguments of the point functions that do not vary.
    edges, segments : ndarray
        As of `tracer.kernels.build.Kernel`.
    """

    module: ModuleType
    constants: Floats
    edges: Floats
    segments: Floats

    @property
    def addresses(self) -> tuple[int, int]:
        """Of the function of a place and of that along a circle; good as long as this object is kept."""
        return self.module.at_point.address, self.module.along_circle.address

    def drivers_at(self, time_h: Floats) -> Floats:
        """The drivers' rows at instants, shape (n, 1 + 2 n_driver); the later side at a corner."""
        segment = np.searchsorted(self.edges, time_h, side="right") - 1
        return np.asarray(self.segments[np.clip(segment, 0, len(self.segments) - 1)])


def hamiltonian_of(field: Field) -> Hamiltonian:
    """Build or load the Hamiltonian of `field`."""
    load_library()
    text, constants = field_source(field)
    arith.register_pointwise()
    module = load_module(text, tuple(function_files(field, False)), "hamiltonian", "at_point")
    return Hamiltonian(module, np.array(constants, dtype=float), *driver_table(field.drivers))


@lru_cache(maxsize=1)
def contours() -> ModuleType:
    """The search for stationary points and level curves, of no field: see ``source/contours.py``."""
    load_library()
    return load_module("", (), "contours", "find_boundaries")
