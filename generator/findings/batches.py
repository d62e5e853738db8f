"""Batch cards: the plan's recipes in amounts that can be weighed, such that everything still holds.

Every lot has a weigh step (its own, else the house's; without either, a decimal step fine enough for
the batch).  For each order a small whole-number program looks for multiples near the plan's amounts;
what it proposes is checked in exact numbers: limits, share bounds, house rules, stock across all cards.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from fractions import Fraction
from math import ceil

from generator.findings.measures import Measure, blend_value
from generator.findings.model import OrderModel, model_of
from generator.findings.programs import ONE, ZERO
from generator.findings.records import Batch, Plan
from generator.findings.rounding import Rounded, Weighing, broken, rounded
from generator.findings.values import Table
from generator.intake.records import Campaign, Order

#: The last place of an amount without a weigh step: at most this part of the batch, and of its smallest amount.
FINE = (Fraction(1, 1000), Fraction(1, 100))
FINEST = 6
#: Up to so many batches of one order may differ from each other; of more, only the last.
MOST_DIFFERENT = 12
#: Orders that found no amounts are tried again before the others, so many times.
MOST_PASSES = 3
#: Steps of a lot that an order accepted in part gives up where others need them.
GIVE_WAY = 3
NONE_FOUND = "None found: no weighable amounts near the plan hold everything. These are the closest."


@dataclass(frozen=True, slots=True)
class _Job:
    """One order to be weighed: its lots, exact amounts of the plan, steps, number of batches."""

    order: Order
    model: OrderModel
    amounts: Mapping[int, Fraction]
    steps: Mapping[int, Fraction]
    typed: frozenset[int]
    count: int

    @property
    def is_part(self) -> bool:
        """Whether any smaller amount would do as well."""
        return self.order.accept == "part" or self.order.amount is None or self.order.amount.low is None

    @property
    def window(self) -> tuple[Fraction | None, Fraction | None]:
        """What the order may amount to: accepted in part, anything up to its greatest."""
        typed = self.order.amount
        if typed is None:
            return None, None
        return (None if self.is_part else typed.low), typed.high


@dataclass(frozen=True, slots=True)
class _Card:
    """What was found for one order: batches in turn (equal ones once, with how many they are)."""

    batches: tuple[tuple[int, Rounded], ...]
    remark: str = ""
    is_closest: bool = False

    def used(self) -> dict[int, Fraction]:
        """What the card takes of each of the order's lots."""
        total: dict[int, Fraction] = {}
        for times, batch in self.batches:
            for i, x in batch.amounts.items():
                total[i] = total.get(i, ZERO) + times * x
        return total


def batches_of(campaign: Campaign, table: Table, measures: Mapping[str, Measure], plan: Plan) -> tuple[Batch, ...]:
    """The batches of every order that the plan serves, in file order; equal batches stand once."""
    jobs = [
        job
        for order in campaign.orders
        if order.name in plan.orders and plan.orders[order.name].exact
        for job in [_job(campaign, table, measures, order, plan.orders[order.name].exact)]
        if job is not None
    ]
    cards = _cards(campaign, jobs)
    found = []
    for job, card in zip(jobs, cards, strict=True):
        number = 1
        for times, batch in card.batches:
            found.append(_batch(job, card, batch, number, times, table, measures))
            number += times
    return tuple(found)


def _job(
    campaign: Campaign, table: Table, measures: Mapping[str, Measure], order: Order, exact: Mapping[str, Fraction]
) -> _Job | None:
    model = model_of(campaign, order, table, measures)
    if not isinstance(model, OrderModel):
        return None
    amounts = {model.names.index(name): x for name, x in exact.items()}
    total = sum(amounts.values(), ZERO)
    size = campaign.settings.batch_size
    count = ceil(total / size) if size else 1
    fine = _fine_step(min(amounts.values()) / count, total / count)
    steps, typed = {}, set()
    for i in range(len(model.lots)):
        own = campaign.lots[model.lots[i]].weigh_step
        step = own.value if own else campaign.house.weigh_step
        steps[i] = step or fine
        if step:
            typed.add(i)
    return _Job(order, model, amounts, steps, frozenset(typed), count)


