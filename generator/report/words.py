"""The report's fixed words and its sentences: one word for each thing, everywhere."""

from __future__ import annotations

import datetime
from collections.abc import Iterable, Mapping
from fractions import Fraction

from generator import numbers
from generator.findings.records import Findings, Range

VERDICTS = ("makeable", "edge", "short", "barred", "unreachable", "none")

VERDICT_WORDS = {
    "makeable": "makeable",
    "edge": "edge",
    "short": "short",
    "barred": "barred",
    "unreachable": "unreachable",
    "none": "no answer",
}

VERDICT_MEANINGS = {
    "makeable": "A blend within all limits exists, in the amount asked for.",
    "edge": "A blend exists, but only on the edge of what the lots can make: some lots can't be used at all.",
    "short": "A blend exists, but the stock is too small for the amount asked for.",
    "barred": "A blend exists, but none that keeps the house rules.",
    "unreachable": "No blend of these lots is within all limits, whatever the stock.",
    "none": "A problem with the order's own data leaves it without an answer.",
}

RECIPE_WORDS = {
    "cheapest": "Cheapest recipe",
    "assured": "Assured recipe",
    "roomiest": "Roomiest recipe",
    "closest": "Closest recipe",
    "fewest": "Recipe with the fewest lots",
}

RECIPE_MEANINGS = {
    "cheapest": "The least cost within all limits.",
    "assured": "The least cost at which every limit holds with the confidence that the campaign asks for.",
    "roomiest": "The greatest room: how far all limits could tighten together.",
    "closest": "The nearest to the aims, or to the middles of the windows.",
    "fewest": "As few lots as will do.",
}

CAUTIONS = (
    "A calculated blend is a mass balance. It says nothing of reactions, compatibility, segregation, dust, "
    "self-heating, transportable moisture or toxicity.",
    "Safety data sheets, site procedures, tests of the finished blend, local codes and licensed practice decide.",
)

CAUTION_APART_EMPTY = "No list of materials to keep apart is given: nothing of that kind was checked."
CAUTION_APART = "The list of materials to keep apart is the site's own; nothing beyond it was checked."

ASSAY_ERROR = "Assay error only: sampling and segregation are not in it unless the standard deviations include them."
PROOF_WITHHELD = "The proof rests on data that this edition leaves out; those who sent it have it."
SHADOW = "A point inside a two-dimensional shadow can still be outside the hull."


def edition_in_words(edition: str) -> str:
    """What the pages say of whom they are for; nothing on those for everybody inside."""
    return "" if edition == "internal" else f"Edition {edition}: some data are left out of these pages"


def plural(count: int, one: str, many: str = "") -> str:
    """Words such as "1 lot", "2 lots"."""
    return f"{count} {one if count == 1 else many or one + 's'}"


def listed(words: Iterable[str], joint: str = "and") -> str:
    """Words such as "a", "a and b", "a, b and c"."""
    every = list(words)
    return every[0] if len(every) == 1 else f"{', '.join(every[:-1])} {joint} {every[-1]}" if every else ""


def counts_in_words(counts: Mapping[str, int]) -> str:
    """Words such as "9 makeable, 2 edge and 1 unreachable"."""
    return listed(f"{counts[verdict]} {VERDICT_WORDS[verdict]}" for verdict in VERDICTS if counts.get(verdict))


def told_counts(counts: Mapping[str, int]) -> tuple[tuple[str, str, int], ...]:
    """Each verdict that occurs, with its word and how often, in the order in which verdicts stand everywhere."""
    return tuple((verdict, VERDICT_WORDS[verdict], counts[verdict]) for verdict in VERDICTS if counts.get(verdict))


def made(counts: Mapping[str, int]) -> str:
    """Words such as "5 of 10 orders can be made, each taken alone."; ``counts`` by verdict, not all 0."""
    total, able = sum(counts.values()), counts.get("makeable", 0) + counts.get("edge", 0)
    if total == 1:
        return f"The one order can{'' if able else 'not'} be made."
    who = f"All {total}" if able == total else f"{able} of {total}" if able else f"None of {total}"
    return f"{who} orders can be made, each taken alone."


