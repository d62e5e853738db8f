"""The fewest lots that make an order: a small mixed-integer program, with the house rules in it.

It only says which lots; their shares are decided exactly afterwards.
"""

from __future__ import annotations

from generator.findings.model import OrderModel
from generator.findings.programs import ONE, capped_upper, share_rows

#: Branch-and-bound nodes, counted so that the same input gives the same lots.
NODES = 5000


def fewest_lots(model: OrderModel) -> frozenset[int]:
    """Positions of the lots: fewest first, then cheapest; all lots where the search finds nothing."""
    import numpy as np
    from scipy.optimize import Bounds, LinearConstraint, milp

    n = len(model.lots)
    upper = [float(min(top, ONE)) if top is not None else 1.0 for top in capped_upper(model, model.amount)]
    least = [float(max(low, share or 0)) for low, share in zip(model.lower, model.rules.least, strict=True)]
    constraints = [LinearConstraint(np.concatenate([np.ones(n), np.zeros(n)]), 1.0, 1.0)]
    for entry in share_rows(model).entries:
        terms = np.array([float(term) for term in entry.terms])
        # About 1 in size, as the solver's tolerances take it for granted.
        size = float(np.abs(terms).max(initial=0.0)) or 1.0
        low = -np.inf if entry.low is None else float(entry.low) / size
        high = np.inf if entry.high is None else float(entry.high) / size
        constraints.append(LinearConstraint(np.concatenate([terms / size, np.zeros(n)]), low, high))
    eye = np.eye(n)
    constraints.append(LinearConstraint(np.hstack([eye, -np.diag(upper)]), -np.inf, 0.0))
    constraints.append(LinearConstraint(np.hstack([eye, -np.diag(least)]), 0.0, np.inf))
    for pair in model.rules.apart:
        constraints += [
            LinearConstraint(np.concatenate([np.zeros(n), eye[i] + eye[j]]), -np.inf, 1.0)
            for i in sorted(pair.first_lots)
            for j in sorted(pair.second_lots)
        ]
    known = [float(cost) for cost in model.cost if cost is not None]
    dearest = max(known, default=1.0) or 1.0
    costs = np.array([dearest * 100 if cost is None else float(cost) for cost in model.cost])
    counted = np.concatenate([np.zeros(n), np.ones(n)])
    bounds = Bounds(np.zeros(2 * n), np.concatenate([np.array(upper), np.ones(n)]))
    integrality = np.concatenate([np.zeros(n), np.ones(n)])
    first = milp(
        counted,
        constraints=constraints,
        bounds=bounds,
        integrality=integrality,
        options={"node_limit": NODES, "mip_rel_gap": 0.0},
    )
    if first.x is None:
        return frozenset(range(n))
    count = round(float(first.x[n:].sum()))
    constraints.append(LinearConstraint(counted, -np.inf, count))
    second = milp(
        np.concatenate([costs, np.zeros(n)]),
        constraints=constraints,
        bounds=bounds,
        integrality=integrality,
        options={"node_limit": NODES, "mip_rel_gap": 0.0},
    )
    x = first.x if second.x is None else second.x
    return frozenset(i for i in range(n) if x[n + i] > 0.5)
