"""How much record is needed, and what a record could have shown at best."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, Any

import numpy as np

from foresaid.ledger import queries
from foresaid.model.errors import UsageError
from foresaid.pipeline.groups import grouped_calls, is_headline
from foresaid.pipeline.scoring import record_of
from foresaid.score.power import (
    achieved_power,
    best_possible_p,
    calls_needed,
    detectable_skill,
)
from foresaid.score.record import effective_n

if TYPE_CHECKING:
    from foresaid.ledger.store import Ledger
    from foresaid.model.bars import FloatArray

PLAN_COLUMNS = (
    "forecaster", "n", "chance", "skill", "level", "power", "field", "overlap", "calls_needed",
    "achieved_power", "attained_level", "hits_needed", "detectable_skill", "best_possible_p",
)  # fmt: skip


@dataclass(frozen=True)
class Plan:
    """A test that is planned, or that a record has been through.

    Attributes
    ----------
    chance, skill : float
        How often a call is right by chance, and with the skill to be found.
    level, power : float
        Of the test, and how surely the skill is to be found.
    field : int
        Records that are looked at.
    overlap : float
        Mean number of calls that share one window.
    n : int or None
        Matured calls there are; None where only the number needed is asked for.
    forecaster : str
        Whose record it is, empty for a plan.
    chances : ndarray of float or None
        The chances of the calls there are.
    """

    chance: float
    skill: float
    level: float
    power: float
    field: int = 1
    overlap: float = 1.0
    n: int | None = None
    forecaster: str = ""
    chances: FloatArray | None = None


def check_plan(plan: Plan) -> None:
    """Refuse numbers that make no sense.

    Raises
    ------
    UsageError
        If a share is no share, the power is not above the level, or a count is too small.
    """
    shares = {"--chance": plan.chance, "--skill": plan.skill}
    for name, share in shares.items():
        if not 0.0 < share <= 1.0:
            raise UsageError(f"{name} {share:g} must lie between 0 and 1.")
    if plan.skill <= plan.chance:
        raise UsageError(
            f"--skill {plan.skill:g} must be above the chance of {plan.chance:g}: there is "
            "nothing to find otherwise."
        )
    if not 0.0 < plan.level < plan.power < 1.0:
        raise UsageError("--level and --power must lie between 0 and 1, the power above.")
    if plan.field < 1 or not 1.0 <= plan.overlap < 1e6 or (plan.n is not None and plan.n < 0):
        raise UsageError("--field and --overlap start at 1, --calls at 0.")


def planned(plan: Plan) -> dict[str, Any]:
    """Return the numbers of a plan, with the columns of ``PLAN_COLUMNS``."""
    shared: dict[str, Any] = {
        "level": plan.level,
        "field": plan.field,
        "overlap": plan.overlap,
    }
    row: dict[str, Any] = dict.fromkeys(PLAN_COLUMNS)
    row |= {name: getattr(plan, name) for name in row if hasattr(plan, name)}
    row["calls_needed"] = calls_needed(plan.chance, plan.skill, power=plan.power, **shared)
    if plan.n is not None:
        found = achieved_power(plan.n, plan.chance, plan.skill, **shared)
        row["achieved_power"] = found.power
        row["attained_level"] = found.attained_level
        row["hits_needed"] = found.hits_needed
        row["detectable_skill"] = detectable_skill(
            plan.n, plan.chance, power=plan.power, **shared
        )
        chances = plan.chances
        if chances is None:
            chances = np.full(int(plan.n // plan.overlap), plan.chance)
        row["best_possible_p"] = best_possible_p(chances)
    return row


def plan_of_record(ledger: Ledger, forecaster: str, *, field: int | None) -> Plan:
    """Return the test that a forecaster's matured calls have been through.

    Level, power and edge are those of the codebook they were settled under; the field is the
    number of forecasters with a matured call where none is given.

    Raises
    ------
    UsageError
        If there is no such forecaster, nothing is settled, or no call of theirs has matured
        with a chance.
    """
    if forecaster not in queries.forecasters(ledger):
        raise UsageError(f"There is no forecaster {forecaster!r} in this ledger.")
    found = grouped_calls(ledger, ["forecaster"])
    headline = found.table[is_headline(found.table)]
    own = record_of(headline[headline["forecaster"] == forecaster])
    chances = own.chance_right[np.isfinite(own.chance)]
    if not len(chances):
        raise UsageError(
            f"No call of {forecaster} has matured with a chance and a stated date yet."
        )
    rules, chance = found.codebook.verdict, float(chances.mean())
    plan = Plan(
        chance=chance,
        skill=min(chance + rules.edge, 1.0),
        level=rules.level,
        power=rules.power,
        field=int(headline["forecaster"].nunique()) if field is None else field,
        overlap=max(1.0, len(own.came_true) / max(1, effective_n(own))),
        n=len(chances),
        forecaster=forecaster,
    )
    check_plan(plan)
    return replace(plan, chances=chances)
