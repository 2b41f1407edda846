"""Which reactions make and destroy what one exposure delivers, and which rates it hangs on.

First the rates of production, integrated over the windows of the run; they screen the rates.
Then, for the rates with the largest production, the sensitivity d ln(delivered) / d ln k by
central differences of whole runs, and from it and the rate's uncertainty the share of variance:
(sensitivity x sigma)^2 over the sum of it. Rates that are screened out count as none.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import asdict, dataclass
from math import exp, log, sqrt
from typing import Any

from sonoyield._version import __version__
from sonoyield.collapse.follow import Accuracy, follow
from sonoyield.collapse.history import History
from sonoyield.collapse.ledger import balance
from sonoyield.collapse.one_way import follow_one_way
from sonoyield.collapse.outcome import outcome_of
from sonoyield.collapse.yields import collapse_of, counts_of
from sonoyield.decide.kinetics_uncertainty import (
    DEFAULT_FACTOR,
    WIDTH,
    RateUncertainty,
    multiplied,
)
from sonoyield.decide.production import Production, mismatch, productions
from sonoyield.describe.protocol import Protocol
from sonoyield.expose.estimate import estimate
from sonoyield.expose.result import SCHEMA, Estimate

SCREENED = 15  # rates whose sensitivity is taken
# Step in ln k. Small enough for a derivative (the error is of its square), large enough to stand
# well above the integrator's tolerance of 1e-6.
# Close steps, and no stage with chemistry frozen, so that rates sum to what the run did.
FINE = Accuracy(relative=1e-7, split=False)
STEP = 0.15
LOOSE = 0.01  # of the integrals, above which they are called inexact
FEWEST = 1.0  # delivered molecules below which a relative change means nothing
FOLLOWERS = {"two_way": follow, "one_way": follow_one_way}
METHOD = (
    f"Sensitivity: central difference of whole runs, ln k +- {STEP}, the {SCREENED} rates with the "
    "largest net production of the species. Share of variance: (sensitivity x sigma)^2 over the "
    "sum, sigma = ln(f) / 2; rates screened out count as none."
)


class SpeciesError(ValueError):
    """A species that the result does not report."""


@dataclass(frozen=True)
class Influence:
    """One rate's hold on a delivered species.

    ``sensitivity``: d ln(delivered) / d ln k; ``variance_share``: of the variance of
    ln(delivered) that the screened rates bring together (0 to 1).
    """

    rate: RateUncertainty
    net: float
    sensitivity: float
    variance_share: float


@dataclass(frozen=True)
class Story:
    """One delivered species: molecules per window, production and influences, largest first.

    ``factor``: delivered is within this factor, up and down, at two standard deviations, by the
    uncertainty of the screened rates alone. ``influences`` is empty and ``factor`` is ``None``
    where there is no sensitivity to give, ``reason`` says why. ``mismatch``: how far the
    production integrals miss the run's own states, as a share.
    """

    species: str
    delivered: float
    productions: tuple[Production, ...]
    influences: tuple[Influence, ...]
    factor: float | None
    mismatch: float
    reason: str = ""


@dataclass(frozen=True, eq=False)
class Explanation:
    """The stories of the species asked for, and the estimate they explain.

    ``stories`` is empty when the numerics failed (``estimate.outcome``).
    """

    estimate: Estimate
    stories: tuple[Story, ...]
    warnings: tuple[str, ...] = ()

    def as_dict(self) -> dict[str, Any]:
        """The explanation by its documented keys, ready for JSON."""
        return _as_dict(self)

    def rows(self) -> list[dict[str, Any]]:
        """One flat row for each species and rate, for CSV and Parquet."""
        return [row for story in self.stories for row in _rows(story)]


def explain(protocol: Protocol, species: tuple[str, ...] = ("OH", "H2O2")) -> Explanation:
    """Run the exposure, then again with each important rate changed.

    Raises ``SpeciesError`` for a species that the result does not report, ``FileNotFoundError``
    when the mechanism is not installed.
    """
    result = estimate(protocol, accuracy=FINE, fast=True)
    _check(species, result)
    if not result.outcome.code.has_numbers:
        return Explanation(result, ())
    history = result.history
    made = {name: productions(history, name) for name in species}
    told = [name for name in species if _delivered(history, name) >= FEWEST]
    slopes, failed = _sensitivities(
        protocol, history, screened({name: made[name] for name in told}), told
    )
    stories = tuple(_story(history, name, made[name], slopes.get(name, {})) for name in species)
    return Explanation(result, stories, (*result.warnings, *_warnings(stories, failed)))


def screened(made: dict[str, tuple[Production, ...]]) -> tuple[RateUncertainty, ...]:
    """The rates with the largest share of the production of any of the species."""
    score: dict[RateUncertainty, float] = {}
    for ones in made.values():
        total = sum(abs(one.net) for one in ones) or 1.0
        for one in ones:
            score[one.rate] = max(score.get(one.rate, 0.0), abs(one.net) / total)
    return tuple(sorted(score, key=lambda rate: -score[rate])[:SCREENED])


def sensitivity(
    history: History, rate: RateUncertainty, species: list[str], run: Callable[[], History]
) -> dict[str, float] | None:
    """d ln(delivered) / d ln k of one rate, by species; ``None`` where a perturbed run failed."""
    logs = []
    for step in (STEP, -STEP):
        with multiplied(history.bubble.phase, dict.fromkeys(rate.rows, exp(step))):
            changed = run()
        outcome = outcome_of(changed, collapse_of(changed), balance(changed))
        amounts = [_delivered(changed, name) for name in species]
        if not outcome.code.has_numbers or min(amounts) <= 0.0:
            return None
        logs.append([log(amount) for amount in amounts])
    up, down = logs
    return {name: (up[i] - down[i]) / (2.0 * STEP) for i, name in enumerate(species)}


def _check(species: tuple[str, ...], result: Estimate) -> None:
    held = result.history.bubble.phase.species
    allowed = [name for name in counts_of(result.history) if name in held]
    for name in species:
        if name not in allowed:
            raise SpeciesError(f"{name}: not reported here; allowed {', '.join(allowed)}")


def _sensitivities(
    protocol: Protocol, history: History, rates: tuple[RateUncertainty, ...], species: list[str]
) -> tuple[dict[str, dict[RateUncertainty, float]], list[RateUncertainty]]:
    run = FOLLOWERS[protocol.model.coupling]

    def again() -> History:
        return run(history.bubble, protocol.model.collapses)

    slopes: dict[str, dict[RateUncertainty, float]] = {name: {} for name in species}
    failed = []
    for rate in rates:
        found = sensitivity(history, rate, species, again)
        if found is None:
            failed.append(rate)
            continue
        for name, slope in found.items():
            slopes[name][rate] = slope
    return slopes, failed


def _story(
    history: History, species: str, made: tuple[Production, ...],
    slopes: dict[RateUncertainty, float],
) -> Story:  # fmt: skip
    delivered, missed = _delivered(history, species), mismatch(history, species, made)
    if not slopes:
        few = delivered < FEWEST
        reason = "too few to ask what they hang on" if few else "every perturbed run failed"
        return Story(species, delivered, made, (), None, missed, reason)
    net = {one.rate: one.net for one in made}
    parts = {rate: (slope * rate.sigma) ** 2 for rate, slope in slopes.items()}
    total = sum(parts.values())
    influences = [
        Influence(rate, net.get(rate, 0.0), slope, parts[rate] / total if total else 0.0)
        for rate, slope in slopes.items()
    ]
    influences.sort(key=lambda one: (-one.variance_share, -abs(one.sensitivity)))
    factor = exp(WIDTH * sqrt(total))
    return Story(species, delivered, made, tuple(influences), factor, missed)


def _warnings(stories: tuple[Story, ...], failed: list[RateUncertainty]) -> list[str]:
    found = [
        f"{rate.reaction_id}, {rate.equation}: a run with this rate changed failed; the rate has "
        "no sensitivity and no part in the shares of variance."
        for rate in failed
    ]
    for story in stories:
        if story.mismatch > LOOSE and story.delivered >= FEWEST:
            found.append(
                f"{story.species}: the production integrals miss the change of contents by "
                f"{100 * story.mismatch:.2g} %; the run's steps are coarse for them."
            )
        assumed = [one.rate.reaction_id for one in story.influences if one.rate.assumed]
        if assumed:
            found.append(f"{story.species}: factor {DEFAULT_FACTOR:g} assumed for {assumed}.")
    return found


def _delivered(history: History, species: str) -> float:
    return counts_of(history)[species].delivered


def _as_dict(result: Explanation) -> dict[str, Any]:
    base, phase = result.estimate, result.estimate.history.bubble.phase
    return {
        "title": base.protocol.title,
        "version": __version__,
        "schema": SCHEMA,
        "warnings": list(result.warnings),
        "outcome": {"code": str(base.outcome.code), "sentence": base.outcome.sentence},
        "inputs": base.protocol.dump()
        | {"mechanism": {"name": phase.name, "sha256": phase.sha256}},
        "method": METHOD,
        "species": {story.species: _told(story) for story in result.stories} or None,
    }


def _told(story: Story) -> dict[str, Any]:
    return {
        "delivered": story.delivered,
        "factor_from_rates": story.factor,
        "reason": story.reason or None,
        "mismatch": story.mismatch,
        "production": [
            _named(one.rate) | {"forward": one.forward, "reverse": one.reverse, "net": one.net}
            for one in story.productions
        ],
        "influence": [
            _named(one.rate)
            | {"net": one.net, "sensitivity": one.sensitivity, "variance_share": one.variance_share}
            for one in story.influences
        ],
    }


def _named(rate: RateUncertainty) -> dict[str, Any]:
    fields = asdict(rate)
    return {key: fields[key] for key in ("reaction_id", "equation", "factor", "assumed", "source")}


def _rows(story: Story) -> list[dict[str, Any]]:
    influences = {one.rate: one for one in story.influences}
    made = {one.rate: one for one in story.productions}
    rows = []
    for rate in dict.fromkeys([*influences, *made]):
        influence, production = influences.get(rate), made.get(rate)
        rows.append(
            {"species": story.species, **_named(rate)}
            | {key: getattr(production, key, 0.0) for key in ("forward", "reverse", "net")}
            | {key: getattr(influence, key, None) for key in ("sensitivity", "variance_share")}
        )
    return rows
