"""A choice among columns: a program in which only few of them may be used, each enough, some never together.

What may be used is told by boxes: some columns are out (held at 0), some are in (they count as used, and reach
their least), the others are open.  The searches in ``branching`` and ``selecting`` close boxes that can't hold
anything better than what is known, by bounds with proven rounding errors; what they leave goes to exact arithmetic.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from generator.geometry.program import Bound, Program
from generator.geometry.stack import Floats, Stack, doubtful, scaled, stack_of

Marks = NDArray[np.int8]
Apart = tuple[tuple[frozenset[int], frozenset[int]], ...]

#: What a search knows of a column in a box.
FREE, IN, OUT = 0, 1, 2


@dataclass(frozen=True, slots=True)
class Box:
    """Columns held out and columns counted in, out of the n that are chosen among."""

    out: frozenset[int] = frozenset()
    inside: frozenset[int] = frozenset()

    def marks(self, n: int) -> Marks:
        """The same as marks, (n,)."""
        marks = np.zeros(n, dtype=np.int8)
        marks[sorted(self.out)] = OUT
        marks[sorted(self.inside)] = IN
        return marks

    @staticmethod
    def of(marks: Marks) -> Box:
        """The box of such marks."""
        return Box(
            frozenset(np.flatnonzero(marks == OUT).tolist()),
            frozenset(np.flatnonzero(marks == IN).tolist()),
        )


@dataclass(frozen=True)
class Choice:
    """minimise the program over the points that use at most ``most`` (None: any number) of its first n columns,
    each used one at its ``least`` or above, and of every pair in ``apart`` one side not at all.

    ``least`` has n entries: parts of 1, or with ``is_relative`` parts of the sum of the n columns, which are then
    amounts; else the n columns are shares that sum to 1.  All n are at least 0.  The program's columns after them
    need bounds on both sides for anything to be proven.
    """

    program: Program
    least: tuple[Bound, ...]
    most: int | None
    apart: Apart
    is_relative: bool = False

    @property
    def n(self) -> int:
        """How many columns are chosen among."""
        return len(self.least)

    @cached_property
    def stack(self) -> Stack:
        """The program as floats of about 1 (one program, its scales in ``scales``)."""
        return scaled(stack_of([self.program]))[0]

    @cached_property
    def unit(self) -> tuple[float, float]:
        """What a scaled share, and a scaled value, is worth in the program's own numbers."""
        scales = scaled(stack_of([self.program]))[1]
        return float(scales.x[0]), float(scales.x[0] / scales.cost[0])

    @cached_property
    def parts(self) -> Floats:
        """The least parts as floats, 0 where none: (n,)."""
        return np.array([0.0 if least is None else float(least) for least in self.least])

    @cached_property
    def is_sound(self) -> bool:
        """Whether bounds that are equal as floats are equal in truth, in every box: else floats prove nothing."""
        program = self.program
        if bool(doubtful([program], stack_of([program]))[0]):
            return False
        return self.is_relative or all(
            least is None or top is None or least == top or float(least) != float(top)
            for least, top in zip(self.least, program.upper, strict=False)
        )


@dataclass(frozen=True, slots=True)
class Left:
    """What a search leaves: boxes that may hold a point better than, or as good as, the best one known.

    ``value``: some allowed point costs no more (inf: none is known); ``best``: a box that holds it.
    ``is_done``: the boxes are as small as the search makes them; else it ran out of steps.  ``is_cut``: a point was
    found that will do, and only its box is given.  ``steps``: linear programs solved.
    """

    boxes: tuple[Box, ...]
    best: Box | None
    value: float
    is_done: bool
    steps: int
    is_cut: bool = False


def closed_box(used: Sequence[int], n: int) -> Box:
    """The box of the points that use these columns and no others."""
    inside = frozenset(used)
    return Box(frozenset(range(n)) - inside, inside)
