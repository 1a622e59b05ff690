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
    from foresaid.claims.horizons import parse_horizon
    from foresaid.claims.phrases import parse_claim, print_claim
    from foresaid.ledger.store import Ledger
    from foresaid.model.codebook import default_codebook, load_codebook
    from foresaid.pipeline.demo import build_demo
    from foresaid.pipeline.groups import listed_calls
    from foresaid.pipeline.scoring import score_ledger
    from foresaid.pipeline.settling import settle_ledger
    from foresaid.pipeline.tracing import trace_call
    from foresaid.score.overlap import disjoint_windows
    from foresaid.score.poisson_binomial import poisson_binomial_pmf, poisson_binomial_tails
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

__version__ = "0.1.0"

_HOMES = {
    "Ledger": "ledger.store",
    "binomial_tails": "score.proportions",
    "brier_score": "score.probability",
    "brier_skill": "score.probability",
    "build_demo": "pipeline.demo",
    "clopper_pearson_interval": "score.proportions",
    "default_codebook": "model.codebook",
    "disjoint_windows": "score.overlap",
    "jeffreys_interval": "score.proportions",
    "listed_calls": "pipeline.groups",
    "load_codebook": "model.codebook",
    "log_score": "score.probability",
    "parse_claim": "claims.phrases",
    "parse_horizon": "claims.horizons",
    "poisson_binomial_pmf": "score.poisson_binomial",
    "poisson_binomial_tails": "score.poisson_binomial",
    "print_claim": "claims.phrases",
    "score_ledger": "pipeline.scoring",
    "settle_ledger": "pipeline.settling",
    "spiegelhalter_z": "score.probability",
    "trace_call": "pipeline.tracing",
    "wilson_interval": "score.proportions",
}

__all__ = [
    "Ledger",
    "binomial_tails",
    "brier_score",
    "brier_skill",
    "build_demo",
    "clopper_pearson_interval",
    "default_codebook",
    "disjoint_windows",
    "jeffreys_interval",
    "listed_calls",
    "load_codebook",
    "log_score",
    "parse_claim",
    "parse_horizon",
    "poisson_binomial_pmf",
    "poisson_binomial_tails",
    "print_claim",
    "score_ledger",
    "settle_ledger",
    "spiegelhalter_z",
    "trace_call",
    "wilson_interval",
]


def __getattr__(name: str) -> Any:  # noqa: ANN401 - any public object
    if name not in _HOMES:
        raise AttributeError(f"module 'foresaid' has no attribute {name!r}")
    return getattr(import_module(f"foresaid.{_HOMES[name]}"), name)


def __dir__() -> list[str]:
    return [*__all__, "__version__"]
