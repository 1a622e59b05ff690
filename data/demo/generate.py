"""Make the demo files: simulated prices of invented markets, and what was said about them.

Run `python data/demo/generate.py`; the files beside it are written anew, byte for byte the
same each time. Prices come first, then every commentator speaks from a plan of their own.
"""

import csv
from collections.abc import Iterable, Sequence
from dataclasses import dataclass, replace
from datetime import date, timedelta
from itertools import pairwise
from pathlib import Path

import numpy as np
from markets import LAST_DAY, MARKETS, SEED, Rng, Row, Series, simulate_all, table
from phrases import OUTLETS, dodge, pick, quote
from statements import Claim, Scene, Stamp, build_claim, earlier_share, horizon, judged, stamped

HERE = Path(__file__).parent

# What each commentator is made of. Views: `sticky` has no skill, `up` never changes, `crowd`
# follows the common plan, a number is the share of matured calls that come true.
# Odds: none, `fair` from an honest but noisy look ahead, `bold`, or `words`.
# handle | name | role | desk | views | odds | calls | from | to | instruments | families |
# terms; a name of the last two is looked up below.
PEOPLE = """
m.tarrow | Mirel Tarrow | strategist | Equities | .70 | | 118 | 2016 | 2025
    | MARB TESX BRLY | plain | month
e.vostrand | Edda Vostrand | columnist | Equities | up | | 80 | 2016 | 2025
    | MARB | hopeful | long
k.illmark | Kesti Illmark | newsletter writer | Equities | .889 | | 9 | 2022 | 2024
    | TESX ODRL | firm | mixed
s.pellory | Sorin Pellory | strategist | Equities | crowd | | 0 | 2016 | 2025
    | | firm | mixed
d.quorne | Dace Quorne | bank economist | Economics | crowd | | 0 | 2016 | 2025
    | | plain | mixed
l.hasveld | Lunet Hasveld | strategist | Equities | crowd | | 0 | 2016 | 2025
    | | sized | mixed
o.brandrey | Osk Brandrey | fund manager | Equities | crowd | | 0 | 2016 | 2025
    | | firm | mixed
j.tiverin | Jorla Tiverin | broadcaster | Economics | crowd | | 0 | 2016 | 2025
    | | plain | mixed
p.ambrask | Pell Ambrask | economist | Economics | sticky | fair | 92 | 2016 | 2025
    | MARB VQNQRT BRLY TESX | weighed | mixed
r.sundovar | Ressa Sundovar | fund manager | Equities | .57 | bold | 70 | 2016 | 2025
    | MARB ODRL TESX | plain | mixed
t.okkeby | Tamo Okkeby | bank economist | Economics | sticky | words | 64 | 2016 | 2025
    | VQNQRT MARB BRLY | weighed | mixed
v.drellick | Vanna Drellick | columnist | Equities | sticky | | 62 | 2016 | 2025
    | MARB ODRL MVOL | vague | loose
n.ostervane | Nuri Ostervane | columnist | Equities | .30 | | 84 | 2016 | 2025
    | MARB TESX VQNQRT | firm | short
i.callorne | Isko Callorne | strategist | Rates | sticky | | 48 | 2016 | 2025
    | MY10 | rates | mixed
h.wexmere | Hedra Wexmere | bank economist | Rates | sticky | | 44 | 2017 | 2025
    | MY10 VQNQRT | levels | mixed
b.jantrell | Bodo Jantrell | chartist | Equities | sticky | | 56 | 2016 | 2025
    | MARB TESX ODRL | paths | short
c.pharrow | Cosel Pharrow | chartist | Currencies | sticky | | 42 | 2018 | 2025
    | VQNQRT | paths | short
g.lindqvar | Gild Lindqvar | strategist | Currencies | sticky | | 46 | 2016 | 2025
    | VQNQRT | money | mixed
u.strannic | Ulla Strannic | grain broker | Commodities | sticky | | 40 | 2016 | 2024
    | BRLY | levels | dated
f.dovemark | Ferro Dovemark | columnist | Commodities | sticky | | 36 | 2017 | 2025
    | BRLY | all | loose
w.kestle | Wenna Kestle | fund manager | Equities | sticky | | 38 | 2016 | 2025
    | PVRN TESX LNTF | sized | dated
y.ravensol | Yoll Ravensol | broadcaster | Equities | sticky | | 52 | 2016 | 2025
    | MARB ODRL PVRN | all | mixed
z.ombrey | Zita Ombrey | derivatives trader | Equities | sticky | | 44 | 2016 | 2025
    | MVOL MARB | ranges | short
a.thunvel | Arlo Thunvel | strategist | Equities | sticky | | 40 | 2018 | 2025
    | ODRL PVRN LNTF | levels | dated
q.merrisk | Quen Merrisk | newsletter writer | Equities | sticky | | 34 | 2019 | 2025
    | TESX PVRN | all | loose
m.gallaspe | Marn Gallaspe | economist | Rates | sticky | | 30 | 2016 | 2023
    | MY10 MARB | ranges | dated
e.norrigan | Ebbe Norrigan | columnist | Equities | sticky | | 14 | 2022 | 2025
    | MARB | all | dated
"""
FAMILIES = {
    "plain": {"direction": 0.9, "level": 0.1},
    "firm": {"direction": 0.65, "level": 0.35},
    "hopeful": {"direction": 0.7, "above": 0.3},
    "sized": {"direction": 0.3, "sized": 0.5, "move": 0.2},
    "weighed": {"direction": 0.6, "level": 0.25, "sized": 0.15},
    "vague": {"nothing": 0.52, "direction": 0.38, "move": 0.1},
    "rates": {"direction": 0.3, "sense": 0.3, "sized": 0.2, "move": 0.2},
    "money": {"sense": 0.4, "sense sized": 0.25, "level": 0.2, "range": 0.15},
    "levels": {"level": 0.5, "path": 0.2, "stay": 0.2, "range": 0.1},
    "paths": {"path": 0.6, "stay": 0.2, "move": 0.2},
    "ranges": {"range": 0.5, "stay": 0.3, "move": 0.2},
    "all": {"direction": 0.3, "level": 0.2, "move": 0.2, "path": 0.15, "range": 0.15},
}
TERMS = {
    "month": {"1 month": 0.85, "2 weeks": 0.05, "10 sessions": 0.1},
    "short": {
        "1 month": 0.4, "2 weeks": 0.2, "10 sessions": 0.2, "end of week": 0.1, "3 months": 0.1,
    },
    "long": {"6 months": 0.55, "12 months": 0.45},
    "mixed": {
        "1 month": 0.25, "3 months": 0.35, "6 months": 0.2, "month end": 0.12, "year end": 0.08,
    },
    "dated": {"date": 0.35, "month end": 0.3, "year end": 0.15, "end of quarter": 0.2},
    "loose": {
        "soon": 0.2, "near term": 0.2, "medium term": 0.1, "long term": 0.08, "": 0.12,
        "3 months": 0.3,
    },
}  # fmt: skip
CHANCE_WORDS = {
    0.03: "almost no chance", 0.13: "very unlikely", 0.33: "unlikely",
    0.5: "roughly even chance", 0.67: "likely", 0.87: "very likely", 0.97: "almost certain",
}  # fmt: skip


