"""House rules: most lots in a recipe, least share of a used lot, materials kept apart.

None of the three is linear; each is kept by branching.  A branch is the same order with some lots out
(greatest share 0) and some in (least share raised).  Whatever question has an answer on a branch has it
here within the rules: solve without them, find a rule that the answer breaks, split the order in two so
that neither half allows that breach, go on with both, and leave out halves that can't beat the best.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace
from fractions import Fraction
from typing import Generic, TypeVar

from generator.findings.ask import Asking
from generator.findings.house_rules import Rules
from generator.findings.model import OrderModel
from generator.findings.narrowing import Guide, ask_open_boxes, paths_to_closed
from generator.findings.programs import ONE, ZERO
from generator.geometry.choice import Box

T = TypeVar("T")

#: Branches looked at exactly for one question before it is given up as undecided.
MOST_BRANCHES = 4000
#: Branches looked at exactly before any are closed by bounds: most questions need no more.
FIRST_BRANCHES = 6


class UndecidedError(Exception):
    """The rules leave more branches than may be looked at."""


@dataclass(frozen=True, slots=True)
class Branch:
    """The order with some lots out and some in; ``path`` says what was decided, in words."""

    model: OrderModel
    inside: frozenset[int] = frozenset()
    path: tuple[str, ...] = ()

    def with_out(self, lots: frozenset[int], words: str) -> Branch:
        """The branch in which these lots are not used."""
        upper = tuple(ZERO if i in lots else top for i, top in enumerate(self.model.upper))
        return replace(self, model=replace(self.model, upper=upper), path=(*self.path, words))

    def with_in(self, lot: int, least: Fraction | None, words: str) -> Branch:
        """The branch in which this lot counts as used, with at least its least share."""
        lower = list(self.model.lower)
        lower[lot] = max(lower[lot], least or ZERO)
        model = replace(self.model, lower=tuple(lower))
        return replace(self, model=model, inside=self.inside | {lot}, path=(*self.path, words))

    def within(self, box: Box, rules: Rules) -> Branch:
        """The branch of a box: its lots out are not used, its lots in have their least share."""
        names = self.model.names
        branch = self
        if box.out:
            branch = branch.with_out(box.out, f"without {', '.join(names[i] for i in sorted(box.out))}")
        for i in sorted(box.inside):
            branch = branch.with_in(i, rules.least[i], f"with {names[i]}")
        return branch

    def holds(self, shares: Sequence[Fraction]) -> bool:
        """Whether the shares lie in the branch."""
        bounds = zip(self.model.lower, shares, self.model.upper, strict=True)
        return all(low <= share and (top is None or share <= top) for low, share, top in bounds)

    @property
    def is_empty(self) -> bool:
        """Whether the share bounds alone admit no shares."""
        tops = [ONE if top is None else top for top in self.model.upper]
        crossed = any(low > top for low, top in zip(self.model.lower, tops, strict=True))
        return crossed or sum(self.model.lower, ZERO) > 1 or sum(tops, ZERO) < 1


@dataclass(frozen=True, slots=True)
class Found(Generic[T]):
    """An answer within the rules, and the branch on which it is the best."""

    answer: T
    branch: Branch


@dataclass(frozen=True, slots=True)
class Offer(Generic[T]):
    """What a question answers on one branch: shares by position (n), and a key: less is better.

    The key bounds every answer further down the branch from below.
    """

    shares: Sequence[Fraction]
    key: tuple[Fraction, ...]
    answer: T


def ask_best_within(
    model: OrderModel,
    ask: Callable[[OrderModel], Asking[Offer[T] | None]],
    rules: Rules | None = None,
    guide: Guide | None = None,
    *,
    on_widest: bool = False,
) -> Asking[Found[T] | None]:
    """The best answer within the rules, where ``ask`` gives that of one branch; None if there is none.

    ``guide`` tells the question as a program, by which most branches are closed before anything is asked of
    them.  The branch found is then no wider than it takes, unless ``on_widest``: the first one, split by split
    from the whole order, on which the answer is the best.  UndecidedError past MOST_BRANCHES.
    """
    rules = rules or model.rules
    root = Branch(model)
    offer = yield from ask(model)
    if offer is None:
        return None
    waiting = split(root, rules, offer.shares)
    if not waiting:
        return Found(offer.answer, root)
    best, waiting = yield from _ask_best_of(waiting, ask, rules, MOST_BRANCHES if guide is None else FIRST_BRANCHES)
    if waiting and guide is not None:
        floor = offer.key[guide.place] if guide.place < len(offer.key) else None
        boxes = yield from ask_open_boxes(guide, rules, floor)
        if boxes is None:
            raise UndecidedError("more branches than may be looked at")
        narrow = [root.within(box, rules) for box in reversed(boxes)]
        best, waiting = yield from _ask_best_of(narrow, ask, rules, MOST_BRANCHES)
        if on_widest and best is not None and not waiting:
            return (yield from _ask_widest(root, ask, rules, best[0], Found(best[0].answer, best[1])))
    if waiting:
        raise UndecidedError(f"more than {MOST_BRANCHES} branches")
    return None if best is None else Found(best[0].answer, best[1])


def _ask_widest(
    branch: Branch,
    ask: Callable[[OrderModel], Asking[Offer[T] | None]],
    rules: Rules,
    best: Offer[T],
    found: Found[T],
) -> Asking[Found[T]]:
    """The answer on the first branch, split by split towards the best shares, whose own best it is."""
    while True:
        offer = yield from ask(branch.model)
        children = [] if offer is None else split(branch, rules, offer.shares)
        if offer is None or not children:
            return Found(offer.answer, branch) if offer is not None and offer.key == best.key else found
        towards = [child for child in children if child.holds(best.shares)]
        if not towards:
            return found
        branch = towards[-1]


def _ask_best_of(
    waiting: list[Branch], ask: Callable[[OrderModel], Asking[Offer[T] | None]], rules: Rules, most: int
) -> Asking[tuple[tuple[Offer[T], Branch] | None, list[Branch]]]:
    """The best offer on at most so many branches, the last one first, and the branches that are left."""
    best: tuple[Offer[T], Branch] | None = None
    for _ in range(most):
        if not waiting:
            break
        branch = waiting.pop()
        offer = None if branch.is_empty else (yield from ask(branch.model))
        if offer is None or (best is not None and offer.key >= best[0].key):
            continue
        children = split(branch, rules, offer.shares)
        if not children:
            best = (offer, branch)
        # The last one pushed is looked at first: the half that keeps the lots as they are.
        waiting.extend(children)
    return best, waiting


def ask_closed_branches(
    model: OrderModel, ask: Callable[[OrderModel], Asking[Offer[T] | None]], guide: Guide
) -> Asking[list[Branch]]:
    """Every branch on which ``ask`` finds nothing, where it finds nothing on any: they exhaust the rules."""
    paths = paths_to_closed(guide, model.rules, MOST_BRANCHES)
    if paths is not None:
        return [_along(model, path) for path in paths]
    closed: list[Branch] = []
    waiting = [Branch(model)]
    for _ in range(MOST_BRANCHES):
        if not waiting:
            return closed
        branch = waiting.pop()
        offer = None if branch.path and branch.is_empty else (yield from ask(branch.model))
        children = split(branch, model.rules, offer.shares) if offer else []
        if offer is None:
            closed.append(branch)
        assert offer is None or children, "no answer within the rules was found before"
        waiting.extend(children)
    raise UndecidedError(f"more than {MOST_BRANCHES} branches")


def _along(model: OrderModel, path: Sequence[Box]) -> Branch:
    """The branch that these boxes lead to, each inside the one before."""
    branch, before = Branch(model), Box()
    named = {lots: name for pair in model.rules.apart for lots, name in pair.sides()}
    for box in path:
        for i in sorted(box.inside - before.inside):
            branch = branch.with_in(i, model.rules.least[i], _words_in(model.names[i], model.rules.least[i]))
        gone = box.out - before.out
        if gone and len(box.out) + len(box.inside) == len(model.names):
            alone = ", ".join(model.names[i] for i in sorted(box.inside))
            branch = branch.with_out(gone, f"with {alone} alone" if alone else "without all others")
        elif gone:
            names = ", ".join(model.names[i] for i in sorted(gone))
            branch = branch.with_out(gone, f"without {named.get(gone, names)}")
        before = box
    return branch


def _words_in(name: str, least: Fraction | None) -> str:
    return f"with {name}" if least is None else f"{name} at least {float(least * 100):g} %"


def split(branch: Branch, rules: Rules, shares: Sequence[Fraction]) -> list[Branch]:
    """The halves of a branch by the first rule that the shares break; none if they break none."""
    used = frozenset(i for i, share in enumerate(shares) if share)
    names = branch.model.names
    for pair in rules.apart:
        if used & pair.first_lots and used & pair.second_lots:
            halves = [
                branch.with_out(pair.first_lots, f"without {pair.first}"),
                branch.with_out(pair.second_lots, f"without {pair.second}"),
            ]
            # The half that gives up less of these shares last, so that it is looked at first.
            lost = [sum((shares[i] for i in lots), ZERO) for lots in (pair.first_lots, pair.second_lots)]
            return halves if lost[0] > lost[1] else halves[::-1]
    for i in sorted(used):
        least = rules.least[i]
        if least is not None and shares[i] < least:
            return [
                branch.with_out(frozenset([i]), f"without {names[i]}"),
                _closed_to_others(branch.with_in(i, least, _words_in(names[i], least)), rules),
            ]
    if rules.max_lots is not None and len(used) > rules.max_lots:
        return _halves_by_count(branch, rules, used, shares)
    return []


def _closed_to_others(branch: Branch, rules: Rules) -> Branch:
    """The branch with all other lots out as soon as it has as many in as a recipe may have."""
    if rules.max_lots is None or len(branch.inside) < rules.max_lots:
        return branch
    names = branch.model.names
    others = frozenset(range(len(names))) - branch.inside
    return branch.with_out(others, f"with {', '.join(names[i] for i in sorted(branch.inside))} alone")


def _halves_by_count(branch: Branch, rules: Rules, used: frozenset[int], shares: Sequence[Fraction]) -> list[Branch]:
    """Split on the undecided lot of the greatest share: out, or in; with enough in, all others are out."""
    names = branch.model.names
    undecided = sorted(used - branch.inside, key=lambda i: (-shares[i], i))
    chosen = undecided[0]
    out = branch.with_out(frozenset([chosen]), f"without {names[chosen]}")
    inside = branch.with_in(chosen, rules.least[chosen], f"with {names[chosen]}")
    return [out, _closed_to_others(inside, rules)]
