"""Write the tables of docs/honesty.md anew: ``python tests/simulation/make_table.py``.

The same seeds give the same tables. ``--cores 2`` uses two cores, ``--part 0.1`` a tenth of the
worlds, and ``--print`` shows the tables and leaves the page as it is.
"""

from __future__ import annotations

import argparse
import re
import sys
import time
from concurrent.futures import ProcessPoolExecutor, as_completed
from dataclasses import dataclass
from pathlib import Path

import numpy as np

ROOT = Path(__file__).parents[2]
sys.path.insert(0, str(ROOT / "tests"))

from support.no_skill import Forecasters, Market  # noqa: E402
from support.no_skill_scores import LEVEL, TESTS, p_values  # noqa: E402

PAGE = ROOT / "docs" / "honesty.md"
PLACE = re.compile(r"(<!-- table: (\w+) -->\n).*?(<!-- end -->)", re.DOTALL)
SIZES = (1, 6, 20)
RISING = Market()


@dataclass(frozen=True)
class Job:
    """Worlds of one set-up."""

    label: str
    market: Market
    style: Forecasters
    worlds: int
    fields: tuple[int, ...] = ()
    shift_marks: str = "ratio"


MAIN = [
    Job("one month", RISING, Forecasters(spans=(30,)), 1000, SIZES),
    Job("half a year", RISING, Forecasters(spans=(182,)), 1000, SIZES),
    Job("one year", RISING, Forecasters(spans=(365,)), 1000, SIZES),
    Job("half a year, four of five views up", RISING, Forecasters(share_up=0.8), 500, SIZES),
    Job("half a year, ten kinds of claims", RISING, Forecasters(claims="mixed"), 500, SIZES),
    Job(
        "month, half year and year, prices end with the record",
        Market(runs_on=False),
        Forecasters(spans=(30, 182, 365)),
        500,
        SIZES,
    ),
    Job("half a year, rising and falling regimes", Market(has_regimes=True), Forecasters(), 500,
        SIZES),
    Job("half a year, two years of prices before", Market(years_before=2), Forecasters(), 500,
        SIZES),
    Job("half a year, record of three years", Market(years=3), Forecasters(), 500, SIZES),
]  # fmt: skip

SIX = {"size": 6, "herding": 0.5}
VOLATILE = Forecasters(**SIX, spans=(30,), claims="volatility")
HARD = [
    Job("follows the last half year's move, half a year", RISING, Forecasters(**SIX, follows=1),
        1000, (6,)),
    Job("goes against the last half year's move, half a year", RISING,
        Forecasters(**SIX, follows=-1), 1000, (6,)),
    Job("weekly calls, nine of ten up, regimes", Market(has_regimes=True),
        Forecasters(**SIX, spans=(7,), calls_a_year=50, share_up=0.9), 1000, (6,)),
    Job("large moves after volatile months, one month", RISING, VOLATILE, 500, (6,)),
    Job('the same with `shift_marks = "volatility"`', RISING, VOLATILE, 500, (6,),
        "volatility"),
]  # fmt: skip


def power_jobs():
    jobs = []
    for days, window in ((30, "one month"), (365, "one year")):
        for sees in (0.1, 0.2, 0.3, 0.5):
            for years in (3, 5, 10):
                style = Forecasters(size=1, spans=(days,), sees=sees)
                label = f"{window} | {100 * sees:.0f} % | {years}"
                jobs.append(Job(label, Market(years=years), style, 500))
    return jobs


def crowd_jobs():
    jobs = []
    for days, window in ((30, "one month"), (365, "one year")):
        for years in (3, 5, 10):
            style = Forecasters(spans=(days,), sees=0.3, knowing=1)
            jobs.append(Job(f"{window} | 30 % | {years}", Market(years=years), style, 200))
    return jobs


FOLLOWERS = [
    Job(f"{who} | {window}", RISING, Forecasters(size=1, spans=(days,), sees=0.3, follows=way),
        500)
    for way, who in ((1, "follows it"), (-1, "goes against it"))
    for days, window in ((30, "one month"), (182, "half a year"))
]  # fmt: skip

AGAINST = [
    Job("goes against the last half year's move, one year", RISING,
        Forecasters(**SIX, spans=(365,), follows=-1), 1000, (6,)),
    Job("goes against the last half year's move, half a year, record of three years",
        Market(years=3), Forecasters(**SIX, follows=-1), 1000, (6,)),
]  # fmt: skip


@dataclass(frozen=True)
class Rates:
    """Shares in percent with their standard errors; arrays over the tests.

    ``each`` is over all forecasters of the largest field, ``first`` over the first forecaster;
    ``best`` has for each size of field the share of worlds with any of them.
    """

    each: np.ndarray
    each_error: np.ndarray
    first: np.ndarray
    best: dict[int, np.ndarray]
    holm: dict[int, float]
    worlds: int


def run(number, job, part):
    """Return the rates of one set-up; worlds are independent, forecasters in them are not."""
    worlds = max(20, int(job.worlds * part))
    fields = job.fields or (job.style.size,)
    found = list(
        p_values(
            1000 + number,
            job.market,
            job.style,
            worlds,
            fields=fields,
            shift_marks=job.shift_marks,
        )
    )
    last = np.array([one[-1] for one in found])
    by_world = (last <= LEVEL).mean(axis=2)
    best, holm = {}, {}
    for at, size in enumerate(fields):
        values = np.array([one[at] for one in found])
        best[size] = 100 * (values <= LEVEL).any(axis=2).mean(axis=0)
        base = values[:, TESTS.index("base")].min(axis=1)
        holm[size] = 100 * float((base <= LEVEL / size).mean())
    return Rates(
        100 * by_world.mean(axis=0),
        100 * by_world.std(axis=0, ddof=1) / np.sqrt(worlds),
        100 * (last[:, :, 0] <= LEVEL).mean(axis=0),
        best,
        holm,
        worlds,
    )


