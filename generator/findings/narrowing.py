"""What the house rules leave open of a question, once most branches are closed by bounds.

A question is told as a program; ``geometry`` closes the branches that hold no better answer than one that is
known, in floats with proven error bounds.  What is left, most often one branch, is asked about exactly by
``house``, which has the last word.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from fractions import Fraction

from generator.findings.ask import Asking, ask_all_best
from generator.findings.house_rules import Rules
from generator.findings.programs import ZERO
from generator.geometry.choice import Box, Choice, Left
from generator.geometry.program import Program, Unbounded, Vector

#: Boxes searched before every set of lots is gone through instead, and those after which a question is given up.
FIRST, MOST = 400, 8_000
#: So few branches are asked about as they are, though a further aim could tell them apart.
FEW = 3


@dataclass(frozen=True, slots=True)
class Guide:
    """A question as a program whose first n columns are the order's lots.

    ``aims`` are least in turn, over the first columns (none: any point will do); the first of them is entry
    ``place`` of an offer's key.  ``in_amounts``: the lots' columns are amounts, not shares that sum to 1.
    """

    program: Program
    aims: tuple[Vector, ...]
    place: int = 0
    in_amounts: bool = False


def ask_open_boxes(guide: Guide, rules: Rules, floor: Fraction | None) -> Asking[tuple[Box, ...] | None]:
    """The boxes that may hold the best answer within the rules, the most promising first; None if undecided.

    ``floor``: no answer is less by the first aim (None where that is not known).
    """
    boxes: tuple[Box, ...] = (Box(),)
    if not guide.aims:
        left = _searched(_choice(guide, guide.program, rules), boxes, None, first_will_do=True)
        return None if left is None else left.boxes
    program = guide.program
    for aim in guide.aims:
        program = replace(program, cost=(*aim, *((ZERO,) * (len(program.cost) - len(aim)))))
        choice = _choice(guide, program, rules)
        left = _searched(choice, boxes, floor)
        if left is not None and left.is_cut and left.best is not None:
            if (yield from _ask_values(choice, [left.best])) == [floor] and floor is not None:
                # As good as without the rules: this aim tells nothing apart.
                if len(guide.aims) == 1:
                    return (left.best,)
                program, floor = _held_at(program, aim, floor), None
                continue
            left = _searched(choice, boxes, None)
        if left is None:
            return None
        boxes, floor = left.boxes, None
        n_open = sum(len(box.out) + len(box.inside) < choice.n for box in boxes)
        if left.best is None or (len(boxes) <= FEW and not n_open):
            break
        (value, *others) = yield from _ask_values(choice, (left.best, *boxes))
        if not isinstance(value, Fraction) or any(other is not None and other < value for other in others):
            # Floats took for equal what is not.
            return (left.best, *(box for box in boxes if box != left.best))
        if len(guide.aims) == 1:
            return (left.best,)
        boxes = tuple(box for box, other in zip(boxes, others, strict=True) if other == value)
        program = _held_at(program, aim, value)
    return boxes


def paths_to_closed(guide: Guide, rules: Rules, most: int) -> list[list[Box]] | None:
    """The boxes from the whole order to each branch without any point, where these exhaust the rules; else None."""
    from generator.geometry.branching import closed_paths

    paths = closed_paths(_choice(guide, guide.program, rules), nodes=2 * most)
    if paths is None or len(paths) > most:
        return None
    return [[Box.of(marks) for marks in path] for path in paths]


def _choice(guide: Guide, program: Program, rules: Rules) -> Choice:
    apart = tuple((pair.first_lots, pair.second_lots) for pair in rules.apart)
    return Choice(program, rules.least, rules.max_lots, apart, guide.in_amounts)


def _searched(
    choice: Choice, boxes: Sequence[Box], floor: Fraction | None, *, first_will_do: bool = False
) -> Left | None:
    """What a search leaves of the boxes; None where it comes to no end."""
    from generator.geometry.branching import branch
    from generator.geometry.selecting import select

    least = float("-inf") if floor is None else float(floor)
    left = branch(choice, boxes, floor=least, nodes=FIRST, first_will_do=first_will_do)
    if left.is_done:
        return left
    chosen = select(choice, boxes, known=left.value, floor=least, steps=MOST, first_will_do=first_will_do)
    if chosen is not None:
        return chosen if chosen.best is not None else replace(chosen, best=left.best)
    left = branch(choice, boxes, known=left.value, floor=least, nodes=MOST, first_will_do=first_will_do)
    return left if left.is_done else None


def _ask_values(choice: Choice, boxes: Sequence[Box]) -> Asking[list[Fraction | float | None]]:
    """The exact least value in each box: None where it holds no point, −inf where it has no least value."""
    from generator.geometry.branching import program_of

    replies = yield from ask_all_best([program_of(choice, box) for box in boxes])
    return [
        float("-inf") if isinstance(reply, Unbounded) else None if reply is None else reply.value for reply in replies
    ]


def _held_at(program: Program, aim: Vector, value: Fraction) -> Program:
    """The program with the aim at most that value."""
    row = (*aim, *((ZERO,) * (len(program.cost) - len(aim))))
    return program.at_most([row], value)
