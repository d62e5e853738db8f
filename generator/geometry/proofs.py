"""Blocking proofs that read well: few rows, small whole weights.

The multipliers that prove a program empty form an open convex cone for each choice of rows and
sides.  A solver hands over a vertex of it, which is seldom nice; here are smaller supports and simpler
members of the cone, each checked exactly.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass
from fractions import Fraction
from itertools import combinations, islice
from math import comb, gcd

from generator.geometry.bland import exact_simplex
from generator.geometry.checks import proves_infeasible
from generator.geometry.elimination import cleared, coprime
from generator.geometry.program import Infeasible, Optimum, Program, Unbounded, Vector

#: Subsets of up to three rows that may be looked at: all those of 30 rows.
SUBSETS = 5000
#: Subsets of more rows that may be looked at: all those of 8 rows.
LARGE_SUBSETS = 256
#: Supports of the fewest rows whose weights are compared.
ALTERNATIVES = 6
#: Weight vectors tried in order of their sum before multiples of a middle one are rounded.
WEIGHTS = 400
#: The greatest weight that rounding may lead to before a proof is simplified row by row.
GREATEST_ROUNDED = 400


def tidy(multipliers: Vector) -> Vector:
    """The same direction in the smallest whole numbers; zeros stay as they are."""
    numerators, _ = cleared(multipliers)
    return tuple(Fraction(value) for value in coprime(numerators))


def simplest(holds: Callable[[Fraction], bool], inside: Fraction) -> Fraction:
    """The simplest positive fraction for which ``holds``, true on an interval that contains ``inside``.

    Simplest: least numerator and least denominator at once.  Descends the Stern–Brocot tree (R. L.
    Graham, D. E. Knuth, O. Patashnik, Concrete Mathematics, 4.5), whole runs in one direction at a time.
    """
    left, right = (0, 1), (1, 0)
    while True:
        rising = _stepped(left, right, 1) < inside
        near, far = (left, right) if rising else (right, left)
        steps = _run(holds, inside, near, far, rising)
        found = _stepped(near, far, steps)
        if holds(found):
            return found
        near = near[0] + (steps - 1) * far[0], near[1] + (steps - 1) * far[1]
        far = near[0] + far[0], near[1] + far[1]
        left, right = (near, far) if rising else (far, near)


def _stepped(near: tuple[int, int], far: tuple[int, int], steps: int) -> Fraction:
    """The fraction that so many steps of one run lead to, from ``near`` towards ``far``."""
    return Fraction(near[0] + steps * far[0], near[1] + steps * far[1])


def _run(
    holds: Callable[[Fraction], bool], inside: Fraction, near: tuple[int, int], far: tuple[int, int], rising: bool
) -> int:
    """The steps until a run comes into the interval or jumps over it."""

    def ends(steps: int) -> bool:
        here = _stepped(near, far, steps)
        return (here >= inside if rising else here <= inside) or holds(here)

    return _first(ends)


def _first(claim: Callable[[int], bool]) -> int:
    """The least number from 1 on for which a claim holds that, once true, stays true."""
    high = 1
    while not claim(high):
        high *= 2
    low = high // 2
    while high - low > 1:
        middle = (low + high) // 2
        low, high = (low, middle) if claim(middle) else (middle, high)
    return high


def fewest_rows(program: Program, infeasible: Infeasible, uncounted: Sequence[int] = ()) -> Infeasible:
    """A proof on as few rows as can be found, with small coprime whole weights on them.

    ``uncounted`` rows (such as "the shares sum to 1") may be used freely and take whatever weight
    serves.  The number of other rows is the least possible where it is at most 3 (of at most 30
    rows with bounds) and where there are at most 8 rows with bounds; else no row can be dropped from the
    proof, so that it has at most as many as the rank of the rows + 1.  A proof that needs none of them
    comes back with weight 0 on all.  Raises ValueError where ``infeasible`` proves nothing.
    """
    search = _Search(program, tuple(sorted(set(uncounted))))
    if not proves_infeasible(program, infeasible):
        raise ValueError("the multipliers given prove nothing")
    nothing = Infeasible((Fraction(0),) * len(program.rows))
    if proves_infeasible(program, nothing):
        return nothing
    start = tuple(k for k in search.counted if infeasible.multipliers[k])
    supports = search.smallest(search.irreducible(start))
    proofs = [search.simplified(support) for support in supports]
    return min(proofs, key=lambda proof: sum(abs(proof.multipliers[k]) for k in search.counted))


@dataclass(frozen=True, slots=True)
class _Support:
    """Rows that together cannot be met, and multipliers (for all rows of the program) that prove it."""

    rows: tuple[int, ...]
    multipliers: Vector


class _Search:
    """Subsets of rows of one program: which can be met (with a point kept to tell), which not."""

    def __init__(self, program: Program, uncounted: tuple[int, ...]) -> None:
        self.program = program
        self.uncounted = uncounted
        self.counted = tuple(
            k
            for k, (low, high) in enumerate(zip(program.row_low, program.row_high, strict=True))
            if k not in uncounted and (low is not None or high is not None)
        )
        self._met: list[frozenset[int]] = []

    def blocked(self, rows: tuple[int, ...]) -> _Support | None:
        """The subset with its proof if it cannot be met; None if it can."""
        if any(met.issuperset(rows) for met in self._met):
            return None
        kept = tuple(sorted((*rows, *self.uncounted)))
        answer = exact_simplex(_restricted(self.program, kept))
        if isinstance(answer, Infeasible):
            multipliers = [Fraction(0)] * len(self.program.rows)
            for k, weight in zip(kept, answer.multipliers, strict=True):
                multipliers[k] = weight
            return _Support(tuple(k for k in rows if multipliers[k]), tuple(multipliers))
        self._met.append(frozenset(k for k in self.counted if _meets(self.program, k, answer.x)))
        return None

    def irreducible(self, rows: tuple[int, ...]) -> _Support:
        """A subset of these blocked rows from which none can be dropped."""
        support = self.blocked(rows)
        assert support is not None
        for row in support.rows:
            if row in support.rows:
                smaller = self.blocked(tuple(k for k in support.rows if k != row))
                support = smaller or support
        return support

    def smallest(self, known: _Support) -> list[_Support]:
        """Supports of the least size, in order of their rows; ``known`` alone where the search would be long."""
        looked_at = 0
        for size in range(len(known.rows) + 1):
            looked_at += comb(len(self.counted), size)
            if looked_at > (SUBSETS if size <= 3 else LARGE_SUBSETS):
                break
            found = list(islice(filter(None, map(self.blocked, combinations(self.counted, size))), ALTERNATIVES))
            if found:
                return found
        return [known]

    def simplified(self, support: _Support) -> Infeasible:
        """The support's proof with the simplest weights that are found."""
        cone = _Cone(self.program, self.uncounted, support)
        return cone.proof(cone.simple_weights())