# ---------------------------------------------------------------------------------- the plans
def weighted(rng: Rng, weights: dict[str, float]) -> str:
    """Draw a key by its weight."""
    share = np.array(list(weights.values()))
    return list(weights)[int(rng.choice(len(share), p=share / share.sum()))]


def speaking_days(rng: Rng, count: int, first: int, last: int) -> list[date]:
    """Spread days over the years, none of them in the last days of all."""
    start, end = date(first, 1, 8), min(date(last, 12, 19), LAST_DAY)
    gap = (end - start).days / count
    places = gap * (np.arange(count) + rng.random(count))
    return [mostly_weekday(rng, start + timedelta(int(place))) for place in places]


def mostly_weekday(rng: Rng, day: date) -> date:
    """Move most weekend days back to the Friday."""
    back = max(0, day.weekday() - 4)
    return day - timedelta(back) if rng.random() < 0.85 else day


@dataclass
class Draft:
    """A call on its way to the file."""

    person: Row
    stamp: Stamp
    symbol: str
    claim: Claim
    horizon: str
    due: date
    odds: float | str | None
    revises: "Draft | None" = None
    copy_of: "Draft | None" = None


@dataclass(frozen=True)
class Step:
    """One thing a commentator is going to speak about."""

    day: date
    symbol: str
    up: bool
    term: str


