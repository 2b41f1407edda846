"""The tables of the compiled kinetics: read out of a loaded Cantera phase and checked against it.

What the compiled form does not know (pressure-dependent Arrhenius, Chebyshev, SRI, free orders,
more than three molecules on a side ...) is refused by name; ``cantera_production`` serves such a
mechanism.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from functools import lru_cache
from math import inf, log
from typing import TYPE_CHECKING, Any

import numpy as np

from sonoyield.collapse.kinetics import production, thermo
from sonoyield.collapse.kinetics_arrays import (
    FIXED,
    LINDEMANN,
    SLOTS,
    SMALLEST,
    TROE,
    Indices,
    Scratch,
    Tables,
    new_scratch,
)
from sonoyield.describe.gas import GAS_CONSTANT, Array, GasPhase

if TYPE_CHECKING:
    import cantera as ct

KILO = 1e3
PLAIN = ("Arrhenius", "three-body-Arrhenius")
BLENDS = ("falloff-Lindemann", "falloff-Troe")
BURKE = ("linear-Burke", "three-body-linear-Burke")
AGREEMENT = 1e-9  # of a reaction's gross rate, between compiled kinetics and Cantera
TINY = 1e-200  # mol/m3/s, a rate that does not count
NEVER, ALWAYS = 1e-20, 1e20  # K: Troe temperatures beyond them make an exponential 0 or 1


class UnknownKineticsError(Exception):
    """A reaction that the compiled kinetics do not know; the message names it and its type."""


class DisagreementError(Exception):
    """The compiled kinetics differ from Cantera for a reaction that they should know."""


@dataclass(frozen=True, eq=False)
class CompiledKinetics:
    """A mechanism for the compiled functions of ``kinetics``, reactions in the phase's order."""

    tables: Tables

    def scratch(self) -> Scratch:
        """New working arrays, one set for each thread."""
        return new_scratch(self.tables)

    def scaled(self, factors: Array) -> CompiledKinetics:
        """The same with each reaction's rate, forward and reverse, times a factor >= 0 (R,)."""
        t = self.tables
        runs = factors > 0.0
        shift = np.log(np.where(runs, factors, 1.0))
        low = t.low.copy()
        low[:, 0] += shift[t.falling[:, 0]]
        return CompiledKinetics(
            t._replace(
                logarithm=t.logarithm + shift,
                sign=t.sign * runs,
                backward=t.backward * runs,
                low=low,
            )
        )


def compile_kinetics(phase: GasPhase) -> CompiledKinetics:
    """Tables of a phase with the rate multipliers that are set in it now.

    They are checked against Cantera on random states when they are first made. Raises
    ``UnknownKineticsError`` for a reaction of a kind that the compiled form does not know,
    ``DisagreementError`` where rates of progress differ from Cantera's by more than 1e-9.
    """
    gas = phase.solution()
    return _compiled(phase).scaled(_multipliers(gas))


@lru_cache(maxsize=8)
def _compiled(phase: GasPhase) -> CompiledKinetics:
    found = CompiledKinetics(_tables(phase.solution()))
    _check(phase, found)
    return found


def _multipliers(gas: ct.Solution) -> Array:
    return np.array([gas.multiplier(r) for r in range(gas.n_reactions)])


def cantera_production(
    phase: GasPhase, temperature: Array, concentrations: Array, crowding: Array, dense: bool
) -> Array:
    """What ``kinetics.production`` gives, mol/m3/s (N, K), for any mechanism, from Cantera.

    ``temperature`` K (N,), ``concentrations`` mol/m3 (N, K), negative ones taken as zero,
    ``crowding`` (N, K), heeded where ``dense`` is true. Below 200 K its thermo is Cantera's, which
    runs the polynomials on.
    """
    gas = phase.solution()
    net = np.asarray(gas.product_stoich_coeffs) - np.asarray(gas.reactant_stoich_coeffs)
    share = _shares(net)
    shift = crowding @ net if dense else np.zeros((len(temperature), gas.n_reactions))
    made = np.empty_like(concentrations)
    for n, (t, c) in enumerate(zip(temperature, concentrations, strict=True)):
        _set(gas, phase, t, c)
        forward = gas.forward_rates_of_progress * np.exp(-share * shift[n])
        reverse = gas.reverse_rates_of_progress * np.exp((1.0 - share) * shift[n])
        made[n] = net @ (forward - reverse) * KILO
    return made


