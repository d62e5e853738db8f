"""One sentence that states an order's answer in plain words, built from its findings."""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction

from generator.findings.house_rules import LEAST_IF_USED, MAX_LOTS
from generator.findings.model import OrderModel, Row
from generator.findings.records import BlockingProof, Multiplier, OrderFinding, Recipe
from generator.findings.values import HUNDRED
from generator.findings.verdicts import Judgement
from generator.intake.records import Campaign, Group
from generator.numbers import exact, money, significant, weight

#: A range end or a bound that isn't a typed number is printed to this many significant digits.
DIGITS = 6


def answer_sentence(
    campaign: Campaign, model: OrderModel, judgement: Judgement, finding: OrderFinding, is_absurd: bool
) -> str:
    """The order's answer in one sentence, from its finding (``is_absurd``: no material at all could do)."""
    if judgement.verdict == "unreachable":
        assert judgement.blocking is not None
        if is_absurd:
            words = listed([_label(campaign, m.on) for m in judgement.blocking.multipliers])
            return f"Not makeable: no material at all could meet the limits on {words} together."
        return (
            f"Not makeable from these lots: {blocking_words(campaign, model, judgement.blocking)}{_near_miss(finding)}."
        )
    if judgement.verdict == "barred":
        rules = listed([rule_words(campaign, name) for name in finding.barred_by])
        return f"Barred: these lots could make it, but not within the house rules ({rules})."
    if judgement.verdict == "short":
        return _short(campaign, model, judgement)
    words = _recipe_words(campaign, model, finding)
    if judgement.face is None:
        return f"Makeable: {words}."
    if all(side == "zero" for side in judgement.face.stuck.values()):
        return f"Makeable, but on the edge: only {listed(judgement.face.on_face)} can be used; {words}."
    stuck = listed(tuple(judgement.face.stuck))
    verb = "is" if len(judgement.face.stuck) == 1 else "are"
    return f"Makeable, but on the edge: the share of {stuck} {verb} fixed at its bound; {words}."


def _near_miss(finding: OrderFinding) -> str:
    """A remark where the order misses by less than assay error: two laboratory sds, all limits together."""
    if finding.room is None or finding.room_unit != "sd" or finding.room <= -2:
        return ""
    return f" (it misses by {significant(-finding.room, 2)} sd, within assay error)"


def _recipe_words(campaign: Campaign, model: OrderModel, finding: OrderFinding) -> str:
    """Cost and lots of the cheapest recipe with its own room, then what more room costs."""
    recipe = finding.recipes["cheapest"]
    count = f"from {_counted(len(recipe.shares), 'lot')}"
    per = f"{campaign.settings.currency}/{campaign.settings.quantity_unit}"
    words = count if recipe.cost is None else f"cheapest {money(recipe.cost)} {per} {count}"
    in_sd = finding.room_unit == "sd"
    if recipe.room is not None:
        movable = [row for row in model.rows if row.side != "exact"]
        tight = [_label(campaign, row.on) for row in movable if _is_tight(model, row, recipe)]
        if tight:
            words += f", with no room in {listed(tight)}"
        else:
            words += f", with {significant(recipe.room, 2)} sd of room" if in_sd else ", with room in every limit"
    last = finding.curve[-1] if finding.curve else None
    if last and recipe.cost is not None and recipe.room is not None and money(last.cost) != money(recipe.cost):
        bought = f"{significant(last.room, 2)} sd of room" if in_sd else "the greatest room"
        words += f"; {money(last.cost)} {per} buys {bought}"
    return words


def _is_tight(model: OrderModel, row: Row, recipe: Recipe) -> bool:
    over = (term * recipe.exact.get(name, Fraction(0)) for name, term in zip(model.names, row.terms, strict=True))
    return sum(over, Fraction(0)) == 0


def _short(campaign: Campaign, model: OrderModel, judgement: Judgement) -> str:
    greatest = judgement.greatest
    assert greatest is not None
    assert greatest.amount is not None
    unit = campaign.settings.quantity_unit
    wanted = exact(model.amount) if model.amount is not None else ""
    runs_out = ""
    if greatest.runs_out:
        verb = "runs" if len(greatest.runs_out) == 1 else "run"
        runs_out = f"; {listed(greatest.runs_out)} {verb} out"
    most = significant(float(greatest.amount), DIGITS)
    return f"Short: the stock makes at most {most} {unit} of the {wanted} {unit} within these limits{runs_out}."


