"""The trajectory file (HDF5): `open` and `kind` read, `TrajectoryWriter` writes, `repack` compresses.

No h5py but in ``store_*``.
"""

from tracer.store_attrs import FORMAT, FORMAT_VERSION, digest, provenance
from tracer.store_layout import ROWS, most_rows, track_chunk
from tracer.store_output import check_output, expected_bytes, finished, size_text
from tracer.store_reader import Columns, kind, open
from tracer.store_repack import repack
from tracer.store_writer import TrajectoryWriter

__all__ = [
    "FORMAT",
    "FORMAT_VERSION",
    "ROWS",
    "Columns",
    "TrajectoryWriter",
    "check_output",
    "digest",
    "expected_bytes",
    "finished",
    "kind",
    "most_rows",
    "open",
    "provenance",
    "repack",
    "size_text",
    "track_chunk",
]