def _set(gas: ct.Solution, phase: GasPhase, temperature: float, concentrations: Array) -> None:
    held = np.maximum(concentrations, 0.0)
    gas.TDX = temperature, float(held @ phase.molar_mass), held


def _shares(net: Array) -> Array:
    """Share of the dense-gas factor that the forward direction takes: see ``dense``."""
    made = net.sum(axis=0)
    return np.where(made < -0.5, 1.0, np.where(made > 0.5, 0.0, 0.5))


@dataclass(frozen=True)
class _Rate:
    """One reaction's rate: Arrhenius triples (A, b, Ea/R_u) in mol, m3, s, and what scales it."""

    high: tuple[float, float, float]
    efficiencies: tuple[float, ...] = ()  # of each species; none: no third body
    varied: tuple[tuple[int, float, float, float], ...] = ()  # species, ln A, b, Ea/R_u
    low: tuple[float, float, float] | None = None
    blend: int = LINDEMANN
    centre: tuple[float, ...] = (0.0,) * 5


def _rate(gas: ct.Solution, reaction: ct.Reaction) -> _Rate:
    kind, rate = reaction.reaction_type, _fields(reaction)
    order = sum(reaction.reactants.values())
    if kind in PLAIN:
        bodies = _efficiencies(gas, reaction.third_body)
        return _Rate(_triple(rate["rate-constant"], order + bool(bodies)), bodies)
    if kind in BLENDS:
        bodies = _efficiencies(gas, reaction.third_body)
        return _falloff(rate, order, bodies)
    if kind in BURKE:
        return _burke(gas, reaction, order)
    raise _unknown(reaction, f"its type {kind} is not known")


def _burke(gas: ct.Solution, reaction: ct.Reaction, order: float) -> _Rate:
    """A linear Burke rate whose M is a Troe falloff and whose colliders bring efficiencies only."""
    first, *others = _fields(reaction)["colliders"]
    if "Troe" not in first or any(set(one) != {"name", "efficiency"} for one in others):
        raise _unknown(reaction, "its colliders are not one Troe falloff and efficiencies")
    constant, varied = [1.0] * gas.n_species, []
    for one in others:
        if one["name"] in gas.species_names:
            k, a = gas.species_index(one["name"]), one["efficiency"]
            constant[k] = a["A"] if a["b"] == a["Ea"] == 0.0 else 0.0
            if constant[k] == 0.0 and a["A"] > 0.0:
                varied.append((k, log(a["A"]), a["b"], a["Ea"] / KILO / GAS_CONSTANT))
    return _falloff(first, order, tuple(constant), tuple(varied))


def _falloff(
    fields: dict[str, Any],
    order: float,
    efficiencies: tuple[float, ...],
    varied: tuple[tuple[int, float, float, float], ...] = (),
) -> _Rate:
    troe = fields.get("Troe", {})
    return _Rate(
        _triple(fields["high-P-rate-constant"], order),
        efficiencies,
        varied,
        _triple(fields["low-P-rate-constant"], order + 1),
        *_blend([troe[name] for name in ("A", "T3", "T1", "T2") if name in troe]),
    )


def _fields(reaction: ct.Reaction) -> dict[str, Any]:
    """The rate's parameters as the file names them, in Cantera's units (kmol, J)."""
    return dict(reaction.rate.input_data)


def _blend(troe: Sequence[float]) -> tuple[int, tuple[float, ...]]:
    if not troe:
        return LINDEMANN, (0.0,) * 5
    a, t3, t1, t2 = *troe, *[0.0] * (4 - len(troe))
    fixed = abs(t3) < NEVER and t1 > ALWAYS and (t2 == 0.0 or t2 > ALWAYS) and a > 0.0
    if fixed:
        return FIXED, (float(np.log10(a)), a, 0.0, 0.0, 0.0)
    return TROE, (0.0, a, _inverse(t3), _inverse(t1), t2)


