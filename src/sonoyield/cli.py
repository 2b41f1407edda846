"""The command line: nothing but wiring. Data on stdout, all else on stderr."""

from __future__ import annotations

import os
import signal
import sys
from collections.abc import Iterator, Sequence
from contextlib import contextmanager
from io import TextIOWrapper
from pathlib import Path
from typing import TYPE_CHECKING, Annotated

import typer

from sonoyield._version import __version__
from sonoyield.targets import Targets, check_targets, refuse, refuse_resolved_only, write_targets

if TYPE_CHECKING:
    from sonoyield.decide.explain import Explanation
    from sonoyield.describe.protocol import Protocol
    from sonoyield.expose.result import Estimate

NUMERICS, INTERRUPTED = 3, 130

app = typer.Typer(
    add_completion=False,
    no_args_is_help=True,
    pretty_exceptions_enable=False,
    rich_markup_mode=None,
    help="Predict how much radical chemistry an ultrasound exposure makes.",
)

# readable=False: the loader says in one line why a file cannot be read.
ProtocolFile = Annotated[
    Path, typer.Argument(metavar="FILE", readable=False, help="Protocol file (TOML).")
]
AsJson = Annotated[bool, typer.Option("--json", help="Print the result as JSON.")]
Out = Annotated[
    Path | None,
    typer.Option(metavar="PATH", readable=False, help="Write the result: .json, .csv or .parquet."),
]
HistoryPath = Annotated[
    Path | None,
    typer.Option(
        metavar="PATH", readable=False, help="Write R, U, T, p, composition: .csv or .parquet."
    ),
]
Profile = Annotated[
    Path | None,
    typer.Option(
        metavar="PATH", readable=False, help="Write the gas from centre to wall at the peak."
    ),
]
Chart = Annotated[
    Path | None,
    typer.Option(
        metavar="PATH", readable=False, help="Draw temperature and OH around the peak: .png, .svg."
    ),
]
LiquidChart = Annotated[
    Path | None,
    typer.Option(
        metavar="PATH", readable=False, help="Draw where OH goes in the liquid: .png or .svg."
    ),
]
Fast = Annotated[
    bool, typer.Option("--fast", help="The well-mixed gas only, with its known error.")
]
Both = Annotated[
    bool, typer.Option("--both", help="Run both couplings of the mixed gas; report the difference.")
]
Quiet = Annotated[bool, typer.Option("--quiet", help="No progress and no warnings on stderr.")]


SpeciesNames = Annotated[
    list[str] | None,
    typer.Option("--species", metavar="NAME", help="Species to explain; may be repeated."),
]


def main() -> None:
    """Entry point: run a command; what goes wrong becomes an exit code."""
    for stream in (sys.stdout, sys.stderr):
        if isinstance(stream, TextIOWrapper):  # a terminal that lacks a letter of the title
            stream.reconfigure(errors="backslashreplace")
    app()


def _version(wanted: bool) -> None:
    if wanted:
        typer.echo(f"sonoyield {__version__}")
        raise typer.Exit


@app.callback()
def _root(
    version: Annotated[
        bool, typer.Option("--version", callback=_version, is_eager=True, help="Print the version.")
    ] = False,
) -> None:
    """Predict how much radical chemistry an ultrasound exposure makes.

    Results are research estimates, never a treatment prescription.
    """


@app.command()
def estimate(
    file: ProtocolFile,
    json: AsJson = False,
    out: Out = None,
    history: HistoryPath = None,
    profile: Profile = None,
    chart: Chart = None,
    liquid_chart: LiquidChart = None,
    fast: Fast = False,
    both: Both = False,
    quiet: Quiet = False,
) -> None:
    """Radicals per collapse and per exposure of one protocol."""
    targets = Targets(out, history, profile, chart, liquid_chart)
    check_targets(targets)
    with _interruptible():
        protocol = _load(file, quiet)
        if fast or protocol.model.interior == "mixed":
            refuse_resolved_only(targets)
        from sonoyield.expose.estimate import estimate as run

        with _left_at_once():
            result = run(protocol, both=both, fast=fast)
        _show(result, json, targets)
    _finish(result, result.warnings, json, quiet)


@app.command()
def explain(
    file: ProtocolFile,
    species: SpeciesNames = None,
    json: AsJson = False,
    out: Out = None,
    quiet: Quiet = False,
) -> None:
    """Reactions that make and destroy what is delivered, and the rates that matter."""
    check_targets(Targets(out))
    with _interruptible():
        protocol = _load(file, quiet)
        from sonoyield.decide.explain import SpeciesError
        from sonoyield.decide.explain import explain as run

        try:
            with _left_at_once():
                result = run(protocol, tuple(dict.fromkeys(species or ("OH", "H2O2"))))
        except SpeciesError as error:
            refuse(f"--species {error}")
        _show_explanation(result, json, out)
    _finish(result.estimate, result.warnings, json, quiet)


def _load(file: Path, quiet: bool) -> Protocol:
    from sonoyield.describe.errors import ProtocolError
    from sonoyield.describe.protocol import Protocol

    try:
        protocol = Protocol.load(file)
    except ProtocolError as error:
        refuse(str(error))
    if not quiet:
        _tell_first_compilation()
    return protocol


def _finish(result: Estimate, warnings: Sequence[str], json: bool, quiet: bool) -> None:
    if not quiet:
        for warning in warnings if json else ():
            _say(f"warning: {warning}")
    if not result.outcome.code.has_numbers:
        _say(result.outcome.sentence)
        raise typer.Exit(NUMERICS)


@contextmanager
def _interruptible() -> Iterator[None]:
    try:
        yield
    except KeyboardInterrupt:
        _say("interrupted")
        raise typer.Exit(INTERRUPTED) from None


@contextmanager
def _left_at_once() -> Iterator[None]:
    """End the process on an interrupt while the integrators run, when nothing is half written.

    An exception raised inside a rate would be taken for a failed step and swallowed there.
    """

    def leave(*_: object) -> None:
        _say("interrupted")
        sys.stderr.flush()
        os._exit(INTERRUPTED)

    try:
        before = signal.signal(signal.SIGINT, leave)
    except ValueError:  # not in the main thread, where no signal arrives
        yield
        return
    try:
        yield
    finally:
        signal.signal(signal.SIGINT, before)


def _show_explanation(result: Explanation, json: bool, out: Path | None) -> None:
    from sonoyield.show.files import to_json, write_result, write_rows

    try:
        if out is not None and out.suffix == ".json":
            write_result(result.as_dict(), out)
        elif out is not None:
            write_rows(result.rows(), out)
    except OSError as error:
        refuse(f"{error.filename or out}: cannot be written: {error.strerror}")
    if json:
        typer.echo(to_json(result.as_dict()))
    elif out is None:
        from rich.console import Console

        from sonoyield.show.explain_table import print_explanation

        print_explanation(result, Console(highlight=False))


def _show(result: Estimate, json: bool, targets: Targets) -> None:
    from sonoyield.show.files import to_json

    write_targets(result, targets)
    if json:
        typer.echo(to_json(result.as_dict()))
    elif targets.out is None:
        from rich.console import Console

        from sonoyield.show.tables import print_estimate

        print_estimate(result, Console(highlight=False))


def _tell_first_compilation() -> None:
    """Say so before the compiled stages are built, which happens once after installing."""
    from sonoyield.collapse.compiled import is_cached

    if not is_cached():
        _say("compiling the bubble equations for this machine, once (about half a minute) ...")


def _say(message: str) -> None:
    typer.echo(message, err=True)
