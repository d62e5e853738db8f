"""The last resort: a simplex method in whole numbers that always ends.

Bounded variables, two phases, a tableau of whole numbers over one denominator (integer pivoting:
J. Edmonds 1967; each entry is a minor of the input).  While the objective moves, the column with
the steepest price enters; while it stalls, R. G. Bland's rule (New finite pivoting rules for the
simplex method, Mathematics of Operations Research 2, 1977) takes the first column that helps and the
first row that blocks, under which no basis comes back.
"""

from __future__ import annotations

from fractions import Fraction

from generator.geometry.integral import Integral, integral, rest
from generator.geometry.program import Answer, Basis, Infeasible, Optimum, Program, Unbounded


def exact_simplex(program: Program, form: Integral | None = None) -> Answer:
    """Decide the program; every answer is a basic one.  ``form`` is ``integral(program)`` if at hand."""
    form = form or integral(program)
    if _is_crossed(form):
        return Infeasible((Fraction(0),) * len(form.rows))
    tableau = _Tableau(form)
    tableau.minimise(tableau.breaches)
    if tableau.total_breach() > 0:
        n, m = len(form.cost), len(form.rows)
        weights = tableau.breaches[n : n + m]
        return Infeasible(tuple(Fraction(y * s) for y, s in zip(weights, form.row_scale, strict=True)))
    tableau.drop_artificials()
    entering = tableau.minimise(tableau.prices)
    if entering is not None:
        return Unbounded(tableau.x(), tableau.ray(*entering))
    return tableau.optimum(program)


def _is_crossed(form: Integral) -> bool:
    return any(
        floor is not None and ceiling is not None and floor > ceiling
        for floor, ceiling in zip(form.floor, form.ceiling, strict=True)
    )