def _inverse(temperature: float) -> float:
    return 1.0 / temperature if abs(temperature) > SMALLEST else inf


def _triple(fields: dict[str, Any], order: float) -> tuple[float, float, float]:
    """From kmol (Cantera) to mol."""
    scale = KILO ** (1.0 - order)
    return fields["A"] * scale, fields["b"], fields["Ea"] / KILO / GAS_CONSTANT


def _efficiencies(gas: ct.Solution, body: ct.ThirdBody | None) -> tuple[float, ...]:
    if body is None:
        return ()
    return tuple(body.efficiencies.get(k, body.default_efficiency) for k in gas.species_names)


def _unknown(reaction: ct.Reaction, why: str) -> UnknownKineticsError:
    return UnknownKineticsError(f"reaction {reaction.equation!r} is not compiled: {why}")


def _slots(gas: ct.Solution, reaction: ct.Reaction, side: dict[str, float]) -> list[int]:
    """The species of a side, each as often as its coefficient says, filled up with K."""
    if any(n != round(n) for n in side.values()) or sum(side.values()) > SLOTS:
        raise _unknown(reaction, f"it takes more than {SLOTS} or part of a molecule on a side")
    found = [gas.species_index(name) for name, n in side.items() for _ in range(round(n))]
    return found + [gas.n_species] * (SLOTS - len(found))


def _both_sides(gas: ct.Solution, reaction: ct.Reaction) -> tuple[list[int], list[int]]:
    if any(reaction.reactants.get(name) != n for name, n in reaction.orders.items()):
        raise _unknown(reaction, "its orders are not its coefficients")
    left = _slots(gas, reaction, reaction.reactants)
    right = _slots(gas, reaction, reaction.products)
    return left, right


def _tables(gas: ct.Solution) -> Tables:
    reactions = gas.reactions()
    sides = [_both_sides(gas, one) for one in reactions]
    rates = [_rate(gas, one) for one in reactions]
    for reaction, rate in zip(reactions, rates, strict=True):
        if rate.low and (rate.high[0] == 0.0 or rate.low[0] * rate.high[0] < 0.0):
            raise _unknown(reaction, "its falloff has no high-pressure rate")
    net = np.asarray(gas.product_stoich_coeffs) - np.asarray(gas.reactant_stoich_coeffs)
    high = np.array([rate.high for rate in rates])
    sign, runs_back = np.sign(high[:, 0]), np.array([one.reversible for one in reactions])
    return Tables(
        logarithm=np.log(np.where(sign == 0.0, 1.0, np.abs(high[:, 0]))),
        exponent=high[:, 1].copy(),
        activation=high[:, 2].copy(),
        sign=sign,
        backward=sign * runs_back,
        share=_shares(net),
        reactants=np.array([left for left, _ in sides], dtype=np.uint32),
        products=np.array([right for _, right in sides], dtype=np.uint32),
        unit=np.array([log(float(gas.reference_pressure) / GAS_CONSTANT)]),
        **_entries(net),
        **_slopes(net, sides),
        **_scales(rates, net),
    )


def _entries(net: Array) -> dict[str, Any]:
    owner, member = np.nonzero(net.T)
    return {
        "owner": owner.astype(np.uint32),
        "member": member.astype(np.uint32),
        "coefficient": net[member, owner],
    }


def _slopes(net: Array, sides: Sequence[tuple[list[int], list[int]]]) -> dict[str, Any]:
    """Each derivative of a rate by a slot, once for each species that the reaction changes."""
    found = [
        ((r, slot), (k, j), net[k, r])
        for r, (left, right) in enumerate(sides)
        for slot, j in enumerate((*left, *right))
        if j < len(net)
        for k in np.flatnonzero(net[:, r])
    ]
    owner, place, weight = zip(*found, strict=True)
    return {
        "slope_owner": _pairs(owner),
        "slope_place": _pairs(place),
        "slope_weight": np.array(weight),
    }


