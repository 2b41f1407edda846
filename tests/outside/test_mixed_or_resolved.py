"""How wrong is a mixed gas: the table of ratios, and the rule drawn from it.

Both sides of the table are ours; what is outside the rule is the gas it is judged on, which had no
part in it. The table is checked by running its bubbles again.
"""

from __future__ import annotations

import mixed_rules as rules
import mixed_table as table
import pytest

from sonoyield.collapse import mixed_rule
from sonoyield.collapse.yields import Collapse

ROWS = rules.rows_of(table.TABLE)
# Air and nitrogen in nearly pure steam: 40 cells take many minutes or fail, the table has 20.
STUCK = (24, 29)
QUICK = (1, 15, 21)  # argon, oxygen and air: seconds each
# Other compilers and libraries take other steps: counts at a tolerance of 1e-6 repeat to 1 %. What
# comes back out of a film is a difference of two large flows.
SAME, SAME_IN_FILM = 0.01, 0.05
FEW = 10.0  # molecules; such a count has no relative accuracy


def test_the_table_holds_what_was_drawn() -> None:
    assert len(ROWS) == len(table.GASES) * table.EACH == 35
    for name in ("frequency_Hz", "pressure_Pa", "radius_m", "temperature_K"):
        assert len({row[name] for row in ROWS}) >= 30
    assert {row[f"{model}_ended"] for row in ROWS for model in MODELS} == {"complete"}


@pytest.mark.parametrize("which", QUICK)
def test_a_row_is_found_again(which: int) -> None:
    row = ROWS[which]
    _agree(row, table.mixed_of(row), SAME)
    _agree(row, table.resolved_of(row), SAME)


@pytest.mark.slow
def test_the_same_bubbles_are_drawn() -> None:
    for case, row in zip(table.drawn(), ROWS, strict=True):
        assert case == {name: row[name] for name in table.INPUTS}


@pytest.mark.slow
@pytest.mark.parametrize("which", [n for n in range(len(ROWS)) if n not in STUCK])
def test_every_row_is_found_again(which: int) -> None:
    row = ROWS[which]
    _agree(row, table.mixed_of(row), SAME)
    _agree(row, table.resolved_of(row), SAME)
    _agree(row, table.film_of(row), SAME_IN_FILM)


def test_the_rule_in_the_code_is_the_one_of_the_table() -> None:
    rule = rules.fitted(ROWS)
    assert rule.temperature == pytest.approx(mixed_rule.LEAST_PEAK, rel=1e-4)
    assert rule.vapour == pytest.approx(mixed_rule.MOST_STEAM, rel=1e-4)
    kinds = {row_kind(row) for row in ROWS}
    assert kinds == set(mixed_rule.SPREAD)
    for kind, spread in mixed_rule.SPREAD.items():
        ratios = [rules.ratio(row) for row in ROWS if row_kind(row) == kind]
        assert spread == pytest.approx((min(ratios), max(ratios)), rel=5e-3)
    oxides = [rules.ratio(row, "NOx") for row in ROWS if float(row["mixed_NOx"]) > 0.0]
    expected = (min(oxides), max(oxides))
    assert pytest.approx(expected, rel=5e-3) == mixed_rule.SPREAD_OF_NITROGEN


def test_the_rule_holds_on_gases_it_has_not_seen() -> None:
    """Leaving out one gas at a time: no unsafe bubble called safe, 32 of 35 judged rightly."""
    found = rules.left_out(ROWS)
    assert found == LEFT_OUT
    assert sum(right for right, _, _ in found.values()) == 32
    assert sum(false for _, false, _ in found.values()) == 0


def test_safe_means_within_the_factor() -> None:
    low, high = mixed_rule.SPREAD["safe"]
    assert 1.0 / rules.FACTOR <= low < high <= rules.FACTOR


@pytest.mark.parametrize(
    ("peak", "steam", "kind"),
    [(4000.0, 0.1, "safe"), (4000.0, 0.9, "steam"), (2500.0, 0.1, "cool")],
)
def test_the_sentence_says_which_way_it_errs(peak: float, steam: float, kind: str) -> None:
    found = mixed_rule.mixed_is_safe(_collapse(peak, steam), {"AR": 1.0})
    assert (found.kind, found.safe) == (kind, kind == "safe")
    assert (found.low, found.high) == mixed_rule.SPREAD[kind]
    assert ("within a factor 2" in found.sentence) is found.safe
    assert "nitrogen" not in found.sentence
    assert "nitrogen" in mixed_rule.mixed_is_safe(_collapse(peak, steam), {"N2": 1.0}).sentence


MODELS = ("mixed", "resolved", "film")
# Hits, unsafe called safe, safe called unsafe, of the five bubbles of each gas.
LEFT_OUT = {
    "argon": (5, 0, 0),
    "helium": (5, 0, 0),
    "xenon": (5, 0, 0),
    "oxygen": (5, 0, 0),
    "air": (5, 0, 0),
    "nitrogen": (4, 0, 1),
    "argon and oxygen": (3, 0, 2),
}


def row_kind(row: rules.Row) -> str:
    """Kind of a row's bubble by the rule in the code."""
    collapse = _collapse(float(row["mixed_peak_K"]), float(row["mixed_vapour"]))
    return mixed_rule.mixed_is_safe(collapse, {}).kind


def _collapse(peak: float, steam: float) -> Collapse:
    """A collapse of which the rule reads two numbers."""
    return Collapse(peak, None, None, 1e8, 1e-5, 1e-6, 1e3, 1e-6, 100.0, steam, 300.0, True)


def _agree(row: rules.Row, found: rules.Row, within: float) -> None:
    for name, value in found.items():
        if name.endswith("_ended"):
            assert value == row[name]
        else:
            few = FEW if name.endswith(table.COUNTED) else 0.0
            assert float(value) == pytest.approx(float(row[name]), rel=within, abs=few), name
