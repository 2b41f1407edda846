"""Files that the command is asked to write: checked before a run, written after it."""

from __future__ import annotations

import os
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, NoReturn

import typer

if TYPE_CHECKING:
    from sonoyield.expose.result import Estimate

BAD_INPUT = 2


@dataclass(frozen=True)
class Targets:
    """Paths by what goes there; ``None`` where nothing is asked for."""

    out: Path | None = None
    history: Path | None = None
    profile: Path | None = None
    chart: Path | None = None
    liquid_chart: Path | None = None

    def named(self) -> dict[str, Path]:
        """The paths asked for by their option."""
        options = {f"--{name.replace('_', '-')}": path for name, path in vars(self).items()}
        return {option: path for option, path in options.items() if path is not None}


def check_targets(targets: Targets) -> None:
    """Refuse, before anything runs, a path that could not be written to."""
    from sonoyield.show.files import CHART_SUFFIXES, HISTORY_SUFFIXES, RESULT_SUFFIXES

    seen: dict[Path, str] = {}
    for option, path in targets.named().items():
        suffixes = {"--out": RESULT_SUFFIXES}.get(
            option, CHART_SUFFIXES if "chart" in option else HISTORY_SUFFIXES
        )
        _check(path, option, suffixes)
        if path.absolute() in seen:
            refuse(f"{option} {path}: is the path of {seen[path.absolute()]} too; allowed another")
        seen[path.absolute()] = option


def refuse_resolved_only(targets: Targets) -> None:
    """Refuse what only a resolved gas can give."""
    for option in ("--profile", "--liquid-chart"):
        if option in targets.named():
            refuse(
                f'{option}: the gas is mixed here; allowed with model.interior = "resolved" and '
                "without --fast"
            )


def write_targets(result: Estimate, targets: Targets) -> None:
    """Write all that was asked for; each file whole or not at all."""
    from sonoyield.show import files

    try:
        if targets.out is not None:
            files.write_result(result.as_dict(), targets.out)
        if targets.history is not None:
            files.write_history(result.history, targets.history)
        if result.counts is not None:
            _write_pictures(result, targets)
    except OSError as error:
        refuse(f"{error.filename}: cannot be written: {error.strerror}")


def refuse(message: str) -> NoReturn:
    """End with exit code 2 and one message."""
    typer.echo(f"error: {message}", err=True)
    raise typer.Exit(BAD_INPUT)


def _write_pictures(result: Estimate, targets: Targets) -> None:
    if targets.profile is not None:
        from sonoyield.show.profile import write_profile

        write_profile(result.history, targets.profile)
    if targets.chart is not None:
        from sonoyield.show.charts import collapse_chart, write_chart

        write_chart(collapse_chart(result.history), targets.chart)
    if targets.liquid_chart is not None:
        from sonoyield.show.charts import liquid_chart, oh_fate, write_chart

        film = result.in_liquid.film if result.in_liquid is not None else None
        cycles = (oh_fate(film.first), oh_fate(film.last)) if film is not None else ({},)
        write_chart(liquid_chart(*cycles), targets.liquid_chart)


def _check(path: Path, option: str, suffixes: tuple[str, ...]) -> None:
    if path.suffix not in suffixes:
        refuse(f"{option} {path}: suffix {path.suffix!r}; allowed {', '.join(suffixes)}")
    if not path.parent.is_dir():
        refuse(f"{option} {path}: there is no folder {path.parent}")
    if path.is_dir():
        refuse(f"{option} {path}: is a folder")
    if not os.access(path.parent, os.W_OK):
        refuse(f"{option} {path}: the folder {path.parent} may not be written to")
