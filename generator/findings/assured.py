"""The recipe that holds every limit with the required confidence at least cost, or as surely as can be."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, replace
from fractions import Fraction
from typing import TYPE_CHECKING, Generic, TypeVar

from generator.findings.ask import Asking, ask_nothing
from generator.findings.conformity import UncertainRow, is_mirror
from generator.findings.house import Branch, Found, Offer, ask_best_within, split
from generator.findings.measures import Measure
from generator.findings.model import OrderModel
from generator.findings.narrowing import Guide, ask_open_boxes
from generator.findings.programs import ONE, ZERO, capped_upper, share_program, share_rows
from generator.findings.recipes import Best, named_shares, recipe_of
from generator.findings.records import Recipe
from generator.findings.uncertainty import RowError
from generator.findings.values import Table
from generator.geometry.chance import Chance
from generator.geometry.choice import Box
from generator.geometry.program import Program, Vector
from generator.numbers import significant

if TYPE_CHECKING:
    from generator.geometry.cone import Surest

#: Where a lot's cost is unknown it counts as so many times the dearest known one: used last.
UNKNOWN_COST = 100
#: Sets of lots tried before all branches are gone through one by one.
MOST_TRIED = 60

T = TypeVar("T")


def ask_assured(
    model: OrderModel,
    table: Table,
    measures: Mapping[str, Measure],
    rows: Sequence[UncertainRow],
    confidence: Fraction,
    cheapest: Best,
) -> Asking[Recipe | None]:
    """Least cost with each uncertain limit at ``confidence``, the others on values; None without uncertain ones.

    ``cheapest``: the cheapest shares on values alone.  Where the confidence can't be had: the greatest that
    can, said in the recipe's remark.
    """
    if not rows:
        return None
    chances = _chances(model, rows, float(confidence))

    def hold(branch: OrderModel) -> Tried[Vector]:
        return _held(branch, rows, chances, float(confidence), cheapest)

    held = yield from _ask_tried_within(model, _sided_program(model, rows, chances), hold)
    if held is not None:
        return recipe_of(model, table, measures, named_shares(model, held.answer))
    at_all = replace(_sided_program(model, rows, chances), cost=(ZERO,) * len(model.lots))
    found = yield from _ask_tried_within(model, at_all, lambda branch: _surest(branch, rows, chances))
    if found is None:
        return None
    best = found.answer
    remark = (
        f"The required confidence of {significant(float(confidence * 100), 4)} % for each limit cannot be had "
        f"from these lots; the most that can is {significant(best.probability * 100, 3)} %."
    )
    return recipe_of(model, table, measures, named_shares(model, best.x), remark=remark)


@dataclass(frozen=True, slots=True)
class Tried(Generic[T]):
    """What one branch offers, and rows ≤ 0 that no better answer on any branch breaks."""

    offer: Offer[T] | None
    tangents: tuple[Vector, ...]


def _ask_tried_within(
    model: OrderModel, program: Program, attempt: Callable[[OrderModel], Tried[T]]
) -> Asking[Found[T] | None]:
    """The best that an attempt finds within the house rules; None if there is none.

    Outer approximation (Duran and Grossmann 1986): the lots that are best by the tangents known so far are tried,
    which gives further tangents, until the best ones by them have been tried already.  ``program``: what the
    chances ask on their means, with the cost; without any cost, whatever meets the tangents is tried.
    """
    first = attempt(model)
    if first.offer is None:
        return None
    root = Branch(model)
    if not split(root, model.rules, first.offer.shares):
        return Found(first.offer.answer, root)
    aims = (program.cost,) if any(program.cost) else ()
    tangents = dict.fromkeys(first.tangents)
    tried: dict[Box, bool] = {}
    best: tuple[Offer[T], Branch] | None = None
    for _ in range(MOST_TRIED):
        boxes = yield from ask_open_boxes(Guide(program.at_most(tuple(tangents), ZERO), aims), model.rules, None)
        if boxes is None:
            break
        untried = [box for box in boxes if box not in tried]
        if not untried:
            # All that may be best by the tangents has been tried; without an aim that tells of nothing else.
            if not boxes or (aims and all(tried[box] for box in boxes)):
                return None if best is None else Found(best[0].answer, best[1])
            break
        for box in untried:
            branch = root.within(box, model.rules)
            outcome = attempt(branch.model)
            tangents |= dict.fromkeys(outcome.tangents)
            offer = outcome.offer
            tried[box] = offer is not None and not split(branch, model.rules, offer.shares)
            if offer is not None and tried[box] and (best is None or offer.key < best[0].key):
                best = offer, branch
    return (yield from ask_best_within(model, lambda branch: ask_nothing(attempt(branch).offer)))


def _sided_program(model: OrderModel, rows: Sequence[UncertainRow], chances: Sequence[Chance]) -> Program:
    """Least cost over what all chances ask on their means."""
    return _certain_program(model, rows).at_most([side for chance in chances for side in chance.sides], ZERO)


def _held(
    branch: OrderModel, rows: Sequence[UncertainRow], chances: Sequence[Chance], confidence: float, cheapest: Best
) -> Tried[Vector]:
    from generator.geometry.cone import assured as least_cost

    is_known = branch is cheapest.branch and all(cost is not None for cost in branch.cost)
    plain = cheapest.staged.x if is_known else None
    held = least_cost(_certain_program(branch, rows), chances, confidence, plain=plain)
    if held.x is None or held.value is None:
        return Tried(None, held.tangents)
    return Tried(Offer(held.x, (held.value,), held.x), held.tangents)


def _surest(branch: OrderModel, rows: Sequence[UncertainRow], chances: Sequence[Chance]) -> Tried[Surest]:
    from generator.geometry.cone import surest

    best = surest(_certain_program(branch, rows), chances)
    if best is None:
        return Tried(None, ())
    return Tried(Offer(best.x, (Fraction(-best.probability),), best), best.tangents)


def _certain_program(model: OrderModel, rows: Sequence[UncertainRow]) -> Program:
    uncertain = {(u.row.on, u.row.side) for u in rows}
    kept = tuple(row for row in model.rows if (row.on, row.side) not in uncertain)
    certain = replace(model, rows=kept)
    known = [cost for cost in model.cost if cost is not None]
    instead = UNKNOWN_COST * (max(known, default=ONE) or ONE)
    costs = [instead if cost is None else cost for cost in model.cost]
    return share_program(certain, share_rows(certain), costs, upper=capped_upper(model, model.amount))


def _chances(model: OrderModel, rows: Sequence[UncertainRow], confidence: float) -> list[Chance]:
    """One chance a limit; a two-sided one whose sides have errors of their own counts each side at (1+p)/2."""
    chances = []
    for name in model.limits:
        mine = [u for u in rows if u.row.on == name]
        if len(mine) == 2 and is_mirror(mine[0].error, mine[1].error) and _is_window(mine):
            low, high = sorted(mine, key=lambda u: u.row.side == "high")
            chances.append(
                Chance(
                    low=low.row.terms,
                    high=high.row.terms,
                    variance=high.error.variances(),
                    bias=_joint_bias(high.error),
                )
            )
            continue
        stretch = _stretch(confidence) if len(mine) == 2 else ONE
        for u in mine:
            variance = tuple(v * stretch * stretch for v in u.error.variances())
            bias = tuple(b * stretch for b in _joint_bias(u.error))
            chances.append(Chance(high=u.row.terms, variance=variance, bias=bias))
    return chances


def _is_window(mine: Sequence[UncertainRow]) -> bool:
    return all(a + b <= 0 for a, b in zip(mine[0].row.terms, mine[1].row.terms, strict=True))


def _stretch(confidence: float) -> Fraction:
    """Z at (1+p)/2 over z at p: a chance with so much more deviation asks at p what it should at (1+p)/2."""
    from scipy.special import ndtri

    at = float(ndtri(confidence))
    # At p = ½ the quantile is 0 and nothing stretches it: ask as at a hair above.
    return Fraction(float(ndtri((1 + confidence) / 2)) / max(at, 1e-6)).limit_denominator(10**6) + Fraction(1, 10**6)


def _joint_bias(error: RowError) -> Vector:
    """One component's bias as it is; of several the sum of their sizes, which is never too small."""
    biases = [bias for bias in error.biases.values() if any(bias)]
    if len(biases) == 1:
        return biases[0]
    n = len(next(iter(error.parts.values())))
    return tuple(sum((abs(bias[i]) for bias in biases), ZERO) for i in range(n))
