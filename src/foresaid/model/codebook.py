"""The codebook: rules as data, read from TOML into frozen records with a digest.

Nothing here decides how a rule is applied; the rooms that apply one read its numbers here.
"""

from __future__ import annotations

import hashlib
import json
import tomllib
from dataclasses import asdict, dataclass, field
from functools import cache, cached_property
from importlib import resources
from typing import TYPE_CHECKING, Any, Literal

from foresaid.model.checks import Node
from foresaid.model.errors import InputRejected

if TYPE_CHECKING:
    from pathlib import Path

NEEDS = ("checkable", "dated", "sized", "probability")
UNITS = ("%", "pp", "bp", "pt")


@dataclass(frozen=True, slots=True)
class HorizonWord:
    """The length a word stands for, with the alternates on either side."""

    length: str
    shorter: str
    longer: str


@dataclass(frozen=True, slots=True)
class HorizonClass:
    """A class of calls by length; ``months`` is the inclusive bound, None for the last."""

    name: str
    months: int | None
    weight: float


@dataclass(frozen=True, slots=True)
class SpecificityClass:
    """A class of calls by how much was said; a call must meet all of ``needs``."""

    name: str
    needs: tuple[str, ...]
    weight: float


@dataclass(frozen=True, slots=True)
class LikelihoodScale:
    """Words of probability with their bounds as fractions, and where they come from."""

    source: str
    words: dict[str, tuple[float, float]]


@dataclass(frozen=True, slots=True)
class InstrumentKind:
    """How prices of one kind of instrument behave."""

    scale: Literal["ratio", "difference"]
    negative: bool
    weekends: bool
    units: tuple[str, ...]


@dataclass(frozen=True, slots=True)
class SettlementRules:
    """Numbers of the settlement conventions; hours are minutes after midnight.

    The ``query`` fields say which prices a person has to look at (docs/settlement.md).
    """

    tolerance: float
    day_only: Literal["before-close", "after-close"]
    roll_back_days: int
    default_opens: int
    default_closes: int
    query_moves: float
    query_sessions: int
    query_minimum: int
    query_part: float
    query_points: float
    query_part_short: float
    query_points_short: float


@dataclass(frozen=True, slots=True)
class ChanceRules:
    """Numbers of the base rate and its fallback."""

    enough_windows: int
    volatility_sessions: int
    volatility_minimum: int
    modelled_floor: float
    walks: int
    walks_seed: int
    coin: float
    shift_span: Literal["record", "history"]
    shift_marks: Literal["ratio", "volatility"]


@dataclass(frozen=True, slots=True)
class VerdictRules:
    """Levels and minimum record for anything to be said."""

    level: float
    interval_level: float
    minimum_matured: int
    minimum_disjoint: int
    edge: float
    power: float


@dataclass(frozen=True)
class Codebook:
    """Every rule in force, with the digest of its content (not of its layout).

    ``source`` is the text it was read from, which the digest leaves out.
    """

    name: str
    horizon_words: dict[str, HorizonWord]
    horizon_default: HorizonWord
    horizon_classes: tuple[HorizonClass, ...]
    sessions_per_month: int
    undated: str
    specificity_classes: tuple[SpecificityClass, ...]
    not_a_call_reasons: tuple[str, ...]
    likelihood_default: str
    likelihood_scales: dict[str, LikelihoodScale]
    instrument_kinds: dict[str, InstrumentKind]
    settlement: SettlementRules
    chance: ChanceRules
    verdict: VerdictRules
    source: str = field(compare=False, repr=False)

    @property
    def canonical(self) -> str:
        """The rules as JSON with sorted keys and no spaces: what the digest covers."""
        rules = asdict(self)
        del rules["source"]
        return json.dumps(rules, sort_keys=True, separators=(",", ":"))

    @cached_property
    def digest(self) -> str:
        """SHA-256 of the canonical form, in hex."""
        return hashlib.sha256(self.canonical.encode()).hexdigest()


