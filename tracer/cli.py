"""The command ``driftrose``: parse, call, print, exit status. Each command imports what it needs when it runs."""

from __future__ import annotations

import gc
import json
import math
import signal
import sys
from collections.abc import Sequence
from pathlib import Path
from typing import Any, NoReturn

import click

from fields.errors import PREFIX, InputError
from tracer import __version__
from tracer.stopping import Stopped

DONE, INTERNAL, BAD_INPUT, STOPPED = 0, 1, 2, 3
COLLECT_AFTER = 50_000  # new objects: imports make many and no garbage, and looking for it takes 5 % of the start


@click.group(context_settings={"help_option_names": ["-h", "--help"]})
@click.version_option(__version__, prog_name=PREFIX)
def command() -> None:
    """Trace charged particles as they drift through the inner magnetosphere.

    A run file says which storm, fields and particles. Start with `driftrose new storm.toml`.
    """


@command.command()
@click.argument("file", type=click.Path())
@click.option("--like", default="storm", show_default=True, metavar="NAME", help="The shipped scenario to copy.")
def new(file: str, like: str) -> None:
    """Write a commented run file to start from; never overwrites."""
    from tracer.templates import new_runfile

    for path in new_runfile(file, like):
        click.echo(f"wrote {path}")


@command.command()
@click.argument("name", required=False)
@click.option("--json", "as_json", is_flag=True, help="Print one JSON object.")
def models(name: str | None, as_json: bool) -> None:
    """List the field models, or one with its parameters, units and references."""
    from tracer.listing import described, text

    found = described(name)
    click.echo(_json(found) if as_json else text(found, whole=name is not None))


@command.command()
@click.argument("run", type=click.Path())
@click.option("--json", "as_json", is_flag=True, help="Print one JSON object.")
def check(run: str, as_json: bool) -> None:
    """Validate RUN; say what it would compute and cost, and where drift theory holds."""
    from tracer.preview import check as preview
    from tracer.runfile import load
    from tracer.tables import preview_text
    from tracer.terminal import watcher

    found = preview(load(run), watcher=watcher(quiet=False))
    click.echo(_json(found) if as_json else preview_text(found))


@command.command()
@click.argument("run", type=click.Path())
@click.option("-o", "--output", type=click.Path(), help="Trajectory file to write.  [default: RUN's stem.h5, here]")
@click.option("--overwrite", is_flag=True, help="Replace an existing file, once the new one is whole.")
@click.option("--resume", is_flag=True, help="Go on with a run that was interrupted, to the same bits.")
@click.option("--threads", type=click.IntRange(1, 1024), help="Threads to use.  [default: all; of a worker, 1]")
@click.option("--workers", type=click.IntRange(1, 1024), metavar="N", help="Worker processes to use on this machine.")
@click.option("--scheduler", metavar="ADDRESS", help="A dask.distributed cluster to use: address or scheduler file.")
@click.option("--quiet", is_flag=True, help="No progress, no closing table.")
@click.option("--json", "as_json", is_flag=True, help="Print one JSON object in place of the table.")
def trace(
    run: str,
    output: str | None,
    overwrite: bool,
    resume: bool,
    threads: int | None,
    workers: int | None,
    scheduler: str | None,
    quiet: bool,
    as_json: bool,
) -> None:
    """Trace all particles of RUN into a trajectory file."""
    from tracer.analysis.summary import sentences
    from tracer.pipeline import trace as trace_run
    from tracer.runfile import load
    from tracer.tables import closing, closing_text
    from tracer.terminal import watcher

    out = output or f"{Path(run).stem}.h5"
    scenario = load(run)
    result = trace_run(
        scenario,
        out,
        overwrite=overwrite,
        resume=resume,
        threads=threads,
        workers=workers,
        scheduler=scheduler,
        watcher=watcher(quiet, (*scenario.field.warnings(), *scenario.origin.remarks)),
    )
    if as_json:
        click.echo(_json({"file": out, "disk_bytes": Path(out).stat().st_size, **closing(result)}))
    elif not result.work:
        click.echo(f"{out}: complete already, nothing to resume")
    elif not quiet:
        click.echo(closing_text(result))
        click.echo("")
        for line in sentences(result):
            click.echo(line)
        click.echo(f"wrote {out}")


