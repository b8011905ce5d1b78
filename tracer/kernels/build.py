"""From a field to its compiled kernel, kept on disk for every later process.

Numba's disk cache never finds a function that closes over another compiled function or takes one as an argument,
and a function pointer stops vectorisation. So the chosen point functions are joined by a small generated module,
``field.py``, and the sources of ``tracer/kernels/source`` are copied beside it: one package of plain module-level
functions for each combination, which numba caches as it would any other. The folder's name is a hash of all that
the machine code depends on - the generated text, the sources of fields/, of this folder and of a user's models, the
versions of numba, llvmlite and numpy, the CPU - because numba's own key sees the copied files only.
"""

from __future__ import annotations

import atexit
import hashlib
import importlib
import inspect
import os
import shutil
import sys
import tempfile
from collections.abc import Callable, Iterator
from dataclasses import dataclass
from functools import lru_cache
from importlib.metadata import version
from pathlib import Path
from types import ModuleType
from typing import Any, cast

import numpy as np

from fields.contract import MagneticTerms
from fields.drivers import Driver
from fields.field import Field
from fields.units import Floats
from tracer.kernels import arith
from tracer.kernels.loading import load_library, look_on_disk_first
from tracer.status import Cause

PARENT = "driftrose_kernels"
SOURCE = Path(__file__).parent / "source"
FIELDS = Path(inspect.getfile(Field)).parent
WATCHED = (*sorted(FIELDS.rglob("*.py")), *sorted(Path(__file__).parent.rglob("*.py")), Path(inspect.getfile(Cause)))


@dataclass(frozen=True, eq=False)
class Kernel:
    """A field in compiled form.

    Attributes
    ----------
    module : module
        With the compiled entry points.
    constants : tuple of float
        Arguments of the point functions that do not vary.
    edges : ndarray, shape (n_segment + 1,)
        Corners of all drivers together, hours; -inf and +inf where nothing varies.
    segments : ndarray, shape (n_segment, 1 + 2 n_driver)
        Start of the segment, then value there and slope of each driver.
    fresh : bool
        Whether it had yet to be compiled when this was made; else it stood on the disk.
    """

    module: ModuleType
    constants: tuple[float, ...]
    edges: Floats
    segments: Floats
    fresh: bool


def kernel_for(field: Field, equatorial: bool = False) -> Kernel:
    """The kernel of `field`, `equatorial` for particles that all mirror at the equator; numba compiles it, or reads it
    from the disk, when it is first called."""
    load_library()
    text, constants = field_source(field, equatorial)
    arith.register_pointwise()
    module = load_module(text, tuple(function_files(field, equatorial)))
    edges, segments = driver_table(field.drivers)
    return Kernel(module, constants, edges, segments, not on_disk(module.advance))


@lru_cache(maxsize=1)
def word_sums() -> Callable[..., tuple[int, int]]:
    """The sums behind a checksum, of no field: see ``source/checksum.py``."""
    load_library()
    module = load_module("", (), "checksum", "word_sums")
    return cast(Callable[..., tuple[int, int]], module.word_sums)


def magnetic_terms(field: Field, equatorial: bool) -> MagneticTerms:
    """The magnetic point functions that a kernel is built from."""
    return field.magnetic.equatorial_terms() if equatorial else field.magnetic_terms


def point_functions(field: Field, equatorial: bool) -> Iterator[Callable[..., Any]]:
    """The point functions of a field, in the order of the generated module."""
    magnetic = magnetic_terms(field, equatorial)
    yield from (magnetic.equator, magnetic.mirror, magnetic.foot)
    if magnetic.drift_factor is not None:
        yield magnetic.drift_factor
    yield from (term.function for term in field.electric_terms)


def function_files(field: Field, equatorial: bool) -> Iterator[str]:
    """Source files of the point functions; those of a user's models lie outside both packages."""
    for function in point_functions(field, equatorial):
        yield inspect.getsourcefile(function) or ""


def field_source(field: Field, equatorial: bool = False) -> tuple[str, tuple[float, ...]]:
    """Text of the module that joins the point functions, and the constants it takes.

    Constants come as arguments and not as literals, so that runs which differ in numbers only share one kernel.
    """
    magnetic = magnetic_terms(field, equatorial)
    constants: list[float] = list(magnetic.arguments)
    magnetic_arguments = "".join(f", C[{i}]" for i in range(len(constants)))
    quick = magnetic.drift_factor is not None
    factor = f"drift_factor_(r, s, c{magnetic_arguments})" if quick else "1.0 / (r * equator(r, s, c, C))"
    electric = [f"electric_{i}" for i in range(len(field.electric_terms))]
    names = ("equator_", "mirror_", "foot_", *(["drift_factor_"] if quick else []), *electric)
    lines = [
        f"from {function.__module__} import {function.__name__} as {name}"
        for name, function in zip(names, point_functions(field, equatorial), strict=True)
    ]
    terms = []
    for i, term in enumerate(field.electric_terms):
        arguments = []
        for argument in term.arguments:
            if isinstance(argument, Driver):
                d = 1 + 2 * next(n for n, known in enumerate(field.drivers) if known is argument)
                arguments.append(f", D[{d}] + D[{d + 1}] * (t - D[0])")
            else:
                arguments.append(f", C[{len(constants)}]")
                constants.append(float(argument))
        terms.append(f"    p{i}, r{i}, a{i} = electric_{i}(r, s, c{''.join(arguments)})")
    sums = (" + ".join(f"{part}{i}" for i in range(len(terms))) or "0.0 * s" for part in "pra")
    columns = 1 + 2 * len(field.drivers)
    loads = ", ".join(f"W[at + {i} * stride]" for i in range(columns))
    body = [
        "from tracer.kernels.arith import inlined",
        *lines,
        *("", f"DRIVERS = {len(field.drivers)}"),
        *("", "", "@inlined", "def drivers(W, at, stride):", f"    return ({loads},)"),
        *("", "", "@inlined", "def equator(r, s, c, C):", f"    return equator_(r, s, c{magnetic_arguments})"),
        *("", "", "@inlined", "def drift_factor(r, s, c, C):", f"    return {factor}"),
        *("", "", "@inlined", "def mirror(k, r, s, c, C):", f"    return mirror_(k, r, s, c{magnetic_arguments})"),
        *("", "", "@inlined", "def foot(r, s, c, foot_re, C):"),
        f"    return foot_(r, s, c, foot_re{magnetic_arguments})",
        *("", "", "@inlined", "def potential(r, s, c, t, C, D):", *terms, f"    return {', '.join(sums)}", ""),
    ]
    return "\n".join(body), tuple(constants)


