"""Holds the program's findings for a drawn campaign against the oracle; every fault is a sentence."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from fractions import Fraction

from generator.findings.records import BlockingProof, Findings, Multiplier, OrderFinding, RecipeProof
from tests.findings import oracle
from tests.findings.drawing import Drawn, DrawnOrder
from tests.findings.making import answers

ZERO = Fraction(0)


def findings_of(drawn: Drawn) -> Findings:
    """The program's answers to a drawn campaign, through its CSV text."""
    return answers(drawn.assays(), drawn.targets(), drawn.settings())


def faults(drawn: Drawn) -> list[str]:
    """What is wrong with the program's answers; empty if all is right."""
    findings = findings_of(drawn)
    return [
        f"O{k}: {fault}"
        for k, (order, finding) in enumerate(zip(drawn.orders, findings.orders, strict=True))
        for fault in order_faults(drawn, order, finding)
    ]


def row(drawn: Drawn, lots: Sequence[int], name: str, side: str, bound: Fraction) -> list[Fraction]:
    """The homogeneous row of one limit side, from the numbers as drawn."""
    parts = [drawn.parts(name, i) for i in lots]
    return [bound * d - n if side == "low" else n - bound * d for n, d in parts]


def order_faults(drawn: Drawn, order: DrawnOrder, finding: OrderFinding) -> list[str]:
    """The faults of one order's answer."""
    lots = [i for i in range(len(drawn.values)) if not (drawn.stock and drawn.stock[i] == 0) and drawn.upper[i] != 0]
    names = [f"L{i}" for i in lots]
    tops = [Fraction(1) if drawn.upper[i] is None else drawn.upper[i] for i in lots]
    if not lots or sum(drawn.lower[i] for i in lots) > 1 or sum(tops) < 1:
        return [] if finding.verdict is None else ["a verdict where the share bounds admit nothing"]
    windows = {name: window for name, window in order.windows.items() if window != (None, None)}
    rows = [
        (row(drawn, lots, name, side, bound), ZERO, name)
        for name, (low, high) in windows.items()
        for side, bound in (("low", low), ("high", high))
        if bound is not None
    ]
    bounds = []
    for k, i in enumerate(lots):
        unit = [Fraction(int(j == k)) for j in range(len(lots))]
        bounds.append(([drawn.lower[i] - u for u in unit], ZERO))
        bounds.append(([u - tops[k] for u in unit], ZERO))
    within_bounds = oracle.shares(len(lots), bounds)
    every = oracle.clip_all(within_bounds, [(a, b) for a, b, _ in rows])
    found: list[str] = []
    if "ratio" in windows and any(_dot(p, [drawn.parts("ratio", i)[1] for i in lots]) == 0 for p in every):
        return [] if finding.verdict is None else ["a verdict where the denominator can vanish"]
    if finding.verdict is None:
        return [f"no verdict: {finding.sentence}"]
    greatest = None
    if drawn.stock:
        caps = [Fraction(drawn.stock[i]) for i in lots]
        greatest = max(sum(p, ZERO) for p in oracle.amounts(caps, [*((a, b) for a, b, _ in rows), *bounds]))
    expected = _verdict(order, every, within_bounds, greatest, drawn, lots, tops)
    if finding.verdict != expected:
        return [f"verdict {finding.verdict}, expected {expected}"]
    found += _proof_faults(drawn, lots, names, windows, finding, tops)
    if drawn.stock and expected != "unreachable" and finding.greatest_amount != float(greatest or 0):
        found.append(f"greatest amount {finding.greatest_amount}, expected {greatest}")
    if expected in ("makeable", "edge"):
        points = every
        if drawn.stock and order.amount:
            caps_rows = []
            for k, i in enumerate(lots):
                unit = [Fraction(int(j == k)) for j in range(len(lots))]
                caps_rows.append((unit, Fraction(drawn.stock[i], order.amount)))
            points = oracle.clip_all(every, caps_rows)
        least = min(_dot(p, [Fraction(drawn.cost[i]) for i in lots]) for p in points)
        if finding.recipes["cheapest"].cost != float(least):
            found.append(f"cost {finding.recipes['cheapest'].cost}, expected {least}")
    for limit in finding.limits:
        others = oracle.clip_all(within_bounds, [(a, b) for a, b, name in rows if name != limit.on])
        found += _range_faults(drawn, lots, limit.on, limit.attainable, others)
    return found


def _verdict(
    order: DrawnOrder,
    every: oracle.Vertices,
    within_bounds: oracle.Vertices,
    greatest: Fraction | None,
    drawn: Drawn,
    lots: Sequence[int],
    tops: Sequence[Fraction],
) -> str:
    if not every:
        return "unreachable"
    if greatest is not None and order.amount is not None and greatest < order.amount:
        return "short"
    for k, i in enumerate(lots):
        shares = {p[k] for p in every}
        could = {p[k] for p in within_bounds}
        ends = {drawn.lower[i]} | ({tops[k]} if drawn.upper[i] is not None else set())
        if len(shares) == 1 and len(could) > 1 and shares <= ends:
            return "edge"
    return "makeable"


