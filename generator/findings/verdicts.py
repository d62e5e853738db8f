"""Verdict and proof of one order: unreachable, short, edge or makeable.

Every answer comes proven from :mod:`generator.geometry.asked`; here the
exact shares and multipliers are put in the order's own terms.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from fractions import Fraction
from typing import Literal

from generator.findings.ask import Asking, answered, ask_answer, ask_best, ask_possible, both, together
from generator.findings.house import Branch as HouseBranch
from generator.findings.house import Offer, ask_best_within, ask_closed_branches
from generator.findings.model import OrderModel, Row
from generator.findings.narrowing import Guide
from generator.findings.programs import (
    ONE,
    ZERO,
    Rows,
    amount_rows,
    capped_upper,
    combined,
    least_over_shares,
    share_bound_rows,
    share_program,
    share_rows,
)
from generator.findings.records import BlockingProof, Branch, BranchProof, Cap, Face, Multiplier, Verdict
from generator.geometry.asked import Point
from generator.geometry.program import Bound, Infeasible, Optimum, Program, Unbounded, Vector
from generator.geometry.proofs import fewest_rows, tidy


@dataclass(frozen=True, slots=True, kw_only=True)
class Greatest:
    """The greatest amount (None: no bound), with shares that make it; the proof of its bound where that is
    less than the order asks for."""

    amount: Fraction | None
    shares: Mapping[str, Fraction]
    runs_out: tuple[str, ...]
    cap: Cap | None


@dataclass(frozen=True, slots=True, kw_only=True)
class Judgement:
    """The verdict with its parts: ``blocking`` if unreachable, ``branches`` if barred, else ``greatest``
    where stock is given, and the ``face`` of an edge."""

    verdict: Verdict
    blocking: BlockingProof | None = None
    branches: BranchProof | None = None
    face: Face | None = None
    greatest: Greatest | None = None


def ask_judgement(model: OrderModel) -> Asking[Judgement]:
    """The first verdict that applies, proven: unreachable, barred, short, edge, makeable.

    UndecidedError where the house rules leave too many branches.
    """
    rows = share_rows(model)
    program = share_program(model, rows, (ZERO,) * len(model.lots))
    if not (yield from ask_possible(program)):
        answer = yield from ask_answer(program)
        assert isinstance(answer, Infeasible), "a verdict is the same whichever way it was proven"
        return Judgement(verdict="unreachable", blocking=blocking_proof(model, rows, program, answer))
    if model.rules.names() and not (yield from ask_allowed(model)):
        return Judgement(verdict="barred", branches=(yield from _ask_branch_proof(model)))
    greatest, face = yield from both(ask_greatest_amount(model), ask_face(model))
    if greatest and greatest.amount is not None and model.amount is not None and greatest.amount < model.amount:
        return Judgement(verdict="short", greatest=greatest)
    return Judgement(verdict="edge" if face else "makeable", face=face, greatest=greatest)


judge = answered(ask_judgement)


def ask_verdict(model: OrderModel) -> Asking[Verdict]:
    """The verdict alone, without what proves it to a reader."""
    possible = yield from ask_possible(share_program(model, share_rows(model), (ZERO,) * len(model.lots)))
    if not possible:
        return "unreachable"
    if model.rules.names() and not (yield from ask_allowed(model)):
        return "barred"
    capped = replace(model, upper=capped_upper(model, model.amount))
    if capped.upper != model.upper and not (yield from ask_allowed(capped)):
        return "short"
    return "edge" if (yield from ask_face(model)) else "makeable"


def ask_allowed(model: OrderModel) -> Asking[bool]:
    """Whether some shares within the limits keep the house rules."""
    if not model.rules.names():
        return (yield from ask_possible(share_program(model, share_rows(model), (ZERO,) * len(model.lots))))
    return (yield from ask_best_within(model, _ask_any_shares, guide=_any_guide(model))) is not None


def _any_guide(model: OrderModel) -> Guide:
    return Guide(share_program(model, share_rows(model), (ZERO,) * len(model.lots)), ())


def _ask_any_shares(branch: OrderModel) -> Asking[Offer[None] | None]:
    answer = yield from ask_best(share_program(branch, share_rows(branch), (ZERO,) * len(branch.lots)))
    return Offer(answer.x, (), None) if isinstance(answer, Point) else None


def _ask_branch_proof(model: OrderModel) -> Asking[BranchProof]:
    """One blocking proof for each branch of the house rules, which together leave none open."""
    closed = yield from ask_closed_branches(model, _ask_any_shares, _any_guide(model))
    return BranchProof(branches=tuple((yield from together([_ask_closed(branch) for branch in closed]))))


def _ask_closed(branch: HouseBranch) -> Asking[Branch]:
    if branch.is_empty:
        return Branch(rules=branch.path, multipliers=(), scores={})
    model = branch.model
    rows = share_rows(model)
    program = share_program(model, rows, (ZERO,) * len(model.lots))
    answer = yield from ask_answer(program)
    assert isinstance(answer, Infeasible), "a closed branch has no shares"
    proof = blocking_proof(model, rows, program, answer)
    usable = {name for name, top in zip(model.names, model.upper, strict=True) if top != 0}
    return Branch(
        rules=branch.path,
        multipliers=proof.multipliers,
        scores={name: score for name, score in proof.scores.items() if name in usable},
        least=proof.least,
    )


def multipliers_of(
    rows: Sequence[Row], weights: Mapping[int, Fraction], names: Sequence[str]
) -> tuple[Multiplier, ...]:
    """Weights on rows as they are published, in row order."""
    return tuple(
        Multiplier(
            on=rows[k].on,
            side=rows[k].side,
            weight=weights[k],
            bound=rows[k].bound,
            terms=dict(zip(names, rows[k].terms, strict=True)),
        )
        for k in sorted(weights)
        if weights[k] != 0
    )


def blocking_proof(model: OrderModel, rows: Rows, program: Program, answer: Infeasible) -> BlockingProof:
    """The readable form of a proof that no shares meet the limits."""
    short = fewest_rows(program, answer, uncounted=(len(rows.entries),))
    weights = _tidied(rows.weights(short.multipliers))
    scores = combined(model.rows, weights, len(model.lots))
    least = least_over_shares(scores, model.lower, model.upper)
    assert least > 0, "a blocking proof has a positive least score"
    return BlockingProof(
        multipliers=multipliers_of(model.rows, weights, model.names),
        scores=dict(zip(model.names, scores, strict=True)),
        least=least if model.has_share_bounds else None,
    )


def _tidied(weights: Mapping[int, Fraction]) -> dict[int, Fraction]:
    return dict(zip(weights, tidy(tuple(weights.values())), strict=True))


def ask_greatest_amount(model: OrderModel) -> Asking[Greatest | None]:
    """The most that the stock makes within the limits and rules; None where no stock is given.

    An order that some blend meets has a greatest amount above 0: a little of that blend.
    """
    if all(stock is None for stock in model.stock):
        return None
    guide = Guide(_greatest_program(model), ((-ONE,) * len(model.lots),), place=1, in_amounts=True)
    found = yield from ask_best_within(model, _ask_greatest_on, guide=guide)
    if found is None:
        return Greatest(amount=ZERO, shares={}, runs_out=(), cap=None)
    # With house rules the cap of one branch says nothing about the others.
    return found.answer if not found.branch.path else replace(found.answer, cap=None)


def _greatest_program(model: OrderModel) -> Program:
    """The most of all lots together, over amounts."""
    entries, bounds = amount_rows(model).entries, share_bound_rows(model)
    n = len(model.lots)
    return Program(
        rows=(*(entry.terms for entry in entries), *(terms for _, terms in bounds)),
        row_low=(*(entry.low for entry in entries), *(None for _ in bounds)),
        row_high=(*(entry.high for entry in entries), *(ZERO for _ in bounds)),
        lower=(ZERO,) * n,
        upper=model.stock,
        cost=(-ONE,) * n,
    )


def _ask_greatest_on(model: OrderModel) -> Asking[Offer[Greatest] | None]:
    program = _greatest_program(model)
    best = yield from ask_best(program)
    if isinstance(best, Unbounded):
        shares = _shares(model, best.ray)
        found = Greatest(amount=None, shares=shares, runs_out=(), cap=None)
        # Without bound comes before any amount.
        return Offer([shares.get(name, ZERO) for name in model.names], (ZERO,), found)
    assert best is not None, "nothing at all is always within homogeneous limits"
    amount, x = -best.value, best.x
    if amount == 0:
        return None
    cap = None
    if model.amount is not None and amount < model.amount:
        answer = yield from ask_answer(program)
        assert isinstance(answer, Optimum), "the amount is bounded"
        cap, x = _cap(model, answer), answer.x
    shares = _shares(model, x)
    runs_out = tuple(
        name
        for name, used, stock in zip(model.names, x, model.stock, strict=True)
        if stock is not None and used == stock
    )
    found = Greatest(amount=amount, shares=shares, runs_out=runs_out, cap=cap)
    return Offer([shares.get(name, ZERO) for name in model.names], (ONE, -amount), found)


def _shares(model: OrderModel, amounts: Vector) -> dict[str, Fraction]:
    total = sum(amounts, ZERO)
    return {name: x / total for name, x in zip(model.names, amounts, strict=True) if x}


def _cap(model: OrderModel, answer: Optimum) -> Cap:
    """For every lot Σ y·row + w ≥ 1 with w the weight of its stock, and Σ w·stock = the amount."""
    rows, bound_rows = amount_rows(model), share_bound_rows(model)
    every = (*model.rows, *(row for row, _ in bound_rows))
    weights = rows.weights(answer.multipliers)
    for k, y in enumerate(answer.multipliers[len(rows.entries) :]):
        if y != 0:
            weights[len(model.rows) + k] = -y
    scores = combined(every, weights, len(model.lots))
    stock_weights = {name: ONE - score for name, score in zip(model.names, scores, strict=True) if score < 1}
    spent = sum(
        (stock_weights.get(name, ZERO) * (stock or ZERO) for name, stock in zip(model.names, model.stock, strict=True)),
        ZERO,
    )
    assert spent == -answer.value, "the cap proves the amount"
    return Cap(
        multipliers=multipliers_of(every, weights, model.names), stock_weights=stock_weights, greatest=-answer.value
    )


def ask_face(model: OrderModel) -> Asking[Face | None]:
    """The face on which a reachable order lies, or None where no share is stuck.

    One program finds all stuck shares at once: x = bound·λ + t + s with t ≤ 1, most Σ t.  As λ may
    grow, each t comes out 1 if that share can leave its bound in some blend, else 0 (the strict
    complementarity of Goldman and Tucker 1956); its multipliers are those of the face.
    """
    free = _varying(model)
    if not free:
        return None
    program = _free_program(model, free)
    if program is not None and (yield from ask_possible(program)):
        return None
    program = _face_program(model, free)
    if (yield from ask_possible(_with_all(program, len(free)))):
        return None
    answer = yield from ask_answer(program)
    assert isinstance(answer, Optimum), "the sum of the t is bounded"
    n = len(model.lots)
    stuck: dict[str, Literal["zero", "min", "max"]] = {}
    for column, (i, side) in enumerate(free):
        if answer.x[column] == 0:
            stuck[model.names[i]] = "max" if side == "upper" else ("min" if model.lower[i] else "zero")
    if not stuck:
        return None
    weights = _tidied(amount_rows(model).weights(answer.multipliers))
    scores = combined(model.rows, weights, n)
    return Face(
        multipliers=multipliers_of(model.rows, weights, model.names),
        scores=dict(zip(model.names, scores, strict=True)),
        stuck=stuck,
        on_face=tuple(name for name in model.names if stuck.get(name) != "zero"),
    )


def _varying(model: OrderModel) -> list[tuple[int, Literal["lower", "upper"]]]:
    """The bounds that a lot's share could leave if there were no limits."""
    tops = [ONE if bound is None else bound for bound in model.upper]
    low_sum, top_sum = sum(model.lower, ZERO), sum(tops, ZERO)
    varying: list[tuple[int, Literal["lower", "upper"]]] = []
    for i, (low, top) in enumerate(zip(model.lower, tops, strict=True)):
        least, most = max(low, ONE - (top_sum - top)), min(top, ONE - (low_sum - low))
        if least == most:
            continue
        if least == low:
            varying.append((i, "lower"))
        if model.upper[i] is not None and most == top:
            varying.append((i, "upper"))
    return varying


