"""What this process takes of the machine's memory."""

from __future__ import annotations

import re
import sys
from pathlib import Path

STATUS = Path("/proc/self/status")


def peak_bytes() -> int:
    """The most memory that was resident at any moment since this program began.

    The largest resident set: all pages of the process that stood in the machine's memory at that moment, be they its
    own or those of libraries that other processes share. What the system keeps of written files in its cache is not
    in it, nor are worker processes. Taken from ``getrusage``; on Linux from ``/proc``, for there ``getrusage`` also
    counts the process that started this one.
    """
    found = _told("VmHWM")
    if found is not None:
        return found
    import resource

    peak = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss
    return int(peak if sys.platform == "darwin" else peak * 1024)


def resident_bytes() -> int:
    """The same at this moment; the peak where the system does not tell."""
    found = _told("VmRSS")
    return peak_bytes() if found is None else found


def _told(name: str) -> int | None:
    """A line of the kernel's account of this process, in bytes; see proc(5)."""
    try:
        line = re.search(rf"^{name}:\s*(\d+) kB$", STATUS.read_text("utf-8", "replace"), re.MULTILINE)
    except OSError:
        return None
    return int(line[1]) * 1024 if line else None
