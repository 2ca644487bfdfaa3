"""The command line: `curvewright serve`, `solve`, `check`, `samples`, `ready`.

Exit codes: 0 the verdict is of the sort that was sought (or the document is fine), 1 a weaker verdict or none,
2 the document or the call was refused.  Modules are imported by the command that needs them: `serve` never loads the
solver, and `--help` loads nothing.
"""

from __future__ import annotations

import gc
import json
import os
import sys
from collections.abc import Iterator, Mapping
from contextlib import contextmanager, suppress
from pathlib import Path
from typing import TYPE_CHECKING, Any

import click

from service.threads import ONE_THREAD
from web.media_types import PARTS

if TYPE_CHECKING:
    from service.complaints import Refused

SOUGHT = {
    "minimum": {"global minimum", "local minimum"},
    "maximum": {"global maximum", "local maximum"},
    "stationary": {"stationary", "global minimum", "local minimum", "global maximum", "local maximum"},
}
"""The sort of extremum asked for -> the verdicts that are it."""

REFUSED = 2


@click.group(context_settings={"help_option_names": ["-h", "--help"]})
@click.version_option(package_name="curvewright")
def main() -> None:
    """Optimal curves, shapes and motions with their evidence."""
    os.environ.update(ONE_THREAD)


@main.command()
@click.option("--host", help="Address to listen on; beyond this machine only with --open.  [default: 127.0.0.1]")
@click.option("--port", type=click.IntRange(0, 65535), help="Port to listen on, 0 for any free one.  [default: 8710]")
@click.option("--data", type=click.Path(path_type=Path, file_okay=False), help="Directory of the database.")
@click.option("--workers", type=click.IntRange(1, 256), help="Runs solved at the same time.  [default: all cores]")
@click.option("--open", "open_", is_flag=True, default=None, help="Let other machines in, although there are no keys.")
def serve(host: str | None, port: int | None, data: Path | None, workers: int | None, open_: bool | None) -> None:
    """Serve pages and the HTTP interface until interrupted.

    What is not given is read from environment variables (CURVEWRIGHT_PORT and so on).
    """
    gc.disable()  # a fifth of the start is the collector looking through what stays anyway; `serve.run` enables it
    os.environ.setdefault("PYDANTIC_DISABLE_PLUGINS", "__all__")  # there are none, and looking for them takes a while
    from pydantic import ValidationError

    from service.run import StoreError
    from service.serve import ListenError, run
    from service.settings import Settings

    given = {"host": host, "port": port, "data": data, "workers": workers, "open": open_}
    try:
        settings = Settings(**{name: value for name, value in given.items() if value is not None})
    except ValidationError as error:
        problems = "; ".join(f"{'.'.join(map(str, item['loc']))}: {item['msg']}" for item in error.errors())
        raise click.UsageError(f"The settings do not hold together: {problems}") from None
    if not settings.loopback and not settings.open:
        raise click.UsageError(
            f"{settings.host} can be reached from other machines, and this service has no keys yet: whoever reaches it "
            "can read, start and delete every run. Give --open if that is what you want, or leave --host out."
        )
    if not settings.loopback:
        click.echo(f"Warning: open to every machine that reaches {settings.host}; there are no keys.", err=True)
    try:
        # Started in the background by a shell without a terminal, the interrupt ends the server without an exception.
        with suppress(KeyboardInterrupt):
            run(settings, announce=lambda address: click.echo(f"Curvewright serves at {address} (stop with Ctrl-C)"))
    except (ListenError, StoreError) as error:
        raise click.ClickException(str(error)) from None
    click.echo("Stopped.", err=True)


@main.command()
@click.argument("file")
@click.option("--json", "as_json", is_flag=True, help="Print the result document instead of the summary.")
@click.option("--table", type=click.Path(path_type=Path, dir_okay=False), help="Write a table: .csv .json .xlsx .npz")
@click.option("--rows", type=int, help="Rows of the table, evenly spaced, both ends included.")
@click.option("--step", type=float, help="Step of the table in the unit of the independent variable.")
@click.option("--derivatives", type=click.IntRange(0, 3), default=0, help="Derivatives in the table.")
@click.option("--sigma", is_flag=True, help="In the table, one standard deviation from tolerances.")
@click.option(
    "--part",
    "parts",
    type=(click.Choice(PARTS), click.Path(path_type=Path, dir_okay=False)),
    multiple=True,
    metavar="PART FILE",
    help=f"Write a part of the result likewise, one of {', '.join(PARTS)}; may be given several times.",
)
def solve(
    file: str,
    as_json: bool,
    table: Path | None,
    rows: int | None,
    step: float | None,
    derivatives: int,
    sigma: bool,
    parts: tuple[tuple[str, Path], ...],
) -> None:
    """Solve the problem in FILE (- for standard input, or the name of a sample)."""
    body = _body(file)
    suffix = _suffix(table, rows, step)
    suffixes = [_suffix(path, None, None) for _, path in parts]
    result = _solved(body)
    if table is not None:
        _write_table(result, table, suffix, rows=rows, step=step, derivatives=derivatives, sigma=sigma)
    for (part, path), its_suffix in zip(parts, suffixes, strict=True):
        _write_part(result, part, path, its_suffix)
    if as_json:
        click.echo(json.dumps(result, ensure_ascii=False, allow_nan=False))
    else:
        from service.summary import result_text

        click.echo(result_text(result))
    seek = result["problem"].get("functional", {}).get("seek", "minimum")  # a mere fit to observations names none
    sys.exit(0 if result["verdict"] in SOUGHT[seek] else 1)