# what version 2 added; a codebook of version 1 takes these as shipped
_LATER = {
    "settlement": (
        "query_moves",
        "query_sessions",
        "query_minimum",
        "query_part",
        "query_points",
        "query_part_short",
        "query_points_short",
    ),
    "chance": ("shift_span", "shift_marks"),
    "verdict": ("edge", "power"),
}


@cache
def default_codebook() -> Codebook:
    """Return the codebook shipped with the package."""
    return parse_codebook(_shipped(), file="codebook.toml")


def _shipped() -> str:
    return resources.files("foresaid.model").joinpath("codebook.toml").read_text("utf-8")


def load_codebook(path: Path | None) -> Codebook:
    """Return the user's codebook, or the default one when ``path`` is None.

    Raises
    ------
    InputRejected
        If the file cannot be read as TOML or breaks a rule; every fault is listed.
    """
    if path is None:
        return default_codebook()
    try:
        text = path.read_text("utf-8")
    except OSError as fault:
        raise InputRejected(f"The codebook {path} cannot be read: {fault.strerror}.") from fault
    except UnicodeDecodeError as fault:
        raise InputRejected(
            f"The codebook {path} cannot be read: it is no text in UTF-8."
        ) from fault
    return parse_codebook(text, file=str(path))


def parse_codebook(text: str, *, file: str) -> Codebook:
    """Return the codebook written in ``text``.

    Raises
    ------
    InputRejected
        With one issue for each wrong key: the key, the value and what is allowed.
    """
    try:
        raw = tomllib.loads(text)
    except tomllib.TOMLDecodeError as fault:
        raise InputRejected(f"The codebook {file} is not valid TOML: {fault}") from fault
    root = Node(_with_later_rules(raw), file=file)
    book = _read(root, text)
    root.finish()
    if root.issues:
        raise InputRejected(f"The codebook {file} was refused.", root.issues)
    return book


def _with_later_rules(raw: dict[str, Any]) -> dict[str, Any]:
    """Return a codebook of the first version with the rules that came later, as shipped."""
    if raw.get("version") != 1:
        return raw
    shipped = tomllib.loads(_shipped())
    added = {
        table: {key: shipped[table][key] for key in keys} | raw[table]
        for table, keys in _LATER.items()
        if isinstance(raw.get(table), dict)
    }
    return raw | added


def _read(root: Node, source: str) -> Codebook:
    root.choice("version", (1, 2))
    classes = root.table("horizon_classes")
    likelihood = root.table("likelihood")
    scales = {key: _scale(node) for key, node in likelihood.tables("scales")}
    faults = len(root.issues)
    bounds = tuple(_horizon_class(node) for node in classes.rows("bound"))
    if len(root.issues) == faults:
        _check_bounds(classes, bounds)
    return Codebook(
        name=root.text("name"),
        horizon_words={key: _word(node) for key, node in root.tables("horizon_words")},
        horizon_default=_word(root.table("horizon_default")),
        horizon_classes=bounds,
        sessions_per_month=classes.integer("sessions_per_month", low=1, high=31),
        undated=classes.text("undated"),
        specificity_classes=tuple(
            SpecificityClass(
                node.text("name"),
                node.texts("needs", allowed=NEEDS),
                node.number("weight", low=0.0),
            )
            for node in root.rows("specificity_classes")
        ),
        not_a_call_reasons=root.table("not_a_call").texts("reasons"),
        likelihood_default=likelihood.choice("default", tuple(scales)),
        likelihood_scales=scales,
        instrument_kinds={key: _kind(node) for key, node in root.tables("instrument_kinds")},
        settlement=_settlement(root.table("settlement")),
        chance=_chance(root.table("chance")),
        verdict=_verdict(root.table("verdict")),
        source=source,
    )


def _word(node: Node) -> HorizonWord:
    return HorizonWord(node.length("length"), node.length("shorter"), node.length("longer"))