def sticky_steps(
    rng: Rng, days: Sequence[date], symbols: Sequence[str], terms: str
) -> list[Step]:
    """Hold views for a while without knowing anything."""
    views = {symbol: bool(rng.random() < 0.6) for symbol in symbols}
    steps = []
    for day in days:
        symbol = pick(rng, tuple(symbols))
        views[symbol] ^= bool(rng.random() < 0.2)
        steps.append(Step(day, symbol, views[symbol], weighted(rng, TERMS[terms])))
    return steps


def crowd_steps(rng: Rng) -> list[Step]:
    """Take a part of the plan that the crowd shares, a few days late."""
    plan_rng = np.random.default_rng([SEED, 2])
    days = speaking_days(plan_rng, 60, 2016, 2025)
    plan = sticky_steps(plan_rng, days, ("MARB", "MARB", "TESX", "VQNQRT"), "mixed")
    kept = [step for step in plan if rng.random() < 0.83]
    late = [mostly_weekday(rng, step.day + timedelta(int(rng.integers(4)))) for step in kept]
    return [Step(day, s.symbol, s.up, s.term) for day, s in zip(late, kept, strict=True)]


def steps_of(person: Row, rng: Rng) -> list[Step]:
    """Everything a commentator is going to speak about."""
    if person["views"] == "crowd":
        return crowd_steps(rng)
    days = speaking_days(rng, int(person["calls"]), int(person["from"]), int(person["to"]))
    return sticky_steps(rng, days, str(person["instruments"]).split(), str(person["terms"]))


def honest_odds(rng: Rng, share: float, truth: bool | None, sight: float) -> float:
    """Weigh a noisy look ahead by Bayes' rule: a normal signal on a known base rate."""
    side = bool(rng.random() < share) if truth is None else truth
    signal = rng.normal(sight if side else -sight)
    return float(1 / (1 + (1 - share) / share * np.exp(-2 * sight * signal)))


def stated_odds(
    rng: Rng, style: str, claim: Claim, scene: Scene, truth: bool | None
) -> float | str | None:
    """Choose the probability that a commentator would state, if any."""
    if style == "bold":
        return int(rng.integers(85, 98)) / 100
    if not style:
        return None
    odds = honest_odds(
        rng, earlier_share(claim, scene), truth, 0.65 if style == "fair" else 0.35
    )
    if style == "words":
        return CHANCE_WORDS[min(CHANCE_WORDS, key=lambda middle: abs(middle - odds))]
    return float(np.clip(round(20 * odds) / 20, 0.05, 0.95))


def draft(rng: Rng, person: Row, step: Step, series: Series, wanted: bool | None) -> Draft:
    """Turn a step into a dated claim; `wanted` asks for one that comes true, or fails."""
    stamp = stamped(rng, step.day, home_zone(person))
    family = weighted(rng, FAMILIES[str(person["families"])])
    text, due = horizon(rng, step.term, stamp.venue_day(series))
    scene = Scene(series, stamp.day, (due - stamp.day).days)
    claim = build_claim(scene, rng, family, step.up)
    truth = judged(claim, stamp, series, text, due)
    for _ in range(60):
        if wanted is None or truth in (None, wanted):
            break
        claim = build_claim(scene, rng, family, bool(rng.random() < 0.5))
        truth = judged(claim, stamp, series, text, due)
    odds = stated_odds(rng, str(person["odds"]), claim, scene, truth)
    return Draft(person, stamp, series.symbol, claim, text if claim.head else "", due, odds)