def program_of(field: Field, equatorial: bool = False) -> str:
    """Name of the kernel of `field`, which stands for all that its machine code depends on."""
    return kernel_name(field_source(field, equatorial)[0], tuple(function_files(field, equatorial)))


def driver_table(drivers: tuple[Driver, ...]) -> tuple[Floats, Floats]:
    """Corners of all drivers together, and their values and slopes in each segment between them."""
    if not drivers:
        return np.array([-np.inf, np.inf]), np.zeros((1, 1))
    first = max(d.start_h[0] for d in drivers)
    last = min(d.end_h for d in drivers)
    corners = np.unique(np.concatenate([d.corners() for d in drivers]))
    edges = corners[(corners >= first) & (corners <= last)]
    columns = [edges[:-1]]
    for driver in drivers:
        columns += [driver.at(edges[:-1]), driver.slope[driver.segment(edges[:-1])]]
    return edges, np.ascontiguousarray(np.stack(columns, axis=1))


def cache_root() -> Path:
    """Where kernels are kept: ``DRIFTROSE_CACHE_DIR``, else the user's cache folder, else a temporary one."""
    named, shared = os.environ.get("DRIFTROSE_CACHE_DIR"), os.environ.get("XDG_CACHE_HOME")
    try:
        base = Path(named) if named else Path(shared or Path.home() / ".cache") / "driftrose"
        base.mkdir(parents=True, exist_ok=True)
        with tempfile.TemporaryFile(dir=base):
            return base
    except (OSError, RuntimeError):  # cannot be written, or the user has no home
        return passing_root()


@lru_cache(maxsize=1)
def passing_root() -> Path:
    """A folder for this process alone, gone when it ends."""
    folder = tempfile.mkdtemp(prefix="driftrose-")
    atexit.register(shutil.rmtree, folder, ignore_errors=True)
    return Path(folder)


@lru_cache(maxsize=1)
def sources_digest() -> str:
    """Hash of all sources of this project that a kernel is built from."""
    digest = hashlib.sha256()
    for path in WATCHED:
        digest.update(path.name.encode() + b"\0" + path.read_bytes())
    return digest.hexdigest()


def target() -> tuple[str, str]:
    """Name and features of the processor that kernels are compiled for."""
    from llvmlite.binding import get_host_cpu_features, get_host_cpu_name

    name = os.environ.get("NUMBA_CPU_NAME") or get_host_cpu_name()
    features = os.environ.get("NUMBA_CPU_FEATURES")  # an empty one means none beyond the name's own
    return name, get_host_cpu_features().flatten() if features is None else features


def kernel_name(text: str, files: tuple[str, ...]) -> str:
    """Name of the kernel's package: a hash of all that its machine code depends on."""
    parts = [text, sources_digest(), sys.version, *(version(p) for p in ("numba", "llvmlite", "numpy")), *target()]
    digest = hashlib.sha256("\0".join(parts).encode())
    for file in sorted(set(files)):
        digest.update(Path(file).read_bytes() if file else b"")
    return "k" + digest.hexdigest()[:24]


@lru_cache(maxsize=32)
def load_module(text: str, files: tuple[str, ...], part: str = "advance", entry: str = "advance") -> ModuleType:
    """Import a module of the kernel package of a generated field module, writing it first if this user has none."""
    name = kernel_name(text, files)
    folder = cache_root() / name
    if not folder.is_dir():
        write_package(folder, text)
    for package, path in ((PARENT, folder.parent), (f"{PARENT}.{name}", folder)):
        if package not in sys.modules:
            stub = ModuleType(package)
            stub.__path__ = [str(path)]
            sys.modules[package] = stub
    module = importlib.import_module(f"{PARENT}.{name}.{part}")
    look_on_disk_first(getattr(module, entry))
    return module


def on_disk(function: Any) -> bool:
    """Whether numba has kept machine code of a function; a process that was killed while it compiled has kept none."""
    name = f"{function.__module__.rpartition('.')[2]}.{function.__qualname__}"
    return any(Path(function.stats.cache_path).glob(f"{name}-*.nbc"))


def write_package(folder: Path, text: str) -> None:
    """Write the package under a temporary name and move it into place: another process may do the same."""
    work = Path(tempfile.mkdtemp(prefix=".new-", dir=folder.parent))
    for path in sorted(SOURCE.glob("*.py")):
        shutil.copyfile(path, work / path.name)
    header = '"""Generated: the point functions of one field, joined."""'
    (work / "field.py").write_text(f"{header}\n\n{text}", encoding="utf-8")
    try:
        work.rename(folder)
    except OSError:
        shutil.rmtree(work)
        if not folder.is_dir():
            raise
