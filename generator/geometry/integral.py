"""A program in whole numbers: what every exact solver here works on."""

from __future__ import annotations

from dataclasses import dataclass, field
from fractions import Fraction
from math import lcm

from generator.geometry.elimination import cleared, common_denominator, whole
from generator.geometry.program import Program, Vector


@dataclass(frozen=True, slots=True)
class Integral:
    """m rows, n columns and m row slacks s = rows·z, all data whole numbers.

    ``z = unit·x`` stands for the program's x; row k is the program's times ``row_scale[k]``; ``cost``
    is the program's times ``cost_scale``.  ``floor`` and ``ceiling`` bound z and, after it, the
    slacks (n + m entries each, None for no bound).  Programs with crossed bounds stay crossed.
    """

    rows: list[list[int]]
    floor: list[int | None]
    ceiling: list[int | None]
    cost: list[int]
    unit: int
    row_scale: list[int]
    cost_scale: int

    def shares(self, numerators: list[int], denominator: int) -> Vector:
        """The program's x from z = numerators / denominator."""
        below = denominator * self.unit
        return tuple(Fraction(value, below) if value else Fraction(0) for value in numerators[: len(self.cost)])

    def multipliers(self, numerators: list[int], denominator: int) -> Vector:
        """The program's row multipliers from those of the whole-number rows."""
        below = denominator * self.cost_scale
        return tuple(Fraction(value * scale, below) for value, scale in zip(numerators, self.row_scale, strict=True))


@dataclass(slots=True)
class Memory:
    """Vectors that were brought to whole numbers before, by identity: programs of one order share their rows."""

    known: dict[int, tuple[Vector, list[int], int]] = field(default_factory=dict)

    def cleared(self, vector: Vector) -> tuple[list[int], int]:
        """As :func:`generator.geometry.elimination.cleared`; the list is not to be changed."""
        kept = self.known.get(id(vector))
        if kept is None:
            # the vector is kept as well, so that no other one can take its place in storage
            kept = self.known[id(vector)] = (vector, *cleared(vector))
        return kept[1], kept[2]


def integral(program: Program, memory: Memory | None = None) -> Integral:
    """The program in whole numbers; ``memory`` spares the work on vectors that were seen before."""
    memory = memory or Memory()
    unit = common_denominator((*program.lower, *program.upper))
    rows: list[list[int]] = []
    row_scale: list[int] = []
    floor = [None if bound is None else whole(bound, unit) for bound in program.lower]
    ceiling = [None if bound is None else whole(bound, unit) for bound in program.upper]
    for row, low, high in zip(program.rows, program.row_low, program.row_high, strict=True):
        values, own = memory.cleared(row)
        scale = lcm(own, common_denominator((low, high)))
        rows.append(values if scale == own else [value * (scale // own) for value in values])
        row_scale.append(scale)
        floor.append(None if low is None else whole(low, scale) * unit)
        ceiling.append(None if high is None else whole(high, scale) * unit)
    cost, cost_scale = memory.cleared(program.cost)
    return Integral(rows, floor, ceiling, cost, unit, row_scale, cost_scale)


def rest(form: Integral, column: int, at_upper: bool) -> int:
    """Where a non-basic column or slack rests: the bound named, else the one there is, else 0."""
    floor, ceiling = form.floor[column], form.ceiling[column]
    if ceiling is not None and (at_upper or floor is None):
        return ceiling
    return 0 if floor is None else floor