def home_zone(person: Row) -> str:
    """Where a commentator sits: where the first of their instruments is traded."""
    first = str(person["instruments"]).split(" ")[0]
    market = {"TESX": "tessaline", "PVRN": "tessaline", "BRLY": "ellaby"}.get(first, "maravel")
    return MARKETS[market][0]


def speak(person: Row, rng: Rng, market: dict[str, Series]) -> list[Draft]:
    """Everything that a commentator said."""
    steps, views = steps_of(person, rng), str(person["views"])
    wanted: list[bool | None] = [None] * len(steps)
    if views.startswith("."):
        hits = round(float(views) * len(steps))
        wanted = list(rng.permutation(len(steps)) < hits)
    if views == "up":
        steps = [replace(step, up=True) for step in steps]
    return [
        draft(rng, person, step, market[step.symbol], goal)
        for step, goal in zip(steps, wanted, strict=True)
    ]


# ------------------------------------------------------------------------------ the whole desk
def revised(rng: Rng, drafts: list[Draft]) -> None:
    """Mark some calls as revising the one before on the same instrument, while that runs."""
    found = []
    for symbol in sorted({d.symbol for d in drafts}):
        own = [d for d in drafts if d.symbol == symbol and d.claim.head and d.horizon]
        for old, new in pairwise(own):
            gap = (new.stamp.day - old.stamp.day).days
            if 3 < gap < 60 and old.due > new.stamp.day + timedelta(10) and old.revises is None:
                found.append((old, new))
    for k in rng.permutation(len(found))[:2]:
        old, new = found[k]
        new.revises = old


def copied(rng: Rng, drafts: list[Draft]) -> list[Draft]:
    """Find the same words of some calls again in another outlet."""
    calls = [d for d in drafts if d.claim.head and d.revises is None]
    copies = []
    for k in sorted(rng.permutation(len(calls))[: int(rng.integers(3))]):
        day = calls[k].stamp.day + timedelta(int(rng.integers(2)))
        stamp = Stamp(day, day.isoformat(), None)
        copies.append(replace(calls[k], stamp=stamp, copy_of=calls[k]))
    return copies


def worded(rng: Rng, item: Draft, series: Series) -> str:
    """Word a statement."""
    name, thing = series.facts["spoken"], series.facts["thing"]
    words = {"name": name, "thing": thing, "claim": item.claim.text.replace("%", " per cent")}
    words |= {"Name": name[0].upper() + name[1:], "Thing": thing[0].upper() + thing[1:]}
    if not item.claim.head:
        return dodge(rng, item.claim.text.removeprefix("not a call: "), words)
    odds = item.odds if isinstance(item.odds, str) else ""
    if isinstance(item.odds, float):
        odds = f"{100 * item.odds:.0f} per cent"
    return quote(rng, item.claim.head, words | item.claim.words, item.horizon, odds)


def sourced(rng: Rng, item: Draft, avoid: str) -> Row:
    """Where a statement was found, and when it was coded by whom."""
    outlet = pick(rng, tuple(name for name in OUTLETS if name != avoid))
    host, collection = OUTLETS[outlet]
    surname = str(item.person["handle"]).split(".")[1]
    path = f"{item.stamp.day:%Y/%m/%d}/{surname}-{int(rng.integers(1000, 10000))}"
    wait = 1 if item.horizon == "end of week" else int(rng.integers(1, 4))
    return {
        "outlet": outlet,
        "link": f"https://{host}/{path}",
        "collection": collection,
        "coder": pick(rng, ("coder-linde", "coder-osmer")),
        "coded_at": item.stamp.day + timedelta(wait),
    }


