"""An estimate as tables on the terminal."""

from __future__ import annotations

from dataclasses import asdict
from typing import TYPE_CHECKING

from rich import box
from rich.console import Console
from rich.table import Table

from sonoyield.collapse.yields import OXIDANT_FORMULA
from sonoyield.describe.errors import one_line
from sonoyield.describe.gas import ABSORBED, SPARINGLY_SOLUBLE

if TYPE_CHECKING:
    from sonoyield.collapse.bubble import Bubble
    from sonoyield.collapse.caught import InLiquid
    from sonoyield.describe.protocol import Liquid
    from sonoyield.expose.result import Estimate

CAUTIONS = (
    "Research estimate, never a treatment prescription. Intense ultrasound heats and destroys "
    "tissue; compressed gases burst and asphyxiate. Follow local codes and licensed practice.",
)
MECHANICAL_INDEX_LIMIT = 1.9  # FDA 510(k) guidance, Track 3, general diagnostic limit


def print_estimate(result: Estimate, console: Console) -> None:
    """Print what was assumed, the collapse, the counts and the exposure."""
    title = one_line(result.protocol.title) or "Untitled exposure"
    console.print(title, style="bold", markup=False, emoji=False)
    console.print(f"Outcome: {result.outcome.code} - {result.outcome.sentence}\n")
    console.print(_assumed(result))
    if result.counts is not None:
        console.print(_collapse(result))
        console.print(_counts(result))
        if result.mixed is not None:
            console.print(_beside(result, result.mixed))
        if result.in_liquid is not None:
            console.print(_in_liquid(result.in_liquid))
            console.print(_IN_LIQUID_NOTE + "\n")
        console.print(_exposure(result))
        console.print(_EXPOSURE_NOTE + "\n")
        console.print(_energy(result))
    console.print(_closure(result) + "\n")
    if result.coupling_difference is not None:
        console.print(_difference(result))
        console.print(_other_outcome(result) + "\n")
    for warning in result.warnings:
        console.print(f"Warning: {warning}")
    console.print(f"\n{_mechanical_index(result)}")
    for caution in CAUTIONS:
        console.print(f"Caution: {caution}")


def number(value: float | None, digits: int = 3) -> str:
    """A number for a table, ``-`` where there is none."""
    if value is None:
        return "-"
    return f"{value:.{digits}g}"


def _table(title: str, *columns: str) -> Table:
    table = Table(
        title=title, title_justify="left", title_style="bold", box=box.SIMPLE_HEAD, pad_edge=False
    )
    for i, column in enumerate(columns):
        table.add_column(column, justify="left" if i == 0 else "right")
    return table


def _assumed(result: Estimate) -> Table:
    protocol, liquid, bubble = result.protocol, result.liquid, result.history.bubble
    model = protocol.model
    parts = sorted(bubble.mixture.items(), key=lambda part: -part[1])
    mixture = ", ".join(f"{100 * share:.4g} % {name}" for name, share in parts)
    pulse = protocol.schedule.pulse
    table = _table("Assumed", "what")
    table.add_column("value", justify="left")
    for what, value in (
        ("sound", f"{bubble.frequency / 1e3:.5g} kHz, {bubble.pressure_amplitude / 1e5:.4g} bar "
                  "amplitude, sine, rarefaction first"),
        ("schedule", f"{protocol.schedule.duration:.4g} s, " + (
            "continuous" if pulse is None
            else f"{pulse.length:.4g} s pulses every {pulse.every:.4g} s")),
        ("liquid", f"{_liquid(protocol.liquid)}, {liquid.temperature - 273.15:.4g} degC, "
                   f"{protocol.liquid.ambient_pressure / 1e5:.5g} bar ambient, "
                   f"{protocol.liquid.volume * 1e3:.4g} L insonated"),
        ("bubble at rest", f"{bubble.radius * 1e6:.4g} um, {mixture} (dry), saturated vapour"
                           if model.vapour else f"{bubble.radius * 1e6:.4g} um, {mixture}, dry"),
        ("bubbles", f"{protocol.bubbles.number_density:.4g} per m3, all alike, uniform field"),
        ("motion", "Keller-Miksis, spherical"),
        ("gas", _interior(result) + "; " + (
            "Noble-Abel, which also shifts the equilibria" if model.excluded_volume else "ideal")),
        ("chemistry", f"{bubble.phase.name} (SHA-256 {bubble.phase.sha256[:12]}), "
                      f"{len(bubble.phase.species)} species, {model.coupling} coupling"),
        ("uptake by the liquid", _uptake(result) if model.uptake else "none"),
        ("accommodation", _accommodation(bubble)),
    ):  # fmt: skip
        table.add_row(what, value)
    return table