face_of = answered(ask_face)


def _free_program(model: OrderModel, free: Sequence[tuple[int, Literal["lower", "upper"]]]) -> Program | None:
    """Amounts in which every share that can vary is above 0; None where other bounds than 0 would have to be left."""
    varying = {i for i, _ in free}
    if any(model.lower) or any(top != 0 for i, top in enumerate(model.upper) if top is not None or i not in varying):
        return None
    entries = amount_rows(model).entries
    n = len(model.lots)
    return Program(
        rows=tuple(entry.terms for entry in entries),
        row_low=tuple(entry.low for entry in entries),
        row_high=tuple(entry.high for entry in entries),
        lower=tuple(ONE if i in varying else ZERO for i in range(n)),
        upper=tuple(None if i in varying else ZERO for i in range(n)),
        cost=(ZERO,) * n,
    )


def _with_all(program: Program, count: int) -> Program:
    """The program with its first columns held at 1: every share leaves its bound in one blend."""
    ones = (ONE,) * count
    return replace(program, lower=(*ones, *program.lower[count:]), cost=(ZERO,) * len(program.cost))


def _face_program(model: OrderModel, free: Sequence[tuple[int, Literal["lower", "upper"]]]) -> Program:
    """Columns: t for each entry of ``free``, then the excess s of each lot, λ, and the gaps of upper bounds."""
    n = len(model.lots)
    uppers = [i for i in range(n) if model.upper[i] is not None]
    entries = amount_rows(model).entries
    width = len(free) + n + 1 + len(uppers)
    lam = len(free) + n

    def spread(vector: Sequence[Fraction]) -> list[Fraction]:
        """A row over lots' amounts as a row over the columns (x_i = lower_i·λ + t_i + s_i)."""
        row = [ZERO] * width
        for column, (i, side) in enumerate(free):
            if side == "lower":
                row[column] = vector[i]
        row[len(free) : lam] = vector
        row[lam] = sum((a * low for a, low in zip(vector, model.lower, strict=True)), ZERO)
        return row

    rows: list[Vector] = [tuple(spread(entry.terms)) for entry in entries]
    low: list[Bound] = [entry.low for entry in entries]
    high: list[Bound] = [entry.high for entry in entries]
    total = spread((ONE,) * n)
    total[lam] -= ONE
    rows.append(tuple(total))
    for k, i in enumerate(uppers):
        # upper·λ − x − (gap + t) = 0
        row = [-value for value in spread(tuple(ONE if j == i else ZERO for j in range(n)))]
        row[lam] += model.upper[i] or ZERO
        row[lam + 1 + k] = -ONE
        for column, (j, side) in enumerate(free):
            if j == i and side == "upper":
                row[column] = -ONE
        rows.append(tuple(row))
    equal = [ZERO] * (1 + len(uppers))
    ones = len(free)
    return Program(
        rows=tuple(rows),
        row_low=(*low, *equal),
        row_high=(*high, *equal),
        lower=(ZERO,) * width,
        upper=(*((ONE,) * ones), *((None,) * (width - ones))),
        cost=(*((-ONE,) * ones), *((ZERO,) * (width - ones))),
    )
