"""Words for the invented commentators: how a coded claim may have sounded in print."""

from datetime import date

import numpy as np

NUMBERS = {1: "a", 2: "two", 3: "three", 6: "six", 10: "ten", 12: "twelve"}

# One list per claim head. `{when}` brings its own leading space and may be empty.
TEMPLATES: dict[str, tuple[str, ...]] = {
    "ends higher": (
        "{Name} will stand higher{when}.",
        "I see {name} up{when}, plain and simple.",
        "{Name} will have beaten today's mark{when}.",
        "The path for {name} is upward, and it will show{when}.",
    ),
    "ends lower": (
        "{Name} will stand lower{when}.",
        "I see {name} down{when}, and I do not say that lightly.",
        "{Name} gives ground from here and is lower{when}.",
        "Whoever holds {name} will be nursing a loss{when}.",
    ),
    "ends higher by": (
        "{Name} will be up by at least {size}{when}.",
        "I have {name} gaining {size} or more{when}.",
        "I count {size} of upside in {name}, and it will be there to see{when}.",
    ),
    "ends lower by": (
        "{Name} will be down by at least {size}{when}.",
        "I have {name} losing {size} or more{when}.",
        "Take {size} off {name}: that is where we will be{when}, if not lower.",
    ),
    "strengthens": (
        "{Thing} will be stronger{when}.",
        "I expect {thing} to have firmed{when}.",
        "{Thing} looks undervalued to me, and it will have gained{when}.",
    ),
    "weakens": (
        "{Thing} will be weaker{when}.",
        "I expect {thing} to have slipped{when}.",
        "{Thing} cannot hold this ground, and it will have lost some{when}.",
    ),
    "strengthens by": (
        "{Thing} will have strengthened by {size} or more{when}.",
        "I look for {thing} to put on at least {size}{when}.",
        "Give {thing} room: it is worth {size} more{when}.",
    ),
    "weakens by": (
        "{Thing} will have weakened by {size} or more{when}.",
        "I look for {thing} to shed at least {size}{when}.",
        "Mark {thing} down: it is worth {size} less{when}.",
    ),
    "ends within": (
        "{Name} goes nowhere: within {size} of today's mark{when}.",
        "All this noise, and {name} will be no more than {size} away from here{when}.",
        "Flat is the word for {name}, give or take {size}{when}.",
    ),
    "ends above": (
        "{Name} finishes above {level}{when}.",
        "Put me down for {name} north of {level}{when}.",
        "My number for {name} is {level}, and we will be over it{when}.",
    ),
    "ends below": (
        "{Name} finishes below {level}{when}.",
        "Put me down for {name} south of {level}{when}.",
        "My number for {name} is {level}, and we will be under it{when}.",
    ),
    "ends at least": (
        "{Name} at {level} or better{when}, that is our house view.",
        "We have {name} at no less than {level}{when}.",
        "{level} is the least I expect from {name}{when}.",
    ),
    "ends at most": (
        "{Name} at {level} or worse{when}, that is our house view.",
        "We have {name} at no more than {level}{when}.",
        "{level} is the most I would grant {name}{when}.",
    ),
    "ends between": (
        "{Name} lands somewhere between {low} and {high}{when}.",
        "Our range for {name}{when} is {low} to {high}.",
        "{low} on the low side, {high} on the high side: {name} will be in there{when}.",
    ),
    "closes above": (
        "{Name} will close above {level} at least once{when}.",
        "We get a close over {level} in {name}{when}.",
        "There is a finish above {level} coming for {name}{when}.",
    ),
    "closes below": (
        "{Name} will close below {level} at least once{when}.",
        "We get a close under {level} in {name}{when}.",
        "There is a finish below {level} coming for {name}{when}.",
    ),
    "touches": (
        "{Name} will touch {level}{when}.",
        "{level} is a magnet for {name}; it gets there{when}.",
        "We will print {level} on {name}{when}, if only for a moment.",
    ),
    "trades above": (
        "{Name} trades above {level}{when}, even if it does not stay.",
        "Somebody will pay more than {level} for {name}{when}.",
        "We will see {name} through {level}{when}.",
    ),
    "trades below": (
        "{Name} trades below {level}{when}, even if it does not stay.",
        "Somebody will let {name} go for less than {level}{when}.",
        "We will see {name} break {level}{when}.",
    ),
    "stays above": (
        "{level} is the floor: {name} stays above it{when}.",
        "{Name} will not dip under {level}{when}.",
        "Buyers defend {level}, and {name} keeps above it{when}.",
    ),
    "stays below": (
        "{level} is the lid: {name} stays below it{when}.",
        "{Name} will not poke through {level}{when}.",
        "Sellers sit at {level}, and {name} keeps below it{when}.",
    ),
    "stays between": (
        "{Name} keeps between {low} and {high}{when}.",
        "Expect a corridor in {name}, {low} to {high}, never outside{when}.",
        "{Name} is boxed in: {low} below, {high} above, and so it remains{when}.",
    ),
    "rises": (
        "{Name} climbs {size} from here{when}.",
        "A rally of {size} in {name} is due{when}.",
        "{Name} has a {size} run in it, and we will have it{when}.",
    ),
    "falls": (
        "{Name} drops {size} from here{when}.",
        "A slide of {size} in {name} is due{when}.",
        "{Name} has a {size} fall in it, and we will have it{when}.",
    ),
}

