"""Kill traces at random moments, resume them until they are complete, and compare every bit with an undisturbed run."""

from __future__ import annotations

import argparse
import random
import signal
import subprocess
import sys
import tempfile
import time
from collections.abc import Callable
from pathlib import Path

import h5py
import numpy as np

import tracer
from tracer.templates import new_runfile

ROOT = Path(__file__).resolve().parent.parent
LATE = " (too late)"
POLL_S = 0.0005


def main() -> int:
    """Run the trials and say how many passed."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--kills", type=int, default=30, metavar="N", help="trials, with one kill or more each")
    parser.add_argument("--seed", type=int, default=1)
    given = parser.parse_args()
    moments = random.Random(given.seed)
    failed = 0
    with tempfile.TemporaryDirectory(prefix="driftrose-torture-") as name:
        folder = Path(name)
        run = small_run(folder)
        began = time.perf_counter()
        finish(start(run, folder / "whole.h5"))
        usual_s = time.perf_counter() - began
        reference = contents(folder / "whole.h5")
        print(f"{len(reference)} datasets; an undisturbed run takes {usual_s:.1f} s", flush=True)
        for number in range(1, given.kills + 1):
            told, fault = trial(run, folder / f"{number}.h5", reference, moments, usual_s)
            failed += bool(fault)
            print(f"{number:3}  {'FAILED: ' + fault if fault else 'passed'}  ({told})", flush=True)
    print(f"{given.kills - failed} passed, {failed} failed")
    return 1 if failed else 0


def small_run(folder: Path) -> Path:
    """The shipped storm, small enough to be killed often and large enough to be killed halfway."""
    run = folder / "storm.toml"
    new_runfile(str(run))
    text = run.read_text("utf-8")
    for old, new in (("count = 20000", "count = 6000"), ("hours = 24.0", "hours = 9.0")):
        if old not in text:
            raise SystemExit(f"the shipped storm no longer says {old}")
        text = text.replace(old, new)
    run.write_text(text, "utf-8")
    return run


def trial(run: Path, out: Path, reference: dict[str, bytes], moments: random.Random, usual_s: float) -> tuple[str, str]:
    """One run, killed at least once: what was done to it, and what is wrong with the result."""
    told = [killed(start(run, out), out, moments, usual_s)]
    while LATE in told[-1]:
        out.unlink()
        told[-1] = killed(start(run, out), out, moments, usual_s)
    while moments.random() < 0.4:
        told.append(killed(start(run, out, *again(out)), out, moments, usual_s))
        if out.exists() and (fault := differences(out, reference)):  # it stands there only when it is whole
            return ", ".join(told), f"the unfinished file is in place: {fault}"
    done = start(run, out, *again(out))
    status, message = finish(done)
    if status:
        return ", ".join(told), f"resumed, it ends with exit status {status}: {message}"
    left = [path.name for path in out.parent.glob(f"{out.name}.*")]
    fault = f"left behind: {', '.join(left)}" if left else differences(out, reference)
    out.unlink()
    return ", ".join(told), fault


def again(out: Path) -> list[str]:
    """The option to go on with; none when the process died before it had made anything."""
    return ["--resume"] if out.exists() or Path(f"{out}.part").exists() else []


def start(run: Path, out: Path, *options: str) -> subprocess.Popen[str]:
    command = [sys.executable, "-m", "tracer", "trace", str(run), "-o", str(out), "--quiet", *options]
    return subprocess.Popen(command, cwd=ROOT, stderr=subprocess.PIPE, stdout=subprocess.PIPE, text=True)


def finish(process: subprocess.Popen[str]) -> tuple[int, str]:
    _, message = process.communicate()
    return process.returncode, message.strip()


def killed(process: subprocess.Popen[str], out: Path, moments: random.Random, usual_s: float) -> str:
    """Kill a process at some moment: any, some time after the file appeared, or in its very last steps."""
    log = Path(f"{out}.part.log")
    kind = moments.choice(["any", "writing", "writing", "closing"])
    if kind == "any":
        wait(process, lambda: False, moments.uniform(0.0, 1.1 * usual_s))
    elif kind == "writing":
        wait(process, log.exists, 10.0 * usual_s)
        wait(process, lambda: False, moments.uniform(0.0, 0.25 * usual_s))
    else:
        wait(process, lambda: closing(log), 10.0 * usual_s)
        wait(process, lambda: False, moments.uniform(0.0, 0.02))
    came_late = process.poll() is not None
    process.send_signal(signal.SIGKILL)
    finish(process)
    return kind + LATE if came_late else kind


def closing(log: Path) -> bool:
    """Whether the last record has been logged."""
    try:
        return b'{"close":' in log.read_bytes()
    except FileNotFoundError:
        return False


def wait(process: subprocess.Popen[str], until: Callable[[], bool], most_s: float) -> None:
    end = time.perf_counter() + most_s
    while time.perf_counter() < end and process.poll() is None and not until():
        time.sleep(POLL_S)


def contents(path: Path) -> dict[str, bytes]:
    """Every dataset and every root attribute, as bytes."""
    tracer.open(path)
    found: dict[str, bytes] = {}
    with h5py.File(path) as file:
        file.visititems(
            lambda n, item: found.update({n: item[...].tobytes()} if isinstance(item, h5py.Dataset) else {})
        )
        found |= {
            f"attribute {name}": np.asarray(value).tobytes()
            for name, value in file.attrs.items()
            if not isinstance(value, str)
        }
        found |= {f"attribute {name}": value.encode() for name, value in file.attrs.items() if isinstance(value, str)}
    return found


def differences(path: Path, reference: dict[str, bytes]) -> str:
    try:
        found = contents(path)
    except tracer.InputError as error:
        return str(error)
    names = sorted(name for name in {*found, *reference} if found.get(name) != reference.get(name))
    return f"other bits in {', '.join(names)}" if names else ""


if __name__ == "__main__":
    sys.exit(main())