def summary(findings: Findings, counts: Mapping[str, int]) -> str:
    """What a campaign's answers come to, in a sentence or two: alone, and together from one stock."""
    if not findings.orders:
        return "No order is open."
    plan = findings.plan
    if plan is None or len(findings.orders) < 2:
        return made(counts)
    states = [planned.state for planned in plan.orders.values()]
    served, partial = len(states) - states.count("none"), states.count("part")
    part = "" if not partial else ", in part" if partial == served else f", {partial} of them in part"
    return f"{made(counts)} Together the plan serves {served or 'none'}{part}."


def together(findings: Findings) -> str:
    """Words such as "9 makeable alone, 6 served together, 1 of them in part"; empty without a plan."""
    plan = findings.plan
    if plan is None or not findings.orders:
        return ""
    alone = sum(1 for finding in findings.orders if finding.verdict in ("makeable", "edge"))
    states = [planned.state for planned in plan.orders.values()]
    served = len(states) - states.count("none")
    text = f"{alone} makeable alone, {served} served together"
    partial = states.count("part")
    if partial:
        text += ", in part" if partial == served else f", {partial} of them in part"
    return text


#: How a sentence begins that says its verdict first.
_OPENINGS = ("Makeable: ", "Short: ", "Barred: ")


def beside_verdict(sentence: str) -> str:
    """An order's sentence as it stands beside its verdict, which it need not say again."""
    for opening in _OPENINGS:
        sentence = sentence.removeprefix(opening)
    return capitalised(sentence)


def capitalised(sentence: str) -> str:
    """A sentence with a capital first letter, and the rest as it is."""
    return sentence[:1].upper() + sentence[1:]


def moment(recorded: str) -> str:
    """An ISO moment as people write it: "2026-03-05 14:02 UTC"; other text as it is."""
    try:
        when = datetime.datetime.fromisoformat(recorded)
    except ValueError:
        return recorded
    if when.tzinfo is None:
        return when.strftime("%Y-%m-%d %H:%M")
    return when.astimezone(datetime.UTC).strftime("%Y-%m-%d %H:%M UTC")


def percent(probability: Fraction | float) -> str:
    """A probability as percent to one decimal; what is not quite certain or impossible is not rounded to be so."""
    value = Fraction(probability) * 100
    printed = numbers.text(value, 1)
    if printed == "100.0" and value < 100:
        return "> 99.9"
    return "< 0.1" if printed == "0.0" and value > 0 else printed


def with_unit(text: str, unit: str) -> str:
    """A number and its unit, never broken between lines."""
    return f"{text}\N{NO-BREAK SPACE}{unit}" if unit else text


def window(low: float | None, high: float | None) -> str:
    """A limit in words: "12.5 to 13.5", "at most 0.3", "at least 52", "exactly 13"."""
    places = max((_needed_places(bound) for bound in (low, high) if bound is not None), default=0)
    if low is not None and high is not None:
        if low == high:
            return f"exactly {numbers.text(low, places)}"
        return f"{numbers.text(low, places)} to {numbers.text(high, places)}"
    if high is not None:
        return f"at most {numbers.text(high, places)}"
    return f"at least {numbers.text(low, places)}" if low is not None else "no limit"


def _needed_places(bound: float) -> int:
    return 0 if bound % 1 == 0 else numbers.decimals([repr(bound)])


def span(ends: Range | None, places: int) -> str:
    """A range from least to greatest; an end without bound is said so."""
    if ends is None:
        return numbers.UNKNOWN
    low, high = ends
    if low is None and high is None:
        return "any"
    if low is None:
        return f"up to {numbers.text(high or 0, places)}"
    if high is None:
        return f"from {numbers.text(low, places)}"
    return f"{numbers.text(low, places)} to {numbers.text(high, places)}"


def beside(value: float, low: float | None, high: float | None, places: int) -> str:
    """``value`` with as many decimals as show on which side of its limit it lies.

    A value of 12.46 against "at least 12.5" is not printed as 12.5: that would look as if it held.
    """
    for shown in range(places, numbers.MOST_PLACES):
        printed = Fraction(round(decimal(value) * 10**shown), 10**shown)
        if _holds(printed, low, high) == _holds(decimal(value), low, high):
            return numbers.text(printed, shown)
    return numbers.text(value, numbers.MOST_PLACES)


def _holds(value: Fraction, low: float | None, high: float | None) -> tuple[bool, bool]:
    return low is None or value >= decimal(low), high is None or value <= decimal(high)


def decimal(value: float) -> Fraction:
    """The shortest decimal that a float names: what was typed, where it was typed."""
    return Fraction(repr(float(value)))