def _horizon_class(node: Node) -> HorizonClass:
    months = node.integer("months", low=1, high=1200) if node.has("months") else None
    return HorizonClass(node.text("name"), months, node.number("weight", low=0.0))


def _check_bounds(node: Node, bounds: tuple[HorizonClass, ...]) -> None:
    months = [b.months for b in bounds]
    inner = [m for m in months[:-1] if m is not None]
    if months[-1] is not None or len(inner) != len(months) - 1:
        node.fault("bound", months, "every class but the last has `months`, the last has none")
    elif inner != sorted(set(inner)):
        node.fault("bound", inner, "bounds that rise from class to class")


def _scale(node: Node) -> LikelihoodScale:
    words: dict[str, tuple[float, float]] = {}
    for row in node.rows("words"):
        low = row.number("low", low=0.0, high=100.0)
        high = row.number("high", low=low, high=100.0)
        words[row.text("word").lower()] = (low / 100.0, high / 100.0)
    return LikelihoodScale(node.text("source"), words)


def _kind(node: Node) -> InstrumentKind:
    faults = len(node.issues)
    scale: Literal["ratio", "difference"] = (
        "ratio" if node.choice("scale", ("ratio", "difference")) == "ratio" else "difference"
    )
    negative = node.flag("negative")
    if negative and scale == "ratio" and len(node.issues) == faults:
        node.fault("negative", negative, 'false, or scale = "difference"')
    units = node.texts("units", allowed=UNITS)
    return InstrumentKind(scale, negative, node.flag("weekends"), units)


def _settlement(node: Node) -> SettlementRules:
    day_only = node.choice("day_only", ("before-close", "after-close"))
    return SettlementRules(
        tolerance=node.number("tolerance", low=0.0, high=1e-3),
        day_only="before-close" if day_only == "before-close" else "after-close",
        roll_back_days=node.integer("roll_back_days", low=1, high=60),
        default_opens=node.clock("default_opens"),
        default_closes=node.clock("default_closes"),
        query_moves=node.number("query_moves", low=1.0, high=1e6),
        query_sessions=node.integer("query_sessions", low=2, high=10_000),
        query_minimum=node.integer("query_minimum", low=1, high=10_000),
        query_part=node.number("query_part", low=1e-6, high=1e6),
        query_points=node.number("query_points", low=1e-9, high=1e6),
        query_part_short=node.number("query_part_short", low=1e-6, high=1e6),
        query_points_short=node.number("query_points_short", low=1e-9, high=1e6),
    )


def _chance(node: Node) -> ChanceRules:
    span = node.choice("shift_span", ("record", "history"))
    marks = node.choice("shift_marks", ("ratio", "volatility"))
    return ChanceRules(
        enough_windows=node.integer("enough_windows", low=1, high=10_000),
        volatility_sessions=node.integer("volatility_sessions", low=5, high=10_000),
        volatility_minimum=node.integer("volatility_minimum", low=2, high=10_000),
        modelled_floor=node.number("modelled_floor", low=0.0, high=0.25),
        walks=node.integer("walks", low=100, high=1_000_000),
        walks_seed=node.integer("walks_seed", low=0, high=2**63 - 1),
        coin=node.number("coin", low=0.0, high=1.0),
        shift_span="record" if span == "record" else "history",
        shift_marks="ratio" if marks == "ratio" else "volatility",
    )


def _verdict(node: Node) -> VerdictRules:
    return VerdictRules(
        level=node.number("level", low=1e-6, high=0.5),
        interval_level=node.number("interval_level", low=0.5, high=0.9999),
        minimum_matured=node.integer("minimum_matured", low=1, high=1_000_000),
        minimum_disjoint=node.integer("minimum_disjoint", low=1, high=1_000_000),
        edge=node.number("edge", low=0.001, high=0.5),
        power=node.number("power", low=0.51, high=0.9999),
    )