def blocking_words(campaign: Campaign, model: OrderModel, proof: BlockingProof) -> str:
    """What the blocking proof says: the combined limit, and the best that any lot has of it."""
    if len(proof.multipliers) == 1:
        return _single_words(campaign, model, proof.multipliers[0], bounded=proof.least is not None)
    names = [_label(campaign, multiplier.on) for multiplier in proof.multipliers]
    if proof.least is not None or not _has_equal_carriers(model, proof.multipliers):
        return f"the limits on {listed(names)} cannot be met together, whatever the shares"
    signs = [_sign(multiplier) for multiplier in proof.multipliers]
    # As "at least" where more of the sum is wanted, as "at most" where every part wants less.
    flip = -1 if all(sign < 0 for sign in signs) else 1
    parts = [
        (flip * sign * abs(m.weight), _label(campaign, m.on)) for m, sign in zip(proof.multipliers, signs, strict=True)
    ]
    need = sum(
        (flip * sign * abs(m.weight) * m.bound for m, sign in zip(proof.multipliers, signs, strict=True)), Fraction(0)
    )
    carrier = _carrier(model, proof.multipliers[0])
    reach = [need - flip * score / carrier for score in proof.scores.values()]
    if flip > 0:
        return f"{_sum_words(parts)} must be at least {_number(need)}, and no lot has more than {_number(max(reach))}"
    return f"{_sum_words(parts)} must be at most {_number(need)}, and no lot has less than {_number(min(reach))}"


def _single_words(campaign: Campaign, model: OrderModel, multiplier: Multiplier, *, bounded: bool) -> str:
    label, unit = _label(campaign, multiplier.on), _unit(campaign, multiplier.on)
    measure = model.measures[multiplier.on]
    wants_more = (_sign(multiplier) > 0) != measure.rule.decreases
    limit = model.limits[multiplier.on]
    typed = limit.low if wants_more else limit.high
    assert typed is not None, "the multiplier's side has a bound"
    must = (
        f"must be {exact(typed)}{unit}"
        if limit.is_exact
        else f"must be at {'least' if wants_more else 'most'} {exact(typed)}{unit}"
    )
    if bounded:
        return f"{label} {must}, and no shares within their bounds give that"
    values = []
    for above, below in zip(model.numerators[multiplier.on], model.denominators[multiplier.on], strict=True):
        if below:
            values.append(measure.rule.value(above / below))
    if not values:
        return f"{label} {must}, and its denominator is 0 in every lot"
    best = max(values) if wants_more else min(values)
    return f"{label} {must}, and no lot has {'more' if wants_more else 'less'} than {_number(best)}{unit}"


def _sign(multiplier: Multiplier) -> int:
    """+1 where the row asks for more of the quantity, −1 for less."""
    if multiplier.side == "exact":
        return -1 if multiplier.weight > 0 else 1
    return 1 if multiplier.side == "low" else -1


def _has_equal_carriers(model: OrderModel, multipliers: Sequence[Multiplier]) -> bool:
    """Whether every lot counts alike in all these limits, so that values can be added as they stand."""
    carriers = {carrier for multiplier in multipliers for carrier in model.denominators[multiplier.on]}
    return len(carriers) == 1 and all(
        not model.measures[multiplier.on].is_ratio and model.measures[multiplier.on].rule.name == "linear"
        for multiplier in multipliers
    )


def _carrier(model: OrderModel, multiplier: Multiplier) -> Fraction:
    return model.denominators[multiplier.on][0]


def _sum_words(parts: Sequence[tuple[Fraction, str]]) -> str:
    ordered = sorted(parts, key=lambda part: part[0] < 0)
    words = ""
    for factor, label in ordered:
        size = "" if abs(factor) == 1 else f"{weight(abs(factor))} "
        joint = (" − " if words else "−") if factor < 0 else (" + " if words else "")
        words += f"{joint}{size}{label}"
    return words


def _number(value: Fraction) -> str:
    text = exact(value)
    return text if len(text) <= DIGITS + 2 and "/" not in text else significant(float(value), DIGITS)


def _label(campaign: Campaign, name: str) -> str:
    quantity = campaign.quantities()[name]
    return f"the share of {quantity.label}" if isinstance(quantity, Group) else quantity.label


def _unit(campaign: Campaign, name: str) -> str:
    unit = campaign.quantities()[name].unit
    return f" {unit}" if unit else ""


def rule_words(campaign: Campaign, name: str) -> str:
    """A house rule in words."""
    if name == MAX_LOTS:
        return f"at most {_counted(campaign.house.max_lots or 0, 'lot')} in a recipe"
    if name == LEAST_IF_USED:
        least = campaign.house.least_if_used
        return "a used lot has its least share" if least is None else f"a used lot is at least {percent(least)}"
    return name.removeprefix("keep_apart: ").replace(" from ", " kept apart from ")


def _counted(count: int, word: str) -> str:
    return f"{count} {word}" if count == 1 else f"{count} {word}s"


def listed(names: Sequence[str]) -> str:
    """Names joined as a sentence wants them: "A", "A and B", "A, B and C"."""
    if len(names) <= 1:
        return "".join(names)
    return f"{', '.join(names[:-1])} and {names[-1]}"


def percent(share: Fraction) -> str:
    """A share of 1 as percent, to four significant digits."""
    return f"{significant(float(share * HUNDRED), 4)} %"