def _scales(rates: Sequence[_Rate], net: Array) -> dict[str, Any]:
    """Third bodies, each kept once, and falloffs."""
    bodies = list(dict.fromkeys((r.efficiencies, r.varied) for r in rates if r.efficiencies))
    falling = [r for r, rate in enumerate(rates) if rate.low]
    own = [bodies.index((r.efficiencies, r.varied)) if r.efficiencies else -1 for r in rates]
    after = {r: 1 + len(bodies) + f for f, r in enumerate(falling)}
    lows = [rates[r].low or (1.0, 0.0, 0.0) for r in falling]
    varied = [(i, *one) for i, (_, several) in enumerate(bodies) for one in several]
    efficiency = np.array([one for one, _ in bodies]).reshape(len(bodies), len(net))
    owner = np.nonzero(net.T)[0]
    return {
        "scaled": np.array([after.get(r, own[r] + 1) for r in range(len(rates))], dtype=np.uint32),
        "bodies": np.array([0, *range(len(bodies)), *(own[r] for r in falling)], dtype=np.uint32),
        "efficiency": efficiency,
        "colliding": np.ascontiguousarray(efficiency.T),
        "helped": _pairs([(e, own[r]) for e, r in enumerate(owner) if own[r] >= 0]),
        "varied": _pairs([one[:2] for one in varied]),
        "variation": np.array([one[2:] for one in varied]).reshape(-1, 3),
        "falling": _pairs([(r, rates[r].blend) for r in falling]),
        "low": np.array([(log(abs(a)), b, e) for a, b, e in lows]).reshape(-1, 3),
        "centre": np.array([rates[r].centre for r in falling]).reshape(-1, 5),
    }


def _pairs(rows: Sequence[tuple[int, ...]]) -> Indices:
    return np.array(rows, dtype=np.uint32).reshape(-1, 2)


def _check(phase: GasPhase, found: CompiledKinetics, count: int = 40) -> None:
    """Compare rates of progress with Cantera's at fixed random states."""
    gas = phase.solution()
    kept, factors = gas.TDX, _multipliers(gas)
    rng = np.random.default_rng(5)
    try:
        gas.set_multiplier(1.0)
        for _ in range(count):
            t, c = random_state(rng, gas)
            _set(gas, phase, t, c)
            _compare(gas, phase, found, t, c)
    finally:
        gas.TDX = kept
        for r, factor in enumerate(factors):
            gas.set_multiplier(factor, r)


def random_state(rng: np.random.Generator, gas: ct.Solution) -> tuple[float, Array]:
    """A temperature, K, and concentrations, mol/m3 (K,), for 1e-2 to 1e4 bar.

    300 to 12 000 K, or what the phase's polynomials are made for, if that is less.
    """
    coldest, hottest = max(300.0, gas.min_temp), min(12000.0, gas.max_temp)
    t = float(np.exp(rng.uniform(np.log(coldest), np.log(hottest))))
    pressure = 10.0 ** rng.uniform(3.0, 9.0)
    shares = rng.dirichlet(np.full(gas.n_species, 0.3)) + 1e-12
    return t, shares / shares.sum() * pressure / (GAS_CONSTANT * t)


def _compare(
    gas: ct.Solution, phase: GasPhase, found: CompiledKinetics, temperature: float, c: Array
) -> None:
    capacity, enthalpy, gibbs, out = np.empty((4, c.size))
    thermo(temperature, phase.nasa, capacity, enthalpy, gibbs)
    scratch = found.scratch()
    production(temperature, c, gibbs, c, False, found.tables, scratch, out)
    forward, reverse = gas.forward_rates_of_progress * KILO, gas.reverse_rates_of_progress * KILO
    gross = np.abs(forward) + np.abs(reverse) + TINY
    apart = np.abs(scratch.forward - forward) + np.abs(scratch.reverse - reverse)
    relative = np.nan_to_num(apart / gross, nan=inf)
    worst = int(np.argmax(relative))
    if relative[worst] > AGREEMENT:
        raise DisagreementError(
            f"reaction {gas.reaction(worst).equation!r} of {phase.name} differs from Cantera by "
            f"{relative[worst]:.1e} of its rate at {temperature:.0f} K"
        )
