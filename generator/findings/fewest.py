"""The fewest lots that make an order, and of as few the cheapest, with the house rules kept.

It only says which lots, in floats; their shares are decided exactly afterwards.
"""

from __future__ import annotations

from generator.findings.model import OrderModel
from generator.findings.programs import ONE, capped_upper, share_rows

#: Branch-and-bound nodes, counted so that the same input gives the same lots; and seconds, a last guard.
NODES, SECONDS = 5000, 60.0
#: Where a lot's cost is unknown it counts as so many times the dearest known one: used last.
UNKNOWN_COST = 100


def fewest_lots(model: OrderModel, most: int) -> frozenset[int] | None:
    """Positions of the lots: fewest first, then cheapest; None where none are found, at most so many."""
    import numpy as np

    from generator.geometry.supports import Shares, TooManyError, fewest_columns

    n = len(model.lots)
    entries = share_rows(model).entries
    apart = np.zeros((n, n), dtype=np.bool_)
    for pair in model.rules.apart:
        for i in pair.first_lots:
            apart[i, sorted(pair.second_lots)] = apart[sorted(pair.second_lots), i] = True
    shares = Shares(
        rows=np.array([[float(term) for term in entry.terms] for entry in entries]).reshape(len(entries), n),
        low=np.array([-np.inf if entry.low is None else float(entry.low) for entry in entries]),
        high=np.array([np.inf if entry.high is None else float(entry.high) for entry in entries]),
        lower=np.array([float(max(low, own or 0)) for low, own in zip(model.lower, model.rules.least, strict=True)]),
        upper=np.array([1.0 if top is None else float(min(top, ONE)) for top in capped_upper(model, model.amount)]),
        cost=np.array(_costs(model)),
        forced=np.array([low > 0 for low in model.lower]),
        apart=apart,
    )
    try:
        found = fewest_columns(shares, most)
    except TooManyError:
        return _searched(model)
    return None if found is None else frozenset(found)


def _costs(model: OrderModel) -> list[float]:
    known = [float(cost) for cost in model.cost if cost is not None]
    dearest = max(known, default=1.0) or 1.0
    return [dearest * UNKNOWN_COST if cost is None else float(cost) for cost in model.cost]


def _searched(model: OrderModel) -> frozenset[int] | None:
    """The same as a mixed-integer program, for more lots than can be gone through."""
    from generator.geometry.mixed import Mixed, SparseRow, search

    n = len(model.lots)
    inf = float("inf")
    rows = [SparseRow(dict.fromkeys(range(n), 1.0), 1.0, 1.0)]
    for entry in share_rows(model).entries:
        low = -inf if entry.low is None else float(entry.low)
        high = inf if entry.high is None else float(entry.high)
        rows.append(SparseRow({i: float(term) for i, term in enumerate(entry.terms) if term}, low, high))
    uppers = [1.0 if top is None else float(min(top, ONE)) for top in capped_upper(model, model.amount)]
    for i, top in enumerate(uppers):
        least = float(max(model.lower[i], model.rules.least[i] or 0))
        rows.append(SparseRow({i: 1.0, n + i: -top}, -inf, 0.0))
        rows.append(SparseRow({i: 1.0, n + i: -least}, 0.0, inf))
        if model.lower[i]:
            rows.append(SparseRow({n + i: 1.0}, 1.0, 1.0))
    for pair in model.rules.apart:
        rows += [
            SparseRow({n + i: 1.0, n + j: 1.0}, -inf, 1.0)
            for i in sorted(pair.first_lots)
            for j in sorted(pair.second_lots)
        ]
    counted = [0.0] * n + [1.0] * n
    upper = [*uppers, *counted[n:]]
    whole = frozenset(range(n, 2 * n))
    first = search(Mixed(cost=counted, upper=upper, rows=rows, whole=whole), nodes=NODES, seconds=SECONDS)
    if first.x is None:
        return None
    rows.append(SparseRow({n + i: 1.0 for i in range(n)}, -inf, float(round(first.x[n:].sum()))))
    cheapest = Mixed(cost=[*_costs(model), *([0.0] * n)], upper=upper, rows=rows, whole=whole)
    second = search(cheapest, nodes=NODES, seconds=SECONDS)
    x = first.x if second.x is None else second.x
    return frozenset(i for i in range(n) if x[n + i] > 0.5)