WEIGHED = (
    "{Name} {claim}{when}: {odds}.",
    "Asked whether {name} {claim}{when}, I answer: {odds}.",
    "Take the statement that {name} {claim}{when}. My judgement: {odds}.",
    "How sure am I that {name} {claim}{when}? I would say {odds}.",
)

OPENERS = (
    "My view has not moved.", "Readers keep asking, so here it is.", "Never mind the news.",
    "The order books tell their own story.", "I have gone through the figures twice.",
    "Call it stubbornness.", "The mood has turned.", "Few will like to hear this.",
)  # fmt: skip
CLOSERS = (
    "You may hold me to that.", "I am not hedging that one.", "The rest is chatter.",
    "That is what our work says.", "Clients have heard the same from me.",
    "Write it down.", "Patience will be asked for.", "I have seen this film before.",
)  # fmt: skip

DODGES: dict[str, tuple[str, ...]] = {
    "no date": (
        "One day {name} will be a good deal higher, and then they will all have known it.",
        "Sooner or later {name} has to come down; when is anybody's guess.",
        "The reckoning for {name} will come in its own time.",
    ),
    "no direction": (
        "{Name} faces an important few weeks, and much is in play.",
        "There will be movement in {name}, you can feel it in the room.",
        "Anything can happen with {name} now, in either direction.",
    ),
    "not about a price": (
        "The finance minister will not last the summer, I am told.",
        "Expect more ships and fewer orders along the coast.",
        "Confidence on the trading floor is on the mend.",
    ),
    "conditional": (
        "If the harvest fails, {name} will be another story altogether.",
        "Should the bank blink, {name} will take off.",
        "Provided the wage talks hold, I would not worry about {name}.",
    ),
    "retrospective": (
        "As I said last year, {name} was always going to do this.",
        "{Name} did precisely what the pattern told us.",
        "Our readers were out of {name} well before the trouble.",
    ),
    "opinion": (
        "{Name} feels dear to me.",
        "I would sleep badly with {name} in the drawer.",
        "There is something unhealthy about {name} these days.",
    ),
    "other": (
        "Ask me about {name} after the holidays.",
        "{Name}? My barber owns some.",
        "On {name} I prefer to keep my powder dry in public.",
    ),
}

# outlet -> (host, collection it was gathered for)
OUTLETS = {
    "Vessel Street Bulletin": ("vesselstreet.example", "market-columns"),
    "Counterpane Weekly": ("counterpane.example", "market-columns"),
    "The Ellaby Tide": ("ellabytide.example", "market-columns"),
    "Radio Quarrel": ("radioquarrel.example", "broadcast-log"),
    "The Nine Board": ("nineboard.example", "broadcast-log"),
    "Tessaline Desk Notes": ("tessalinedesk.example", "client-letters"),
    "Saltmarket Letter": ("saltmarket.example", "client-letters"),
}

_LEADS = {"at": "", "by": "by ", "through": "until "}
_FIXED = {
    "end of week": ("at the end of the week", "by the weekend", "for the rest of the week"),
    "end of quarter": (
        "when the quarter closes",
        "before the quarter is out",
        "for the rest of the quarter",
    ),
    "soon": ("soon", "soon", "for now"),
    "near term": ("in the near term", "in the near term", "in the near term"),
    "medium term": ("in the medium term",) * 3,
    "long term": ("in the long term",) * 3,
}


def pick(rng: np.random.Generator, options: tuple[str, ...]) -> str:
    """One of the options, each as likely as the next."""
    return options[int(rng.integers(len(options)))]


def _mode(head: str) -> str:
    """Whether a claim speaks of an end point, of any time before it, or of the whole way."""
    if head.startswith("stays"):
        return "through"
    return "at" if head.startswith(("ends", "strengthens", "weakens")) else "by"


def _when(horizon: str, mode: str) -> str:
    """Put a coded horizon into words, with a leading space; empty for a blank one."""
    if not horizon:
        return ""
    if horizon in _FIXED:
        return " " + _FIXED[horizon][("at", "by", "through").index(mode)]
    if horizon.startswith("end of"):
        return f" {_LEADS[mode] or 'at '}the {horizon}"
    if horizon[:4].isdigit():
        day = date.fromisoformat(horizon)
        return f" {_LEADS[mode] or 'on '}{day.day} {day:%B %Y}"
    count, unit = horizon.split()
    span = f"{NUMBERS[int(count)]} {unit}"
    forms = {"at": f"{span} from now", "by": f"within {span}", "through": f"for {span}"}
    return f" {forms[mode]}"


def quote(
    rng: np.random.Generator, head: str, words: dict[str, str], horizon: str, odds: str
) -> str:
    """Word a claim; `odds` is a spoken probability or empty."""
    options = WEIGHED if odds else TEMPLATES[head]
    text = pick(rng, options).format(**words, when=_when(horizon, _mode(head)), odds=odds)
    text = text[0].upper() + text[1:]
    frame = rng.random()
    if frame < 0.3:
        return f"{pick(rng, OPENERS)} {text}"
    return f"{text} {pick(rng, CLOSERS)}" if frame > 0.75 else text


def dodge(rng: np.random.Generator, reason: str, words: dict[str, str]) -> str:
    """Word a statement that is not a call."""
    return pick(rng, DODGES[reason]).format(**words)