def _fine_step(smallest: Fraction, total: Fraction) -> Fraction:
    """A decimal step that is fine for a batch of this total and this smallest amount."""
    for places in range(FINEST):
        step = Fraction(1, 10**places)
        if step <= FINE[0] * total and step <= FINE[1] * smallest:
            return step
    return Fraction(1, 10**FINEST)


def _cards(campaign: Campaign, jobs: list[_Job]) -> list[_Card]:
    """A card for each job, the stock shared: what later jobs need by the plan is kept for them."""
    # What is accepted in part can give way by a little: it comes last, and takes what is left.
    turn = sorted(range(len(jobs)), key=lambda k: jobs[k].is_part)
    best: list[_Card] = []
    for _ in range(MOST_PASSES):
        cards = _in_turn(campaign, jobs, turn)
        if not best or sum(card.is_closest for card in cards) < sum(card.is_closest for card in best):
            best = cards
        failed = [k for k in turn if cards[k].is_closest]
        if not failed:
            break
        turn = [*failed, *(k for k in turn if not cards[k].is_closest)]
    return best


def _in_turn(campaign: Campaign, jobs: list[_Job], turn: list[int]) -> list[_Card]:
    free = {i: lot.stock.value for i, lot in enumerate(campaign.lots) if lot.stock is not None}
    for job in jobs:
        for i, x in job.amounts.items():
            if job.model.lots[i] in free:
                free[job.model.lots[i]] -= x
    given = _given_way(jobs)
    cards: dict[int, _Card] = {}
    for k in turn:
        job = jobs[k]
        caps = {
            i: max(ZERO, free[job.model.lots[i]] + x + (ZERO if job.is_part else given.get(job.model.lots[i], ZERO)))
            for i, x in job.amounts.items()
            if job.model.lots[i] in free
        }
        spare = {i: free.get(lot) for i, lot in enumerate(job.model.lots) if i not in job.amounts}
        cards[k] = _card(job, caps, _addable(job, spare))
        for i, x in cards[k].used().items():
            if job.model.lots[i] in free:
                free[job.model.lots[i]] += job.amounts.get(i, ZERO) - x
    return [cards[k] for k in range(len(jobs))]


def _given_way(jobs: list[_Job]) -> dict[int, Fraction]:
    """What orders accepted in part can give up of each lot without being changed much."""
    given: dict[int, Fraction] = {}
    for job in jobs:
        for i, x in job.amounts.items():
            few = GIVE_WAY * job.steps[i]
            if job.is_part and x >= 2 * few:
                given[job.model.lots[i]] = given.get(job.model.lots[i], ZERO) + few
    return given


def _addable(job: _Job, spare: Mapping[int, Fraction | None]) -> dict[int, Fraction | None]:
    """Lots that the plan leaves out of the order, of which there is a step to spare for each batch."""
    return {
        i: left
        for i, left in spare.items()
        if not job.model.rules.least[i]
        and job.model.upper[i] != 0
        and (left is None or left >= job.count * job.steps[i])
    }


def _card(job: _Job, caps: Mapping[int, Fraction], addable: Mapping[int, Fraction | None]) -> _Card:
    """All batches alike if that can be, else as the rest asks; then with a lot added, with an amount a
    step off; else the closest."""
    wider = {**caps, **{i: left for i, left in addable.items() if left is not None}}
    with_more = {**job.amounts, **dict.fromkeys(addable, ZERO)}
    for low, high, remark in _windows(job):
        tries = [(job.amounts, caps)]
        if job.typed & job.amounts.keys() and addable:
            tries.append((with_more, wider))
        for amounts, limits in tries:
            found = _batches(job, amounts, limits, low, high)
            if found is not None:
                added = sorted({i for _, batch in found for i, x in batch.amounts.items() if x} - job.amounts.keys())
                names = ", ".join(job.model.names[i] for i in added)
                told = f"The plan does without {names}: added so that the amounts can be weighed." if added else ""
                return _Card(found, " ".join(part for part in (told, remark) if part))
    if not job.typed & job.amounts.keys():
        # No step is given: the plan's own amounts hold, and only print has to round them.
        exact = {i: x / job.count for i, x in job.amounts.items()}
        return _Card(((job.count, Rounded(exact, ())),))
    low, high, _ = _windows(job)[-1]
    closest = rounded(_weighing(job, job.amounts, job.count, caps, low, high), is_elastic=True)
    if closest is None:
        closest = rounded(_weighing(job, job.amounts, job.count, caps, None, None), is_elastic=True)
    assert closest is not None, "weighing less of everything is always possible"
    return _Card(((job.count, closest),), NONE_FOUND, is_closest=True)