def rows_of(rng: Rng, drafts: list[Draft], market: dict[str, Series]) -> list[Row]:
    """Build the rows of the calls file, oldest first."""
    rows: dict[int, Row] = {}
    for k, item in enumerate(sorted(drafts, key=lambda d: d.stamp.day)):
        first = rows.get(id(item.copy_of), {})
        before = rows.get(id(item.revises), {}) if not first else {}
        hidden = not item.claim.head and rng.random() < 0.5
        rows[id(item)] = {
            "ref": f"C{k + 1:04d}",
            "forecaster": item.person["handle"],
            "said_at": item.stamp.text,
            "instrument": "" if hidden else item.symbol,
            "claim": item.claim.text,
            "horizon": item.horizon,
            "probability": item.odds or "",
            "quote": first.get("quote") or worded(rng, item, market[item.symbol]),
            **sourced(rng, item, str(first.get("outlet", ""))),
            "revises": before.get("ref", ""),
            "copy_of": first.get("ref", ""),
            "note": "the same words in a second outlet" if first else "",
        }
    return list(rows.values())


def all_drafts(market: dict[str, Series]) -> list[Draft]:
    """Gather what everybody said, the copies last."""
    drafts, copies = [], []
    for k, person in enumerate(people()):
        rng = np.random.default_rng([SEED, 3, k])
        said = speak(person, rng, market)
        if person["views"] == "sticky" and not person["odds"]:
            revised(rng, said)
            copies += copied(rng, said)
        drafts += said
    return drafts + copies


# ------------------------------------------------------------------------------------ the files
def people() -> list[dict[str, str]]:
    """Read the table of commentators."""
    return table(
        PEOPLE, "handle name role desk views odds calls from to instruments families terms"
    )


def instrument_rows(market: dict[str, Series]) -> list[Row]:
    """Build the rows of the instruments file."""
    rows = []
    for series in market.values():
        facts = series.facts
        kept = ("name", "currency", "sense", "kind", "benchmark", "base", "term")
        venue = dict(zip(("zone", "opens", "closes"), MARKETS[facts["market"]], strict=False))
        rows.append({"instrument": series.symbol} | {key: facts[key] for key in kept} | venue)
    return rows


def price_rows(series: Series) -> Iterable[Row]:
    """Yield the price rows of one instrument; some are known by their close alone."""
    decimals, kind = int(series.facts["decimals"]), series.facts["kind"]
    for session, bar, volume in zip(series.sessions, series.bars, series.volume, strict=True):
        texts = [f"{price:.{decimals}f}" for price in bar]
        row = dict(zip(("open", "high", "low", "close"), texts, strict=True))
        if kind in ("volatility", "fund"):
            row = {"close": row["close"]}
        busy = {"volume": volume} if series.facts["volume"] else {}
        yield {"instrument": series.symbol, "session": session} | row | busy


def write(name: str, columns: str, rows: Iterable[Row]) -> None:
    """Write one file, with columns that a row lacks left empty."""
    with (HERE / name).open("w", newline="", encoding="utf-8") as file:
        writer = csv.DictWriter(file, columns.split(), restval="", lineterminator="\n")
        writer.writeheader()
        writer.writerows(rows)


def main() -> None:
    """Simulate, let everybody speak, write the files."""
    market, actions = simulate_all()
    calls = rows_of(np.random.default_rng([SEED, 4]), all_drafts(market), market)
    write(
        "instruments.csv",
        "instrument name currency zone opens closes sense kind market benchmark base term",
        instrument_rows(market),
    )
    write(
        "forecasters.csv",
        "forecaster name role desk",
        (
            {"forecaster": p["handle"]} | {k: p[k] for k in ("name", "role", "desk")}
            for p in people()
        ),
    )
    write("actions.csv", "instrument effective action ratio amount currency into", actions)
    write(
        "prices.csv",
        "instrument session open high low close volume",
        (row for series in market.values() for row in price_rows(series)),
    )
    write(
        "calls.csv",
        "ref forecaster said_at instrument claim horizon probability quote outlet link "
        "collection coder coded_at revises copy_of note",
        calls,
    )


if __name__ == "__main__":
    main()