class _Tableau:
    """Columns: the n of the program, its m slacks, then one artificial for each row not yet met.

    Row i says: denominator·z[basic[i]] + Σ entries[i][j]·z[j] over non-basic j is constant;
    ``values[i]`` is denominator·z[basic[i]].  ``breaches`` and ``prices`` are the reduced costs of the
    two phases times the denominator.
    """

    def __init__(self, form: Integral) -> None:
        n, m = len(form.cost), len(form.rows)
        self.form = form
        self.floor = list(form.floor)
        self.ceiling = list(form.ceiling)
        self.real = n + m
        self.resting = [rest(form, column, at_upper=False) for column in range(n + m)]
        self.denominator = 1
        self.entries = [[-a for a in row] + [int(k == i) for i in range(m)] for k, row in enumerate(form.rows)]
        self.basic = list(range(n, n + m))
        self.values = [sum(a * z for a, z in zip(row, self.resting, strict=False) if z) for row in form.rows]
        self._start()
        self.prices = [*form.cost, *[0] * (len(self.floor) - n)]
        artificial = [i for i, column in enumerate(self.basic) if column >= self.real]
        self.breaches = [-sum(self.entries[i][j] for i in artificial) for j in range(len(self.floor))]
        for i in artificial:
            self.breaches[self.basic[i]] = 0

    def _start(self) -> None:
        """Put each broken row's slack at the bound it breaks, and an artificial in its place."""
        for i, slack in enumerate(self.basic):
            value, floor, ceiling = self.values[i], self.floor[slack], self.ceiling[slack]
            if floor is not None and value < floor:
                bound = floor
            elif ceiling is not None and value > ceiling:
                bound = ceiling
            else:
                continue
            self.resting[slack] = bound
            if value < bound:
                self.entries[i] = [-a for a in self.entries[i]]
            self.basic[i] = len(self.floor)
            self.values[i] = abs(value - bound)
            for k, row in enumerate(self.entries):
                row.append(int(k == i))
            self.floor.append(0)
            self.ceiling.append(None)
            self.resting.append(0)

    def total_breach(self) -> int:
        """The sum of the artificials, times the denominator."""
        return sum(value for column, value in zip(self.basic, self.values, strict=True) if column >= self.real)

    def minimise(self, prices: list[int]) -> tuple[int, int] | None:
        """Pivot to the least of one phase; the column and direction of an endless fall, if there is one."""
        stalled = False
        while True:
            entering = self._entering(prices, first=stalled)
            if entering is None:
                return None
            column, direction = entering
            row, reach, over = self._blocking(column, direction)
            if over == 0:
                return entering
            stalled = reach == 0
            if row is None:
                self._flip(column)
            else:
                self._pivot(row, column, self._bound_reached(row, column, direction))

    def _entering(self, prices: list[int], first: bool) -> tuple[int, int] | None:
        """A column whose move lowers the objective, and its direction; artificials never come back."""
        best, best_price = None, 0
        for column in range(self.real):
            price = prices[column]
            if abs(price) <= best_price:
                continue
            floor, ceiling, value = self.floor[column], self.ceiling[column], self.resting[column]
            if price < 0 and (ceiling is None or value < ceiling):
                best = column, 1
            elif price > 0 and (floor is None or value > floor):
                best = column, -1
            else:
                continue
            if first:
                return best
            best_price = abs(price)
        return best

    def _bound_reached(self, row: int, column: int, direction: int) -> int:
        """The bound at which the row's basic variable stops, for a move of the column."""
        falls = self.entries[row][column] * direction > 0
        bound = self.floor[self.basic[row]] if falls else self.ceiling[self.basic[row]]
        assert bound is not None
        return bound

    def _blocking(self, column: int, direction: int) -> tuple[int | None, int, int]:
        """The row that stops the move first (None: the column's own other bound) and the length reach/over.

        ``over`` is 0 where nothing stops it.  Of rows that tie, the one with the least basic index.
        """
        row, reach, over = None, 0, 0
        floor, ceiling = self.floor[column], self.ceiling[column]
        if floor is not None and ceiling is not None:
            reach, over = ceiling - floor, 1
        for i, entries in enumerate(self.entries):
            rate = entries[column] * direction
            if not rate:
                continue
            bound = self.floor[self.basic[i]] if rate > 0 else self.ceiling[self.basic[i]]
            if bound is None:
                continue
            length, below = abs(self.values[i] - bound * self.denominator), abs(rate)
            left, right = length * over, reach * below
            if over == 0 or left < right or (left == right and row is not None and self.basic[i] < self.basic[row]):
                row, reach, over = i, length, below
        return row, reach, over

    def _flip(self, column: int) -> None:
        """Move a column from one of its bounds to the other."""
        floor, ceiling = self.floor[column], self.ceiling[column]
        assert floor is not None
        assert ceiling is not None
        target = ceiling if self.resting[column] == floor else floor
        moved = target - self.resting[column]
        self.values = [value - row[column] * moved for value, row in zip(self.values, self.entries, strict=True)]
        self.resting[column] = target

    def _pivot(self, row: int, column: int, bound: int) -> None:
        """Make the column basic in the row; what was basic there comes to rest at the bound."""
        pivot_row = self.entries[row]
        pivot, old = pivot_row[column], self.denominator
        slide = self.values[row] - old * bound
        for i, entries in enumerate(self.entries):
            if i == row:
                continue
            factor = entries[column]
            self.values[i] = (self.values[i] * pivot - factor * slide) // old
            self.entries[i] = _eliminated(entries, factor, pivot_row, pivot, old)
        self.prices[:] = _eliminated(self.prices, self.prices[column], pivot_row, pivot, old)
        self.breaches[:] = _eliminated(self.breaches, self.breaches[column], pivot_row, pivot, old)
        self.values[row] = pivot * self.resting[column] + slide
        self.resting[self.basic[row]] = bound
        self.basic[row] = column
        self.denominator = pivot
        if pivot < 0:
            self._turn_signs()

    def _turn_signs(self) -> None:
        """Make the common denominator positive."""
        self.denominator = -self.denominator
        self.values = [-value for value in self.values]
        self.entries = [[-a for a in row] for row in self.entries]
        self.prices[:] = [-price for price in self.prices]
        self.breaches[:] = [-price for price in self.breaches]

    def drop_artificials(self) -> None:
        """Trade each artificial still basic (at 0) for a real column; the point does not move.

        There always is one, since the slacks alone give the rows full rank.
        """
        for row, column in enumerate(self.basic):
            if column >= self.real:
                basic = set(self.basic)
                real = next(j for j in range(self.real) if self.entries[row][j] and j not in basic)
                self._pivot(row, real, bound=0)

    def numerators(self) -> list[int]:
        """denominator·z for the program's columns."""
        values = [z * self.denominator for z in self.resting[: len(self.form.cost)]]
        for column, value in zip(self.basic, self.values, strict=True):
            if column < len(values):
                values[column] = value
        return values

    def x(self) -> tuple[Fraction, ...]:
        """The present point of the program."""
        return self.form.shares(self.numerators(), self.denominator)

    def ray(self, column: int, direction: int) -> tuple[Fraction, ...]:
        """How the program's columns move with one unit of a non-basic column or slack."""
        moves = [Fraction(0)] * self.real
        moves[column] = Fraction(direction)
        for basic, row in zip(self.basic, self.entries, strict=True):
            moves[basic] = Fraction(-direction * row[column], self.denominator)
        return tuple(moves[: len(self.form.cost)])

    def optimum(self, program: Program) -> Optimum:
        """The present basis as an answer."""
        n = len(self.form.cost)
        x = self.x()
        value = sum((c * v for c, v in zip(program.cost, x, strict=True) if c and v), Fraction(0))
        basic = set(self.basic)
        at_upper = frozenset(
            j
            for j in range(self.real)
            if j not in basic and self.ceiling[j] is not None and self.resting[j] == self.ceiling[j] != self.floor[j]
        )
        multipliers = self.form.multipliers(self.prices[n : self.real], self.denominator)
        return Optimum(x, value, multipliers, Basis(tuple(sorted(basic)), at_upper))


def _eliminated(entries: list[int], factor: int, pivot_row: list[int], pivot: int, old: int) -> list[int]:
    if factor:
        return [(a * pivot - factor * b) // old for a, b in zip(entries, pivot_row, strict=True)]
    if pivot == old:
        return entries
    return [a * pivot // old if a else 0 for a in entries]