def _batches(
    job: _Job,
    amounts: Mapping[int, Fraction],
    caps: Mapping[int, Fraction],
    low: Fraction | None,
    high: Fraction | None,
) -> tuple[tuple[int, Rounded], ...] | None:
    equal = rounded(_weighing(job, amounts, job.count, caps, low, high))
    if equal is not None:
        return ((job.count, equal),)
    return _different(job, amounts, caps, low, high) if job.count > 1 else None


def _windows(job: _Job) -> list[tuple[Fraction | None, Fraction | None, str]]:
    """The order's own window, then, where no multiples come to it, a step more or less."""
    low, high = job.window
    found: list[tuple[Fraction | None, Fraction | None, str]] = [(low, high, "")]
    step = job.count * max((job.steps[i] for i in job.amounts), default=ONE)
    if low is not None and job.typed & job.amounts.keys():
        told = "The amount asked can't be weighed in these steps from this stock: this is the nearest found."
        found.append((low, None if high is None else high + step, told))
        found.append((low - step, None if high is None else high + step, told))
    return found


def _weighing(
    job: _Job,
    amounts: Mapping[int, Fraction],
    count: int,
    caps: Mapping[int, Fraction],
    low: Fraction | None,
    high: Fraction | None,
) -> Weighing:
    """The question for one of ``count`` equal batches."""
    return Weighing(
        model=job.model,
        aims={i: max(ZERO, x) / count for i, x in amounts.items()},
        steps=job.steps,
        caps={i: cap / count for i, cap in caps.items()},
        low=None if low is None else low / count,
        high=None if high is None else high / count,
    )


def _different(
    job: _Job,
    amounts: Mapping[int, Fraction],
    caps: Mapping[int, Fraction],
    low: Fraction | None,
    high: Fraction | None,
) -> tuple[tuple[int, Rounded], ...] | None:
    """Batches that make up for each other's rounding; None if some batch finds no amounts."""
    rest, left = dict(amounts), dict(caps)
    runs = [1] * job.count if job.count <= MOST_DIFFERENT else [job.count - 1, 1]
    found: list[tuple[int, Rounded]] = []
    done, open_batches = ZERO, job.count
    for number, times in enumerate(runs):
        is_last = number == len(runs) - 1
        batch = rounded(
            Weighing(
                model=job.model,
                aims={i: max(ZERO, x) / open_batches for i, x in rest.items()},
                steps=job.steps,
                caps={i: max(ZERO, cap) / times for i, cap in left.items()},
                low=low - done if is_last and low is not None else None,
                high=high - done if is_last and high is not None else None,
            )
        )
        if batch is None:
            return None
        for i, x in batch.amounts.items():
            rest[i] -= times * x
            if i in left:
                left[i] -= times * x
        done += times * sum(batch.amounts.values(), ZERO)
        open_batches -= times
        if found and found[-1][1] == batch:
            found[-1] = (found[-1][0] + times, batch)
        else:
            found.append((times, batch))
    return tuple(found)


def _batch(
    job: _Job,
    card: _Card,
    batch: Rounded,
    number: int,
    times: int,
    table: Table,
    measures: Mapping[str, Measure],
) -> Batch:
    model = job.model
    total = sum(batch.amounts.values(), ZERO)
    shares = {model.lots[i]: x / total for i, x in batch.amounts.items() if x} if total else {}
    values = {
        name: float(value)
        for name, measure in measures.items()
        if (value := blend_value(measure, table, model.lots, shares)) is not None
    }
    exact = {model.names[i]: batch.amounts[i] for i in sorted(batch.amounts) if batch.amounts[i]}
    return Batch(
        order=job.order.name,
        batch=number,
        amounts={name: float(x) for name, x in exact.items()},
        values=values,
        holds=not card.is_closest and not broken(model, batch.amounts),
        of=job.count,
        times=times,
        exact=exact,
        steps={model.names[i]: float(job.steps[i]) for i in sorted(job.typed)},
        breaks=batch.breaks,
        remark=card.remark,
    )