def _liquid(liquid: Liquid) -> str:
    if liquid.kind == "saline":
        return f"saline of {liquid.salinity:.4g} g/L"
    return liquid.kind


def _interior(result: Estimate) -> str:
    cells = result.history.cells
    if cells is None:
        return "well mixed, one temperature (a gentle swing comes out 2 to 18 % too stiff)"
    model = result.protocol.model
    wall = {
        "liquid_temperature": "wall at the liquid's temperature",
        "thermal_layer": "the liquid at the wall warms",
    }[model.wall]
    jump = ", temperature jump" if model.temperature_jump else ""
    return f"resolved in {len(cells.faces) - 1} cells at one pressure, {wall}{jump}"


def _uptake(result: Estimate) -> str:
    bubble = result.history.bubble
    held = [name for name in ABSORBED if name in bubble.phase.species]
    if result.history.cells is not None and result.protocol.model.film:
        atom = {"persists": "does not react with water", "water": "reacts with water to 2 OH"}
        return (
            f"{', '.join(held)}, H2 and O2 by Henry's law into a film of liquid that diffuses and "
            f"reacts, fresh at the start; O(3P) {atom[result.protocol.model.oxygen_atom]} there"
        )
    bound = ", ".join(name for name in held if name in SPARINGLY_SOLUBLE)
    return f"{', '.join(held)} held at zero at the wall (an upper bound for {bound})"


def _accommodation(bubble: Bubble) -> str:
    """Values by species, those that share one together."""
    names: dict[float, list[str]] = {}
    for name, value in bubble.accommodation.items():
        if name == "radicals":  # each is named
            continue
        names.setdefault(value, []).append(name)
    if len(names) == 1:
        return f"{next(iter(names)):g} for water and all that is taken up"
    return "; ".join(f"{value:g} for {', '.join(of)}" for value, of in names.items())


def _collapse(result: Estimate) -> Table:
    collapse = result.collapse
    assert collapse is not None
    mach = collapse.peak_wall_speed_m_s / result.liquid.sound_speed
    table = _table("Collapse", "what", "value", "unit")
    centre, hottest = collapse.centre_temperature_K, collapse.hottest_temperature_K
    for what, value, unit in (
        ("peak temperature, mole mean", f"{collapse.peak_temperature_K:.0f}", "K"),
        ("peak temperature, centre", "-" if centre is None else f"{centre:.0f}", "K"),
        ("peak temperature, hottest cell", "-" if hottest is None else f"{hottest:.0f}", "K"),
        ("peak pressure", number(collapse.peak_pressure_Pa / 1e5), "bar"),
        ("largest radius", number(collapse.max_radius_m * 1e6, 4), "um"),
        ("smallest radius", number(collapse.min_radius_m * 1e6), "um"),
        ("volume compression", number(collapse.compression_ratio), "-"),
        ("time of peak", number(collapse.time_of_peak_s * 1e6, 5), "us"),
        ("peak wall speed", f"{collapse.peak_wall_speed_m_s:.0f} (Mach {mach:.2f})", "m/s"),
        ("vapour at peak", number(100 * collapse.vapour_fraction_at_peak), "mol %"),
        ("centre's pressure over wall's (estimate)", _spread(result), "%"),
        ("inertial (2-fold growth)", "yes" if collapse.inertial else "no", "-"),
    ):
        table.add_row(what, value, unit)
    return table


def _spread(result: Estimate) -> str:
    spread = result.uniformity
    return "-" if spread is None else f"+{100 * spread.pressure_spread:.2g}"


def _counts(result: Estimate) -> Table:
    assert result.counts is not None
    table = _table(
        "Molecules per collapse", "species", "peak in gas", "delivered to liquid", "left in gas"
    )
    for name, count in result.counts.items():
        table.add_row(name, number(count.peak), number(count.delivered), number(count.left))
    return table


def _beside(result: Estimate, mixed: Estimate) -> Table:
    """The well-mixed gas in Cantera's reactor beside the headline."""
    assert result.counts is not None
    assert result.collapse is not None
    table = _table(
        "Beside it: the well-mixed gas (Cantera reactor)", "what", "resolved", "mixed", "ratio"
    )
    if mixed.counts is None or mixed.collapse is None:
        table.add_row(f"no numbers: {mixed.outcome.code}", "", "", "")
        return table
    pairs = {
        "mean peak temperature, K": (
            result.collapse.peak_temperature_K, mixed.collapse.peak_temperature_K
        ),
        "vapour at peak, mol %": (
            100 * result.collapse.vapour_fraction_at_peak,
            100 * mixed.collapse.vapour_fraction_at_peak,
        ),
    }  # fmt: skip
    for name in BESIDE:
        if name in result.counts:
            pairs[f"{name} delivered"] = (
                result.counts[name].delivered, mixed.counts[name].delivered
            )  # fmt: skip
    for what, (this, that) in pairs.items():
        digits = 4 if "temperature" in what else 3
        ratio = this / that if that > 0.0 else None
        table.add_row(what, number(this, digits), number(that, digits), number(ratio))
    return table


