"""What makes and destroys a delivered species, as tables on the terminal."""

from __future__ import annotations

from typing import TYPE_CHECKING

from rich import box
from rich.console import Console
from rich.table import Table

from sonoyield.decide.explain import METHOD
from sonoyield.show.tables import CAUTIONS, number

if TYPE_CHECKING:
    from sonoyield.decide.explain import Explanation, Story

SHOWN = 10  # rows of each table; JSON and files hold all


def print_explanation(result: Explanation, console: Console) -> None:
    """Print, for each species, production first and then what its amount hangs on."""
    base = result.estimate
    console.print(f"[bold]{base.protocol.title or 'Untitled exposure'}[/bold]")
    console.print(f"Outcome: {base.outcome.code} - {base.outcome.sentence}")
    console.print(f"Chemistry: {base.history.bubble.phase.name}\n")
    for story in result.stories:
        console.print(_production(story))
        if story.influences:
            console.print(_influence(story))
        console.print(_summary(story) + "\n")
    console.print(METHOD)
    for warning in result.warnings:
        console.print(f"Warning: {warning}")
    for caution in CAUTIONS:
        console.print(f"Caution: {caution}")


def _production(story: Story) -> Table:
    table = _table(
        f"{story.species}: made (+) and destroyed (-) in the gas, molecules per collapse",
        "forward", "reverse", "net",
    )  # fmt: skip
    for one in story.productions[:SHOWN]:
        amounts = (f"{value:+.3g}" for value in (one.forward, one.reverse, one.net))
        table.add_row(one.rate.reaction_id, one.rate.equation, *amounts)
    return table


def _influence(story: Story) -> Table:
    table = _table(
        f"{story.species} delivered: sensitivity to each rate, its factor, its share of variance",
        "net", "dln/dlnk", "factor", "variance",
    )  # fmt: skip
    for one in story.influences[:SHOWN]:
        table.add_row(
            one.rate.reaction_id,
            one.rate.equation,
            f"{one.net:+.3g}" if one.net else "-",
            f"{one.sensitivity:+.4f}",
            number(one.rate.factor) + (" assumed" if one.rate.assumed else ""),
            f"{100 * one.variance_share:.1f} %",
        )
    return table


def _summary(story: Story) -> str:
    if story.factor is None:
        return f"{story.species} delivered: {number(story.delivered)} molecules; {story.reason}."
    return (
        f"{story.species} delivered: {number(story.delivered, 4)} molecules per collapse, within a "
        f"factor {story.factor:.2f} by the rates alone (two standard deviations, linear)."
    )


def _table(title: str, *columns: str) -> Table:
    table = Table(
        title=title, title_justify="left", title_style="bold", box=box.SIMPLE_HEAD, pad_edge=False
    )
    table.add_column("rate", no_wrap=True)
    table.add_column("reaction")
    for column in columns:
        table.add_column(column, justify="right", no_wrap=True)
    return table
