"""Pictures: the gas around its hottest moment, and where OH goes in the liquid."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from contextlib import contextmanager
from dataclasses import dataclass
from math import isfinite
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np

from sonoyield.collapse.aqueous import CAUGHT
from sonoyield.describe.gas import Array
from sonoyield.show.files import CHART_SUFFIXES, write_whole
from sonoyield.show.profile import Shells, peak_row, shells

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

    from sonoyield.collapse.film_cycles import FilmCycle
    from sonoyield.collapse.history import History

BEFORE, AFTER = 1.5, 2.5  # widths of the peak shown on either side of it

# Okabe and Ito 2008: apart for every common kind of colour vision; these also in grey.
BLUE, ORANGE = "#0072B2", "#E69F00"
HEAT, SHARE = "inferno", "cividis"  # lightness grows evenly, so they hold in grey
DASHES = ("--", "-", ":")  # before, at and after the peak

PEROXIDE, NITROGEN, WATER = "becomes H2O2", "nitrite, nitrate", "recombines to water"
OXYGEN, AWAY = "ends as O2 or HO2", "diffuses away"
LEAST = 0.01  # per cent, the least share that is given as a number

STYLE: Any = {
    "font.family": ["DejaVu Sans"],
    "font.size": 9.0,
    "axes.spines.top": False,
    "axes.spines.right": False,
    "figure.constrained_layout.use": True,
    "figure.constrained_layout.wspace": 0.04,
    "legend.frameon": False,
    "savefig.dpi": 160.0,
    "svg.hashsalt": "sonoyield",  # the same picture is the same file
}


def collapse_chart(history: History) -> Figure:
    """Temperature and OH around the peak: maps over radius and time, and profiles across the gas.

    A mixed gas has no profiles: radius, temperature and OH against time instead.
    """
    view = _view(history)
    with _styled():
        return _lines(history, view) if history.cells is None else _maps(history, view)


def liquid_chart(
    fate: Mapping[str, float],
    repeating: Mapping[str, float] | None = None,
    names: tuple[str, str] = ("fresh liquid", "repeating cycles"),
) -> Figure:
    """Bars of what OH in the liquid becomes, as shares; molecules a cycle by fate.

    ``repeating`` stands beside ``fate``; ``names`` are those of both. Raises ``ValueError`` for a
    number that is not finite.
    """
    both = [fate] if repeating is None else [fate, repeating]
    for name, value in (pair for one in both for pair in one.items()):
        if not isfinite(value):
            raise ValueError(f"fate of OH: {name!r} is {value}")
    with _styled():
        return _bars(dict(zip(names, both, strict=False)))


def oh_fate(cycle: FilmCycle) -> dict[str, float]:
    """What the OH of one cycle in the film became, molecules by fate, each OH counted once.

    They add up to the OH that entered or was set free by other reactions in the film. Water, O2
    and HO2 together are what ``FilmCycle.lost`` counts.
    """
    fate = {f"caught by {name}": 0.0 for name in cycle.caught}
    nitrogen = (NITROGEN,) if "NO" in cycle.made else ()
    fate |= dict.fromkeys((PEROXIDE, *nitrogen, WATER, OXYGEN, AWAY), 0.0)
    for reaction, used in cycle.oh.items():
        fate[_fate(reaction)] += used
    fate[AWAY] += cycle.away["OH"] + cycle.kept["OH"]
    return fate


def write_chart(figure: Figure, path: Path) -> None:
    """Write a picture as SVG or PNG, by the path's suffix.

    Raises ``OSError`` with the path as its ``filename``; what stood there is kept then.
    ``ValueError`` for another suffix.
    """
    if path.suffix not in CHART_SUFFIXES:
        raise ValueError(f"{path}: suffix {path.suffix!r}; allowed {', '.join(CHART_SUFFIXES)}")
    dated = {"Date": None} if path.suffix == ".svg" else None
    with _styled():
        write_whole(path, lambda target: figure.savefig(target, metadata=dated))


@dataclass(frozen=True)
class _View:
    """Steps shown: rows ``begin`` to ``end``, around ``peak``, half of it reached and left."""

    begin: int
    end: int
    peak: int
    rise: int
    fall: int

    @property
    def rows(self) -> slice:
        return slice(self.begin, self.end)


@dataclass(frozen=True, eq=False)
class _Shown:
    """What a map shows: values of each cell at each step, from ``lowest`` on (``None``: theirs)."""

    values: Array
    label: str
    colours: str
    lowest: float | None = None


def _view(history: History) -> _View:
    """From the width of the peak at half its height; the whole run where there is no peak."""
    peak, times, last = peak_row(history), history.times, len(history.times) - 1
    rest = history.bubble.liquid.temperature
    cool = history.temperature <= 0.5 * (history.temperature[peak] + rest)
    before, after = np.flatnonzero(cool[:peak]), np.flatnonzero(cool[peak:])
    if not (before.size and after.size):
        return _View(0, last + 1, peak, 0, last)
    rise, fall = int(before[-1]), peak + int(after[0])
    width = times[fall] - times[rise]
    begin = int(np.searchsorted(times, times[peak] - BEFORE * width))
    end = int(np.searchsorted(times, times[peak] + AFTER * width, side="right"))
    return _View(min(begin, rise), max(end, fall + 1), peak, rise, fall)


def _maps(history: History, view: _View) -> Figure:
    from matplotlib.figure import Figure

    gas = shells(history, view.rows)
    fraction, unit = _in_unit(gas.fraction(history.bubble.phase.index("OH")))
    scale, tick = _time_unit(history, view)
    times = scale * (history.times[view.rows] - history.times[view.peak])
    figure = Figure(figsize=(9.4, 6.2))
    axes = figure.subplots(2, 2, sharex="col", width_ratios=(1.9, 1.0))
    shown = (
        _Shown(gas.temperature, "temperature (K)", HEAT),
        _Shown(fraction, f"OH mole fraction ({unit})", SHARE, lowest=0.0),
    )
    moments = [row - view.begin for row in (view.rise, view.peak, view.fall)]
    for (left, right), what in zip(axes, shown, strict=True):
        _map(left, times, gas, what)
        for moment, dashes in zip(moments, DASHES, strict=True):
            left.axvline(times[moment], color="0.5", linewidth=0.8, linestyle=dashes)
        _profiles(right, gas, what, moments)
    _from_zero(axes[1, 1], fraction)
    names = [f"{times[row]:+.3g} {tick}".replace("-", "\N{MINUS SIGN}") for row in moments]
    axes[0, 1].legend(axes[0, 1].patches, [names[0], "peak", names[2]])
    axes[1, 0].set_xlabel(f"time from the peak ({tick})")
    axes[1, 1].set_xlabel("distance from centre / radius of bubble")
    return figure


def _map(axes: Axes, times: Array, gas: Shells, what: _Shown) -> None:
    """Each cell at each step as a patch between its faces; the wall on top."""
    faces = _between(1e6 * gas.faces)
    edges = np.broadcast_to(_between(times)[:, None], faces.shape)
    mesh = axes.pcolormesh(edges, faces, what.values, cmap=what.colours, rasterized=True)
    mesh.set_clim(what.lowest, what.values.max() or 1.0)  # no empty scale
    axes.plot(times, 1e6 * gas.faces[:, -1], color="black", linewidth=1.6)
    axes.set_xlim(times[0], times[-1])
    axes.set_ylim(0.0, 1.05e6 * gas.faces[:, -1].max())
    axes.set_ylabel("distance from centre (µm)")
    axes.set_facecolor("0.92")
    text = axes.text(0.5, 0.95, "liquid", transform=axes.transAxes, ha="center", va="top")
    text.set_bbox({"facecolor": "0.92", "edgecolor": "none", "pad": 2.0})
    axes.figure.colorbar(mesh, ax=axes, label=what.label, pad=0.02)


def _profiles(axes: Axes, gas: Shells, what: _Shown, moments: list[int]) -> None:
    """Cell by cell from centre to wall, before, at and after the peak."""
    for row, dashes, colour in zip(moments, DASHES, (ORANGE, "black", BLUE), strict=True):
        axes.stairs(
            what.values[row],
            gas.faces[row] / gas.faces[row, -1],
            baseline=None,
            color=colour,
            linestyle=dashes,
            linewidth=1.5,
        )
    axes.set_xlim(0.0, 1.0)
    axes.set_ylabel(what.label)


def _lines(history: History, view: _View) -> Figure:
    from matplotlib.figure import Figure

    gas = shells(history, view.rows)
    fraction, unit = _in_unit(gas.fraction(history.bubble.phase.index("OH"))[:, 0])
    scale, tick = _time_unit(history, view)
    times = scale * (history.times[view.rows] - history.times[view.peak])
    figure = Figure(figsize=(6.4, 6.2))
    axes = figure.subplots(3, 1, sharex=True)
    shown = (
        (1e6 * history.radius[view.rows], "radius (µm)", "black"),
        (gas.temperature[:, 0], "temperature (K)", "#D55E00"),
        (fraction, f"OH mole fraction ({unit})", BLUE),
    )
    for axis, (values, label, colour) in zip(axes, shown, strict=True):
        axis.plot(times, values, color=colour, linewidth=1.6)
        axis.axvline(0.0, color="0.6", linewidth=0.8)
        axis.set_ylabel(label)
    _from_zero(axes[0], history.radius)
    _from_zero(axes[2], fraction)
    axes[-1].set_xlabel(f"time from the peak ({tick})")
    axes[-1].set_xlim(times[0], times[-1])
    figure.align_ylabels()
    return figure


def _from_zero(axes: Axes, values: Array) -> None:
    """Begin the scale at zero; one unit of it where there is nothing."""
    axes.set_ylim(0.0, None if values.any() else 1.0)


def _bars(fates: Mapping[str, Mapping[str, float]]) -> Figure:
    from matplotlib.figure import Figure

    rows = list(dict.fromkeys(name for fate in fates.values() for name in fate))
    figure = Figure(figsize=(7.2, 1.1 + 0.2 * (1 + len(fates)) * max(len(rows), 2)))
    axes = figure.subplots()
    height = 0.8 / len(fates)
    for place, (name, fate) in enumerate(fates.items()):
        total = sum(fate.values())
        shares = [100.0 * fate.get(row, 0.0) / total if total > 0.0 else 0.0 for row in rows]
        at = np.arange(len(rows)) + height * (place - 0.5 * (len(fates) - 1))
        label = f"{name}: {_power(total)} OH a cycle"
        axes.barh(at, shares, 0.92 * height, color=(BLUE, ORANGE)[place], label=label)
        for y, share in zip(at, shares, strict=True):
            end = (max(share, 0.0), y)  # also of a bar below zero, clear of its name
            axes.annotate(_percent(share), end, (4, 0), textcoords="offset points", va="center")
    axes.set_yticks(np.arange(len(rows)), [row.replace("_", " ") for row in rows])
    axes.tick_params(axis="y", length=0.0)
    axes.margins(x=0.14, y=0.01)  # room for the numbers
    if not any(sum(fate.values()) > 0.0 for fate in fates.values()):
        axes.set_xlim(0.0, 100.0)
    axes.invert_yaxis()
    axes.set_xlabel("share of the OH in the liquid (%)")
    figure.legend(*axes.get_legend_handles_labels(), loc="outside upper center", ncols=2)
    return figure


def _percent(share: float) -> str:
    if share == 0.0:
        return "0"
    return f"{share:.3g} %" if abs(share) >= LEAST else f"< {LEAST} %"


def _power(number: float) -> str:
    digits, _, exponent = f"{number:.2e}".partition("e")
    return f"${digits}\\times10^{{{int(exponent)}}}$" if number else "no"


def _fate(reaction: str) -> str:
    """By what a reaction makes of OH; ``film_cycles`` counts the same kinds as lost."""
    made = [one.strip() for one in reaction.partition("->")[2].split(" + ") if one.strip()]
    for name in made:
        if name.startswith(CAUGHT):
            return f"caught by {name.removeprefix(CAUGHT)}"
        if name.startswith(("HN", "NO", "ONO")):
            return NITROGEN
    if made == ["H2O2"]:
        return PEROXIDE
    return OXYGEN if {"O2", "HO2"} & set(made) else WATER


def _in_unit(fraction: Array) -> tuple[Array, str]:
    """Mole fractions in per cent, or in parts per million where there is little."""
    return (100.0 * fraction, "%") if fraction.max() >= 1e-4 else (1e6 * fraction, "ppm")


def _time_unit(history: History, view: _View) -> tuple[float, str]:
    """Factor from seconds to a unit of time that suits the steps shown, and its name."""
    shown = history.times[view.rows]
    return (1e9, "ns") if shown[-1] - shown[0] < 2e-6 else (1e6, "µs")


def _between(steps: Array) -> Array:
    """Values half way between steps (P, ...), and the first and last: (P + 1, ...)."""
    return np.concatenate([steps[:1], 0.5 * (steps[1:] + steps[:-1]), steps[-1:]])


@contextmanager
def _styled() -> Iterator[None]:
    """Draw as ``STYLE`` says, whatever the user's own settings of matplotlib are."""
    import matplotlib as mpl

    with mpl.rc_context():
        mpl.rcdefaults()
        mpl.rcParams.update(STYLE)
        yield