def _restricted(program: Program, rows: tuple[int, ...]) -> Program:
    """The program with these rows only, any feasible point wanted."""
    return Program(
        rows=tuple(program.rows[k] for k in rows),
        row_low=tuple(program.row_low[k] for k in rows),
        row_high=tuple(program.row_high[k] for k in rows),
        lower=program.lower,
        upper=program.upper,
        cost=(Fraction(0),) * len(program.cost),
    )


def _product(row: Vector, x: Vector) -> Fraction:
    return sum((a * v for a, v in zip(row, x, strict=True) if v and a), Fraction(0))


def _meets(program: Program, k: int, x: Vector) -> bool:
    value, low, high = _product(program.rows[k], x), program.row_low[k], program.row_high[k]
    return (low is None or value >= low) and (high is None or value <= high)


class _Cone:
    """The positive weights w on one support's rows for which Σ w·(breach) > 0 at every point.

    The points are those of the box that meet the uncounted rows; each weight vector that fails
    leaves the breaches at a point (or along a ray) where it fails, which spares later ones the solver.
    """

    def __init__(self, program: Program, uncounted: tuple[int, ...], support: _Support) -> None:
        self.program, self.uncounted, self.rows = program, uncounted, support.rows
        self.signs = [1 if support.multipliers[k] > 0 else -1 for k in support.rows]
        self.given = [abs(support.multipliers[k]) for k in support.rows]
        self._base = _restricted(program, uncounted)
        self._cuts: list[tuple[list[int], bool]] = []

    def simple_weights(self) -> list[Fraction]:
        """Small whole weights in the cone."""
        if len(self.rows) <= 1:
            return [Fraction(1)] * len(self.rows)
        if len(self.rows) > 2:
            for weights in islice(_by_sum(len(self.rows)), WEIGHTS):
                candidate = [Fraction(weight) for weight in weights]
                if self.holds(candidate):
                    return candidate
        middle = self._middle()
        return (self._rounded(middle) if len(self.rows) > 2 else None) or self._row_by_row(middle)

    def _rounded(self, weights: list[Fraction]) -> list[Fraction] | None:
        """The least multiple of the weights that still is a proof when rounded to whole numbers."""
        greatest = max(weights)
        for size in range(1, GREATEST_ROUNDED + 1):
            candidate = [Fraction(max(1, round(weight * size / greatest))) for weight in weights]
            if self.holds(candidate):
                return list(tidy(tuple(candidate)))
        return None

    def _row_by_row(self, weights: list[Fraction]) -> list[Fraction]:
        """Replace one weight after the other, against the first, by the simplest that keeps the proof."""
        weights = [weight / weights[0] for weight in weights]
        for i in range(1, len(weights)):

            def holds(value: Fraction, i: int = i) -> bool:
                return self.holds([*weights[:i], value, *weights[i + 1 :]])

            weights[i] = simplest(holds, weights[i])
        return list(tidy(tuple(weights)))

    def _middle(self) -> list[Fraction]:
        """Weights well inside the cone: those that prove the most, each row scaled to its greatest entry."""
        n = len(self.program.cost)
        kept = tuple(sorted((*self.rows, *self.uncounted)))
        base = _restricted(self.program, kept)
        sides = dict(zip(self.rows, self.signs, strict=True))
        give = [sides.get(k, 0) * (max(map(abs, self.program.rows[k]), default=Fraction(0)) or 1) for k in kept]
        relaxed = Program(
            rows=tuple((*row, Fraction(g)) for row, g in zip(base.rows, give, strict=True)),
            row_low=tuple(None if g < 0 else low for g, low in zip(give, base.row_low, strict=True)),
            row_high=tuple(None if g > 0 else high for g, high in zip(give, base.row_high, strict=True)),
            lower=(*base.lower, Fraction(0)),
            upper=(*base.upper, None),
            cost=(*(Fraction(0),) * n, Fraction(1)),
        )
        answer = exact_simplex(relaxed)
        if isinstance(answer, Optimum):
            weights = [abs(answer.multipliers[kept.index(k)]) for k in self.rows]
            if all(weights) and self.holds(weights):
                return weights
        return self.given

    def holds(self, weights: Sequence[Fraction]) -> bool:
        """Whether the weights (all positive) are a proof."""
        scaled, _ = cleared(weights)
        for breaches, is_ray in self._cuts:
            total = sum(w * b for w, b in zip(scaled, breaches, strict=True))
            if total < 0 or (total == 0 and not is_ray):
                return False
        answer = self._worst(weights)
        if isinstance(answer, Unbounded):
            rates = (_product(self.program.rows[k], answer.ray) for k in self.rows)
            self._cuts.append((cleared([-s * rate for s, rate in zip(self.signs, rates, strict=True)])[0], True))
            return False
        if isinstance(answer, Infeasible) or answer.value + self._bound(weights) > 0:
            return True
        short = [
            s * (self._side(k, s) - _product(self.program.rows[k], answer.x))
            for k, s in zip(self.rows, self.signs, strict=True)
        ]
        self._cuts.append((cleared(short)[0], False))
        return False

    def proof(self, weights: Sequence[Fraction]) -> Infeasible:
        """The multipliers of all rows: the weights, signed, and what the uncounted rows add."""
        multipliers = [Fraction(0)] * len(self.program.rows)
        answer = self._worst(weights)
        if not isinstance(answer, Unbounded):
            for k, weight in zip(self.uncounted, answer.multipliers, strict=True):
                multipliers[k] = weight
        for k, sign, weight in zip(self.rows, self.signs, weights, strict=True):
            multipliers[k] = sign * weight
        proof = Infeasible(tuple(multipliers))
        if not proves_infeasible(self.program, proof):
            raise ArithmeticError(f"weights {weights} on rows {self.rows} were wrongly taken for a proof")
        return proof

    def _worst(self, weights: Sequence[Fraction]) -> Optimum | Infeasible | Unbounded:
        """The point where the weighted breaches are least (up to the constant of ``_bound``)."""
        cost = [Fraction(0)] * len(self.program.cost)
        for k, sign, weight in zip(self.rows, self.signs, weights, strict=True):
            factor = sign * weight
            cost = [c - factor * a if a else c for c, a in zip(cost, self.program.rows[k], strict=True)]
        base = self._base
        return exact_simplex(
            Program(
                rows=base.rows,
                row_low=base.row_low,
                row_high=base.row_high,
                lower=base.lower,
                upper=base.upper,
                cost=tuple(cost),
            )
        )

    def _side(self, k: int, sign: int) -> Fraction:
        bound = self.program.row_low[k] if sign > 0 else self.program.row_high[k]
        assert bound is not None
        return bound

    def _bound(self, weights: Sequence[Fraction]) -> Fraction:
        return sum(
            (s * w * self._side(k, s) for k, s, w in zip(self.rows, self.signs, weights, strict=True)), Fraction(0)
        )


def _by_sum(size: int) -> Iterator[tuple[int, ...]]:
    """Positive whole vectors without a common factor, in order of their sum."""
    total = size
    while True:
        for cuts in combinations(range(1, total), size - 1):
            vector = tuple(b - a for a, b in zip((0, *cuts), (*cuts, total), strict=True))
            if gcd(*vector) == 1:
                yield vector
        total += 1