def table(head, rows):
    marks = ["---"] + ["---:"] * (len(head) - 1)
    lines = [head, marks, *rows]
    return "".join("| " + " | ".join(line) + " |\n" for line in lines)


def with_error(share, worlds):
    error = np.sqrt(share * (100 - share) / worlds)
    return f"{share:.1f} ± {error:.1f}"


def each_table(jobs, rates, tests):
    rows = [
        [
            job.label,
            *(
                f"{found.each[TESTS.index(t)]:.1f} ± {found.each_error[TESTS.index(t)]:.1f}"
                for t in tests.values()
            ),
        ]
        for job, found in zip(jobs, rates, strict=True)
    ]
    return table(["set-up", *tests], rows)


def best_table(jobs, rates, tests, sizes):
    rows = []
    for job, found in zip(jobs, rates, strict=True):
        for size in sizes:
            cells = [
                with_error(
                    found.holm[size] if t == "holm" else found.best[size][TESTS.index(t)],
                    found.worlds,
                )
                for t in tests.values()
            ]
            rows.append([job.label, str(size), *cells])
    return table(["set-up", "field", *tests], rows)


def power_table(head, jobs, rates, tests):
    rows = [
        [
            *job.label.split(" | "),
            *(with_error(found.first[TESTS.index(t)], found.worlds) for t in tests.values()),
        ]
        for job, found in zip(jobs, rates, strict=True)
    ]
    return table([*head, *tests], rows)


UP = {"coin": "coin", "base rate": "base", "Pesaran-Timmermann": "pt", "timing": "timing",
      "ahead, alone or in the field": "alone", "at any time": "watched"}  # fmt: skip
LOW = {"timing": "timing_low", "behind, alone or in the field": "alone_low",
       "at any time": "watched_low"}  # fmt: skip
BEST = {"coin": "coin", "base rate": "base", "base rate, Holm": "holm",
        "Pesaran-Timmermann": "pt", "timing": "timing", "field": "field",
        "verdict ahead of chance": "verdict"}  # fmt: skip
BEST_LOW = {
    "timing": "timing_low",
    "field": "field_low",
    "verdict behind chance": "verdict_low",
}
HARD_EACH = {"base rate": "base", "timing": "timing", "timing, lower tail": "timing_low",
             "at any time": "watched"}  # fmt: skip
HARD_BEST = {"field": "field", "field, lower tail": "field_low",
             "verdict ahead of chance": "verdict"}  # fmt: skip
POWER = {"timing": "timing", "verdict ahead of chance": "verdict", "at any time": "watched"}
CROWD = {"timing": "timing", "field": "field", "verdict ahead of chance": "verdict"}


def tables(rates):
    """Return the text of every table by its name."""
    main, hard = rates[: len(MAIN)], rates[len(MAIN) : len(MAIN) + len(HARD)]
    rest = rates[len(MAIN) + len(HARD) :]
    power, crowd = power_jobs(), crowd_jobs()
    alone, rest = rest[: len(power)], rest[len(power) :]
    crowded, rest = rest[: len(crowd)], rest[len(crowd) :]
    followers, against = rest[: len(FOLLOWERS)], rest[len(FOLLOWERS) :]
    hard_jobs, hard = [*HARD, *AGAINST], [*hard, *against]
    head = ["window", "sees", "years"]
    return {
        "each": each_table(MAIN, main, UP),
        "best": best_table(MAIN, main, BEST, SIZES),
        "each_low": each_table(MAIN, main, LOW),
        "best_low": best_table(MAIN, main, BEST_LOW, (20,)),
        "hard": each_table(hard_jobs, hard, HARD_EACH),
        "hard_best": best_table(hard_jobs, hard, HARD_BEST, (6,)),
        "power": power_table(head, power, alone, POWER),
        "crowd": power_table(head, crowd, crowded, CROWD),
        "followers": power_table(["the last move", "window"], FOLLOWERS, followers, POWER),
    }


def all_rates(jobs, part, cores):
    """Return the rates of every job in order, with a line of progress."""
    begin, found = time.monotonic(), {}
    with ProcessPoolExecutor(cores) as pool:
        waiting = {pool.submit(run, at, job, part): at for at, job in enumerate(jobs)}
        for done, future in enumerate(as_completed(waiting), 1):
            found[waiting[future]] = future.result()
            minutes = (time.monotonic() - begin) / 60
            label = jobs[waiting[future]].label
            sys.stderr.write(f"{done} of {len(jobs)} set-ups, {minutes:.1f} min: {label}\n")
            sys.stderr.flush()
    return [found[at] for at in range(len(jobs))]


def main():
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--cores", type=int, default=1)
    parser.add_argument("--part", type=float, default=1.0)
    parser.add_argument("--print", action="store_true", dest="shows")
    wanted = parser.parse_args()
    jobs = [*MAIN, *HARD, *power_jobs(), *crowd_jobs(), *FOLLOWERS, *AGAINST]
    made = tables(all_rates(jobs, wanted.part, wanted.cores))
    if wanted.shows:
        sys.stdout.write("\n".join(f"{name}\n\n{text}" for name, text in made.items()))
        return
    page = PAGE.read_text("utf-8")
    missing = set(made) - {name for _, name, _ in PLACE.findall(page)}
    if missing:
        raise SystemExit(f"{PAGE} has no place for {sorted(missing)}")
    page = PLACE.sub(lambda m: m[1] + made[m[2]] + m[3], page)
    PAGE.write_text(page, "utf-8")


if __name__ == "__main__":
    main()