@main.command()
@click.argument("file")
@click.option("--json", "as_json", is_flag=True, help="Print the reading as JSON.")
def check(file: str, as_json: bool) -> None:
    """Say how the problem in FILE (- for standard input, or a sample) is understood, without solving it."""
    from service.assemble import assemble
    from service.reading import read_back
    from service.spec import read

    with _refusals(body := _body(file)):
        document = read(body)
        reading = read_back(assemble(document), document)
    if as_json:
        click.echo(json.dumps(reading, ensure_ascii=False, allow_nan=False))
        return
    from service.summary import reading_text

    click.echo(reading_text(document.source, reading))


@main.command()
@click.argument("name", required=False)
def samples(name: str | None) -> None:
    """List the sample problems, or print the document of the one called NAME; each name can stand for FILE."""
    from service.samples import ABOUT, text

    if name is None:
        for known, sentence in ABOUT.items():
            click.echo(f"{known:<24}{sentence}")
    elif name in ABOUT:
        click.echo(text(name), nl=False)
    else:
        raise click.UsageError(f"There is no sample '{name}' (`curvewright samples` lists them).")


@main.command()
def ready() -> None:
    """Say whether the server that the settings name is ready for runs: exit 0, else 1."""
    from service.ready import is_ready
    from service.settings import Settings

    good = is_ready(Settings())
    click.echo("ready" if good else "not ready")
    sys.exit(0 if good else 1)


def _body(file: str) -> bytes:
    """The bytes of FILE: standard input, a file, or a sample where there is no such file."""
    if file == "-":
        return sys.stdin.buffer.read()
    path = Path(file)
    if path.is_file():
        return path.read_bytes()
    from service.samples import names, text

    if file in names():
        return text(file).encode()
    raise click.UsageError(f"There is no file '{file}', and no sample of that name (see `curvewright samples`).")


@contextmanager
def _refusals(body: bytes) -> Iterator[None]:
    """Print the complaints of a refused document and exit."""
    from service.complaints import Refused

    try:
        yield
    except Refused as refused:
        _refuse(refused, body)


def _refuse(refused: Refused, body: bytes) -> None:
    from service.summary import refusal_text

    click.echo(refusal_text(refused, body), err=True)
    sys.exit(REFUSED)


def _solved(body: bytes) -> dict[str, Any]:
    """Read, solve and archive in this process; Ctrl-C stops with the best curve so far."""
    from service.memory import keep_freed
    from service.spec import read
    from service.terminal import interruptible, progress_bar

    keep_freed()
    with _refusals(body):
        tolerance = read(body).solve.tolerance
        with interruptible() as stop, progress_bar(tolerance) as report:
            from service.engine.beside import Beside
            from service.jobs import perform  # loads the solver

            together = Beside(len(os.sched_getaffinity(0)))
            return perform(body.decode("utf-8-sig"), report, stop, together=together)
    raise AssertionError("a refusal exits")


def _suffix(table: Path | None, rows: int | None, step: float | None) -> str:
    """The format of the table by its suffix; refused before the solve, not after it."""
    from web.tables import FILE_FORMATS

    if table is None:
        if rows is not None or step is not None:
            raise click.UsageError("--rows and --step belong to --table.")
        return ""
    if rows is not None and step is not None:
        raise click.UsageError("Give --rows or --step, not both.")
    suffix = table.suffix.removeprefix(".").lower()
    if suffix not in FILE_FORMATS:
        raise click.UsageError(f"A table is written as {', '.join('.' + known for known in FILE_FORMATS)}.")
    return suffix


def _write_part(result: Mapping[str, Any], part: str, path: Path, suffix: str) -> None:
    from web.tables import FILE_FORMATS, TableError, part_table

    try:
        path.write_bytes(FILE_FORMATS[suffix].write(part_table(result, part)))
    except TableError as error:
        click.echo(f"No table: {error.message} {error.hint}", err=True)
    else:
        click.echo(f"{part.capitalize()} written to {path}", err=True)


def _write_table(result: Mapping[str, Any], path: Path, suffix: str, **choice: Any) -> None:
    from web.tables import FILE_FORMATS, TableError, table

    try:
        path.write_bytes(FILE_FORMATS[suffix].write(table(result, **choice)))
    except TableError as error:
        click.echo(f"No table: {error.message} {error.hint}", err=True)
    else:
        click.echo(f"Table written to {path}", err=True)