def _range_faults(
    drawn: Drawn,
    lots: Sequence[int],
    name: str,
    attainable: tuple[float | None, float | None] | None,
    points: oracle.Vertices,
) -> list[str]:
    if not points:
        return [] if attainable is None else [f"{name} has a range though the others block"]
    parts = [drawn.parts(name, i) for i in lots]
    ratios = [(_dot(p, [n for n, _ in parts]), _dot(p, [d for _, d in parts])) for p in points]
    if any(d == 0 for _, d in ratios):
        return []  # an end without bound is tested by hand: the oracle reads ratios off points only
    values = [n / d for n, d in ratios]
    if attainable != (float(min(values)), float(max(values))):
        return [f"{name} attains {attainable}, expected {min(values)} to {max(values)}"]
    return []


def _proof_faults(
    drawn: Drawn,
    lots: Sequence[int],
    names: Sequence[str],
    windows: Mapping[str, tuple[Fraction | None, Fraction | None]],
    finding: OrderFinding,
    tops: Sequence[Fraction],
) -> list[str]:
    proof = finding.proof
    if isinstance(proof, BlockingProof):
        scores, fault = _scores(drawn, lots, windows, proof.multipliers)
        if fault:
            return [fault]
        least = _least(scores, [drawn.lower[i] for i in lots], tops)
        if list(proof.scores.values()) != scores or list(proof.scores) != list(names):
            return ["the printed scores are not the sums of the rows"]
        bounded = any(drawn.lower[i] for i in lots) or any(drawn.upper[i] is not None for i in lots)
        if least <= 0 or (bounded and proof.least != least) or (not bounded and proof.least is not None):
            return [f"a blocking proof with the least score {least}, printed {proof.least}"]
        if len(proof.multipliers) > len(drawn.values[0]) + 1 and not bounded:
            return ["a blocking proof of more limits than components + 1"]
        return []
    if not isinstance(proof, RecipeProof):
        return ["no proof"]
    shares = [proof.shares.get(name, ZERO) for name in names]
    found = []
    if sum(shares) != 1 or any(share < 0 for share in shares) or set(proof.shares) - set(names):
        found.append(f"shares {proof.shares} are none")
    for name, (low, high) in windows.items():
        for side, bound in (("low", low), ("high", high)):
            if bound is not None and _dot(shares, row(drawn, lots, name, side, bound)) > 0:
                found.append(f"the recipe breaks {name} {side}")
    for k, i in enumerate(lots):
        if not drawn.lower[i] <= shares[k] <= tops[k]:
            found.append(f"the share of L{i} leaves its bounds")
    if (finding.verdict == "short") != (proof.cap is not None):
        found.append("a cap goes with short and with nothing else")
    if proof.cap is not None and drawn.stock:
        spent = sum((w * drawn.stock[int(name[1:])] for name, w in proof.cap.stock_weights.items()), ZERO)
        if spent != proof.cap.greatest or any(w < 0 for w in proof.cap.stock_weights.values()):
            found.append("the cap's weights don't add up to the greatest amount")
    if (finding.verdict == "edge") != (proof.face is not None):
        found.append("a face goes with edge and with nothing else")
    return found


def _scores(
    drawn: Drawn,
    lots: Sequence[int],
    windows: Mapping[str, tuple[Fraction | None, Fraction | None]],
    multipliers: Sequence[Multiplier],
) -> tuple[list[Fraction], str]:
    scores = [ZERO] * len(lots)
    seen = set()
    for m in multipliers:
        low, high = windows[m.on]
        if m.side == "exact":
            if low != high:
                return scores, f"side exact on a limit {m.on} that is not"
            bound = low
        else:
            bound = low if m.side == "low" else high
            if m.weight <= 0 or low == high:
                return scores, f"weight {m.weight} on side {m.side} of {m.on}"
        if bound is None or bound != m.bound or m.on in seen:
            return scores, f"a multiplier on a side of {m.on} that there is not"
        seen.add(m.on)
        terms = row(drawn, lots, m.on, m.side, bound)
        if list(m.terms.values()) != terms:
            return scores, f"the printed terms of {m.on} are not its row"
        scores = [score + m.weight * term for score, term in zip(scores, terms, strict=True)]
    return scores, ""


def _least(scores: Sequence[Fraction], lower: Sequence[Fraction], tops: Sequence[Fraction]) -> Fraction:
    bounds = []
    for k, (low, top) in enumerate(zip(lower, tops, strict=True)):
        unit = [Fraction(int(j == k)) for j in range(len(scores))]
        bounds += [([-u for u in unit], -low), (unit, top)]
    return min(_dot(p, scores) for p in oracle.shares(len(scores), bounds))


def _dot(one: Sequence[Fraction], other: Sequence[Fraction]) -> Fraction:
    return sum((a * b for a, b in zip(one, other, strict=True)), ZERO)