@command.command()
@click.argument("run", type=click.Path())
@click.option("-o", "--output", type=click.Path(), help="Access file to write.  [default: RUN's stem.access.h5, here]")
@click.option("--overwrite", is_flag=True, help="Replace existing files, once the new ones are whole.")
@click.option("--resume", is_flag=True, help="Go on with a run that was interrupted, to the same bits.")
@click.option("--threads", type=click.IntRange(1, 1024), help="Threads to use.  [default: all]")
@click.option("--quiet", is_flag=True, help="No progress, no closing table.")
@click.option("--json", "as_json", is_flag=True, help="Print one JSON object in place of the table.")
def access(
    run: str, output: str | None, overwrite: bool, resume: bool, threads: int | None, quiet: bool, as_json: bool
) -> None:
    """Find out what can reach the places and orbits of RUN, when, and from where."""
    from tracer.access_csv import written
    from tracer.access_run import access as access_run
    from tracer.access_tables import closing, closing_text
    from tracer.runfile import load
    from tracer.terminal import watcher

    out = output or f"{Path(run).stem}.access.h5"
    scenario = load(run)
    warnings = (*scenario.field.warnings(), *scenario.origin.remarks)
    found = access_run(
        scenario, out, overwrite=overwrite, resume=resume, threads=threads, watcher=watcher(quiet, warnings)
    )
    tables = written(found, out)
    if as_json:
        click.echo(_json({"file": out, "tables": tables, "disk_bytes": Path(out).stat().st_size, **closing(found)}))
    elif not found.work:
        click.echo(f"{out}: complete already, nothing to resume")
    elif not quiet:
        click.echo(closing_text(found))
        for name in (out, *tables):
            click.echo(f"wrote {name}")


@command.command()
@click.argument("file", type=click.Path())
@click.option("-o", "--output", type=click.Path(), required=True, help="Trajectory file to write.")
@click.option("--level", type=click.IntRange(1, 9), default=4, show_default=True, help="1: fastest; 9: smallest.")
@click.option("--overwrite", is_flag=True, help="Replace an existing file, once the new one is whole.")
def repack(file: str, output: str, level: int, overwrite: bool) -> None:
    """Write FILE once more, compressed; all numbers stay the same."""
    from tracer.store import repack as repack_file
    from tracer.store import size_text

    before, after = repack_file(file, output, level=level, overwrite=overwrite)
    click.echo(f"wrote {output}: {size_text(after)} in place of {size_text(before)}")


@command.command()
@click.argument("file", type=click.Path())
@click.option("-o", "--output", "directory", type=click.Path(), default=".", help="Folder for them.  [default: here]")
@click.option("--format", "format_", type=click.Choice(["png", "svg", "pdf"]), default="png", show_default=True)
@click.option(
    "--arrival-r-re", type=float, metavar="R", help="Distance of the arrivals figure.  [default: a telling one]"
)
@click.option("--arrival-mlt-h", type=(float, float), metavar="FROM TO", help="Its sector of local time, eastward.")
@click.option("--overwrite", is_flag=True, help="Replace existing figures.")
def draw(
    file: str,
    directory: str,
    format_: str,
    arrival_r_re: float | None,
    arrival_mlt_h: tuple[float, float] | None,
    overwrite: bool,
) -> None:
    """Draw the figures that fit FILE."""
    from tracer.figures import draw as draw_file

    written = draw_file(
        file,
        directory,
        format=format_,
        overwrite=overwrite,
        arrival_r_re=arrival_r_re,
        arrival_mlt_h=arrival_mlt_h,
    )
    for path in written:
        click.echo(f"wrote {path}")


def main(arguments: Sequence[str] | None = None) -> int:
    """Run the command and return its exit status: 0 done, 1 internal failure, 2 bad input, 3 stopped early."""
    previous = _stop_on_terminate()
    stdout = sys.stdout
    thresholds = gc.get_threshold()
    gc.set_threshold(COLLECT_AFTER, *thresholds[1:])
    try:
        command.main(args=None if arguments is None else list(arguments), prog_name=PREFIX, standalone_mode=False)
        return DONE
    except InputError as error:
        click.echo(str(error), err=True)
        return BAD_INPUT
    except Stopped as error:
        click.echo(f"{PREFIX}: {error}", err=True)
        return STOPPED
    except (KeyboardInterrupt, click.Abort):
        click.echo(f"{PREFIX}: stopped", err=True)
        return STOPPED
    except click.ClickException as error:
        error.show()
        return error.exit_code
    except click.exceptions.Exit as error:
        return error.exit_code
    except SystemExit:
        if sys.stdout is not stdout:  # click wraps it, and leaves, when the reader of a pipe has gone
            return DONE
        raise
    except Exception as error:  # the one place that may not leak a fault as anything but status 1
        _explain(error)
        return INTERNAL
    finally:
        gc.set_threshold(*thresholds)
        if previous is not None:
            signal.signal(signal.SIGTERM, previous)


def _stop_on_terminate() -> Any:
    """Let SIGTERM do what Ctrl-C does; only the main thread may."""

    def stop(*_: Any) -> NoReturn:
        raise KeyboardInterrupt

    try:
        return signal.signal(signal.SIGTERM, stop)
    except ValueError:
        return None


def _json(found: dict[str, Any]) -> str:
    """One JSON object; a number that is not finite, which JSON cannot hold, becomes null."""

    def finite(value: Any) -> Any:
        if isinstance(value, dict):
            return {key: finite(member) for key, member in value.items()}
        if isinstance(value, (list, tuple)):
            return [finite(member) for member in value]
        return None if isinstance(value, float) and not math.isfinite(value) else value

    return json.dumps(finite(found), indent=2, allow_nan=False)


def _explain(error: Exception) -> None:
    import traceback

    traceback.print_exception(error)
    click.echo(f"{PREFIX}: internal failure ({type(error).__name__}); the lines above are for its makers", err=True)
