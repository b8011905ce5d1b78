"""A hash over the labels of a trajectory file: the attributes below the root, and which scale stands on which axis.

HDF5 keeps text and references where no checksum of its own covers them.
"""

from __future__ import annotations

from typing import Any

import h5py

from tracer.store_attrs import digest, plain_value

LABELS = "labels_sha256"
SCALES = ("DIMENSION_LIST", "REFERENCE_LIST")  # as HDF5 keeps them; their meaning is hashed


def labels_digest(file: h5py.File) -> str:
    """SHA-256 (hex) over everything that labels groups and datasets."""
    labels: dict[str, Any] = {}

    def add(name: str, item: h5py.Group | h5py.Dataset) -> None:
        found: dict[str, Any] = {key: plain_value(value) for key, value in item.attrs.items() if key not in SCALES}
        if isinstance(item, h5py.Dataset) and SCALES[0] in item.attrs:
            found["scales"] = [[scale.name for scale in axis.values()] for axis in item.dims]
        labels[name] = digest(found)

    file.visititems(add)
    return digest(labels)
