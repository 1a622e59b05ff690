"""A ledger of market calls, settled against prices and scored against chance.

The names below are for notebooks and scripts; each is loaded when it is first used.

>>> import foresaid
>>> round(foresaid.wilson_interval(7, 10).low, 4)
0.3968
"""

from __future__ import annotations

from importlib import import_module
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from foresaid.chance.field import field_test, luck_band, timing_test
    from foresaid.chance.shifts import ShiftedHits
    from foresaid.claims.horizons import parse_horizon
    from foresaid.claims.phrases import parse_claim, print_claim
    from foresaid.ledger.store import Ledger
    from foresaid.model.codebook import default_codebook, load_codebook
    from foresaid.pipeline.demo import build_demo
    from foresaid.pipeline.groups import listed_calls
    from foresaid.pipeline.scoring import score_ledger
    from foresaid.pipeline.settling import settle_ledger
    from foresaid.pipeline.tracing import trace_call
    from foresaid.score.direction import (
        direction_table,
        henriksson_merton,
        hit_less_false_alarm,
        pesaran_timmermann,
    )
    from foresaid.score.e_process import TimedCalls, e_process
    from foresaid.score.equal_accuracy import diebold_mariano, paired_test
    from foresaid.score.losses import (
        coverage,
        crps_normal,
        crps_sample,
        interval_score,
        pinball_loss,
        ranked_probability_score,
    )
    from foresaid.score.multiplicity import (
        benjamini_hochberg,
        benjamini_yekutieli,
        field_shares,
        holm,
    )
    from foresaid.score.overlap import disjoint_windows
    from foresaid.score.poisson_binomial import poisson_binomial_pmf, poisson_binomial_tails
    from foresaid.score.power import (
        achieved_power,
        best_possible_p,
        calls_needed,
        detectable_skill,
    )
    from foresaid.score.probability import (
        brier_score,
        brier_skill,
        log_score,
        spiegelhalter_z,
    )
    from foresaid.score.proportions import (
        binomial_tails,
        clopper_pearson_interval,
        jeffreys_interval,
        wilson_interval,
    )
    from foresaid.score.shrinkage import shrunken_ranks

__version__ = "0.1.0"

_HOMES = {
    "Ledger": "ledger.store",
    "ShiftedHits": "chance.shifts",
    "TimedCalls": "score.e_process",
    "achieved_power": "score.power",
    "benjamini_hochberg": "score.multiplicity",
    "benjamini_yekutieli": "score.multiplicity",
    "best_possible_p": "score.power",
    "binomial_tails": "score.proportions",
    "brier_score": "score.probability",
    "brier_skill": "score.probability",
    "build_demo": "pipeline.demo",
    "calls_needed": "score.power",
    "clopper_pearson_interval": "score.proportions",
    "coverage": "score.losses",
    "crps_normal": "score.losses",
    "crps_sample": "score.losses",
    "default_codebook": "model.codebook",
    "detectable_skill": "score.power",
    "diebold_mariano": "score.equal_accuracy",
    "direction_table": "score.direction",
    "disjoint_windows": "score.overlap",
    "e_process": "score.e_process",
    "field_shares": "score.multiplicity",
    "field_test": "chance.field",
    "henriksson_merton": "score.direction",
    "hit_less_false_alarm": "score.direction",
    "holm": "score.multiplicity",
    "interval_score": "score.losses",
    "jeffreys_interval": "score.proportions",
    "listed_calls": "pipeline.groups",
    "load_codebook": "model.codebook",
    "log_score": "score.probability",
    "luck_band": "chance.field",
    "paired_test": "score.equal_accuracy",
    "parse_claim": "claims.phrases",
    "parse_horizon": "claims.horizons",
    "pesaran_timmermann": "score.direction",
    "pinball_loss": "score.losses",
    "poisson_binomial_pmf": "score.poisson_binomial",
    "poisson_binomial_tails": "score.poisson_binomial",
    "print_claim": "claims.phrases",
    "ranked_probability_score": "score.losses",
    "score_ledger": "pipeline.scoring",
    "settle_ledger": "pipeline.settling",
    "shrunken_ranks": "score.shrinkage",
    "spiegelhalter_z": "score.probability",
    "timing_test": "chance.field",
    "trace_call": "pipeline.tracing",
    "wilson_interval": "score.proportions",
}

__all__ = [
    "Ledger",
    "ShiftedHits",
    "TimedCalls",
    "achieved_power",
    "benjamini_hochberg",
    "benjamini_yekutieli",
    "best_possible_p",
    "binomial_tails",
    "brier_score",
    "brier_skill",
    "build_demo",
    "calls_needed",
    "clopper_pearson_interval",
    "coverage",
    "crps_normal",
    "crps_sample",
    "default_codebook",
    "detectable_skill",
    "diebold_mariano",
    "direction_table",
    "disjoint_windows",
    "e_process",
    "field_shares",
    "field_test",
    "henriksson_merton",
    "hit_less_false_alarm",
    "holm",
    "interval_score",
    "jeffreys_interval",
    "listed_calls",
    "load_codebook",
    "log_score",
    "luck_band",
    "paired_test",
    "parse_claim",
    "parse_horizon",
    "pesaran_timmermann",
    "pinball_loss",
    "poisson_binomial_pmf",
    "poisson_binomial_tails",
    "print_claim",
    "ranked_probability_score",
    "score_ledger",
    "settle_ledger",
    "shrunken_ranks",
    "spiegelhalter_z",
    "timing_test",
    "trace_call",
    "wilson_interval",
]


def __getattr__(name: str) -> Any:  # noqa: ANN401 - any public object
    if name not in _HOMES:
        raise AttributeError(f"module 'foresaid' has no attribute {name!r}")
    return getattr(import_module(f"foresaid.{_HOMES[name]}"), name)


def __dir__() -> list[str]:
    return [*__all__, "__version__"]