BESIDE = ("OH", "H2O2", "HO2", "NO", "NO2", "HONO")


def _in_liquid(film: InLiquid) -> Table:
    table = _table(
        "In the liquid, molecules per cycle", "what", "fresh liquid", "repeating in one place"
    )
    fresh, repeating = film.fresh, film.repeating
    for one in film.catches:
        name = f"caught by {one.scavenger}, {one.mol_per_L * 1e3:.4g} mmol/L"
        table.add_row(name, number(one.fresh), number(one.repeating))
        for cycles, then in list(zip(one.after_cycles, one.molecules_then, strict=True))[-1:]:
            table.add_row(f"  after {cycles:.0e} cycles in one place", "", number(then))
        table.add_row("  its supply by diffusion, at most", "", number(one.supply_limit))
    for what, key in (
        ("OH that came in", "OH_entered"),
        ("OH that became H2O2", "OH_to_H2O2"),
        ("OH that met nitrogen oxides", "OH_to_nitrogen"),
        ("OH lost to water, O2, HO2", "OH_lost"),
        ("H2O2, in and made", "H2O2"),
        ("nitrite", "nitrite"),
        ("nitrate", "nitrate"),
    ):
        values = getattr(fresh, key), getattr(repeating, key)
        if "nitr" not in key or any(abs(value) >= 1.0 for value in values):
            table.add_row(what, *(number(value) for value in values))
    return table


_IN_LIQUID_NOTE = (
    "Streaming and the bubble's own motion renew the liquid: the truth lies between fresh and "
    "repeating. The repeating cycle is the headline (`caught`)."
)


def _exposure(result: Estimate) -> Table:
    assert result.doses is not None
    assert result.oxidant is not None
    assert result.driven is not None
    driven = result.driven
    table = _table(
        f"Per exposure ({number(driven.per_second)} collapses per second and bubble)",
        "delivered", "mol", "umol/L", "umol/L/min", "umol/L/min while on", "mol/J dissipated",
    )  # fmt: skip
    for name, dose in {**result.doses, "oxidant": result.oxidant}.items():
        table.add_row(
            name,
            number(dose.mol),
            number(1e6 * dose.mol_per_L),
            number(60e6 * dose.mol_per_L_per_s),
            number(60e6 * dose.mol_per_L_per_s_on),
            number(dose.mol_per_J),
        )
    return table


_EXPOSURE_NOTE = (
    f"oxidant = {OXIDANT_FORMULA}; NOx not counted. Delivered is not what a dosimeter reads: most "
    "radicals meet each other first. The number of bubbles is yours and scales every line."
)


def _energy(result: Estimate) -> Table:
    assert result.energy is not None
    table = _table("Energy of one window", "term", "J")
    for term, value in asdict(result.energy).items():
        table.add_row(term.replace("_", " "), number(value))
    return table


def _closure(result: Estimate) -> str:
    balance = result.balance
    return (
        f"Energy closed to {balance.energy_error:.1e} of the work, elements to "
        f"{balance.element_error:.1e}. Zero of enthalpy: liquid water, O2, N2 and noble gases at "
        "the liquid's temperature."
    )


def _difference(result: Estimate) -> Table:
    difference = result.coupling_difference
    assert difference is not None
    other = difference["other"]
    table = _table(
        "Couplings", "what", result.protocol.model.coupling, other, f"{other} / this"
    )
    for key, pair in difference.items():
        if isinstance(pair, dict):
            table.add_row(key, *(number(pair[k], 4) for k in ("this", "other", "ratio")))
    return table


def _other_outcome(result: Estimate) -> str:
    difference = result.coupling_difference
    assert difference is not None
    numbers = "" if "OH_delivered" in difference else "; there are no numbers to compare"
    return f"Outcome of {difference['other']}: {difference['other_outcome']}{numbers}."


def _mechanical_index(result: Estimate) -> str:
    index = result.mechanical_index
    if index is None:
        return "Mechanical index: not defined at this frequency (0.5 to 15 MHz)."
    return (
        f"Mechanical index: {index:.2f}, the drive pressure taken as the derated peak negative one "
        f"(usual diagnostic limit {MECHANICAL_INDEX_LIMIT}); no statement that anything is safe."
    )
