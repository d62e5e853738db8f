"""What the plan comes to, in words: served together, who loses to whom, how sure it is."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

from generator import numbers
from generator.findings.records import Loser, Plan
from generator.report import words
from generator.report.shares import amount_places

AIMS = {
    "value": "greatest value",
    "amount": "greatest amount accepted",
    "unknown cost": "least of lots of unknown cost",
    "cost": "least cost",
    "lots": "fewest lots",
}


def certainty(plan: Plan) -> str:
    """How sure it is that no plan is better, in a sentence."""
    if plan.status == "proven":
        return "The search went to its end: it found no better plan."
    gap = "an unknown part" if plan.gap is None else f"at most {numbers.significant(plan.gap * 100, 2)} %"
    if plan.status == "out of time":
        return f"The search ran out of time: this is the best plan found, and a better one could gain {gap} more."
    return f"The search ended at the effort it was allowed: a better plan could gain {gap} more."


def certainty_short(plan: Plan) -> str:
    """The same in a word or two."""
    if plan.status == "proven":
        return "proven best"
    gap = "unknown" if plan.gap is None else f"{numbers.significant(plan.gap * 100, 2)} %"
    return f"{'out of time, ' if plan.status == 'out of time' else ''}gap {gap}"


def loser_sentences(loser: Loser, plan: Plan, unit: str, currency: str) -> tuple[str, ...]:
    """Why an order is not served in full, and what would have to give way."""
    if loser.reason == "alone":
        verdict = words.VERDICT_WORDS[loser.alone or "none"]
        return (f"Taken alone it is {verdict}: its own page tells why, and what would change it.",)
    if loser.reason == "left out":
        return (f"It has no part in the plan: {loser.remark}.",)
    if loser.reason == "price":
        if plan.status != "proven":
            return ("The stock would do: it costs more than it brings, or the search ended too early to see.",)
        return ("The stock would do, but serving it would cost more than it brings.",)
    return (*_short(loser), *_more(loser, plan, unit, currency), *_instead(loser, unit, plan))


def _short(loser: Loser) -> tuple[str, ...]:
    if not loser.short:
        return ("No lot alone is short: the others take too much of several.",)
    listed = words.listed(loser.short, "and" if loser.is_together else "or")
    if loser.is_together:
        return (f"It is short of {listed} together: with more of all of them it would be served in full.",)
    which = "it" if len(loser.short) == 1 else "any one"
    return (f"It is short of {listed}: with more of {which} it would be served in full.",)


def _more(loser: Loser, plan: Plan, unit: str, currency: str) -> tuple[str, ...]:
    gains = {lot: plan.one_more[lot] for lot in loser.short if plan.one_more.get(lot)}
    if not gains:
        return ()
    worth = words.listed(f"of {lot} {_gain(gain, plan, unit, currency)}" for lot, gain in gains.items())
    return (f"One {unit} more {worth}, with the accepted orders and their lots kept.",)


def _gain(gain: float, plan: Plan, unit: str, currency: str) -> str:
    if plan.measure == "value":
        return f"would bring {words.with_unit(numbers.money(gain), currency)}"
    return f"would let {words.with_unit(numbers.significant(gain, 3), unit)} more be accepted"


def _instead(loser: Loser, unit: str, plan: Plan) -> tuple[str, ...]:
    if not loser.instead:
        return ("No single other order could make room for it by giving way.",)
    told = words.listed((_give_way(name, cut, plan, unit) for name, cut in loser.instead.items()), "or")
    return (f"It would be served in full if {told}.",)


def _give_way(name: str, cut: float, plan: Plan, unit: str) -> str:
    planned = plan.orders.get(name)
    if planned is None or cut >= planned.accepted * (1 - 1e-6):
        return f"order {name} were dropped"
    return f"order {name} got {words.with_unit(numbers.text(cut, amount_places(cut)), unit)} less"


def notes(plan: Plan, currency: str) -> tuple[str, ...]:
    """What was taken for granted."""
    told = []
    if plan.unchecked:
        told.append(f"Stock was not checked for {_few(plan.unchecked)}: taken as unlimited.")
    if plan.unpriced:
        told.append(
            f"No price is given for order {_few(plan.unpriced)}: of these the plan accepts as much as it can, "
            "after those with a price."
        )
    if plan.uncosted:
        told.append(f"The cost of {_few(plan.uncosted)} is unknown, and counts as 0 {currency} in the plan's value.")
    return tuple(told)


def _few(names: Sequence[str], most: int = 6) -> str:
    if len(names) <= most:
        return words.listed(names)
    return f"{', '.join(names[:most])} and {len(names) - most} more"


def left_words(left: Mapping[str, float], lot: str, plan: Plan) -> str:
    """What became of a lot's stock."""
    if lot in plan.runs_out:
        return "runs out"
    return "never used" if lot in plan.never_used and left.get(lot) != 0 else ""
