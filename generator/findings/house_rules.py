"""House rules as they bear on one order: most lots, least share of a used lot, materials kept apart."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from itertools import combinations

from generator.intake.patterns import matches
from generator.intake.records import Campaign, Lot

MAX_LOTS = "max_lots"
LEAST_IF_USED = "least_if_used"


@dataclass(frozen=True, slots=True)
class Apart:
    """Two patterns of a keep_apart list, and the positions of the order's lots that match each."""

    first: str
    second: str
    first_lots: frozenset[int]
    second_lots: frozenset[int]

    @property
    def name(self) -> str:
        """The rule as pages name it."""
        return f"keep_apart: {self.first} from {self.second}"

    def sides(self) -> tuple[tuple[frozenset[int], str], tuple[frozenset[int], str]]:
        """The lots of each pattern, and the pattern."""
        return (self.first_lots, self.first), (self.second_lots, self.second)


@dataclass(frozen=True, slots=True)
class Rules:
    """The house rules as they bear on one order's n lots; ``least`` has n entries."""

    apart: tuple[Apart, ...]
    max_lots: int | None
    least: tuple[Fraction | None, ...]

    def names(self) -> tuple[str, ...]:
        """The rules that are set, as pages name them."""
        return (
            *(pair.name for pair in self.apart),
            *([MAX_LOTS] if self.max_lots is not None else []),
            *([LEAST_IF_USED] if any(self.least) else []),
        )

    def without(self, name: str) -> Rules:
        """All rules but the named one."""
        return Rules(
            tuple(pair for pair in self.apart if pair.name != name),
            None if name == MAX_LOTS else self.max_lots,
            (None,) * len(self.least) if name == LEAST_IF_USED else self.least,
        )

    def without_lot(self, gone: int) -> Rules:
        """The rules when one of the order's lots is taken away: positions behind it move up."""

        def moved(lots: frozenset[int]) -> frozenset[int]:
            return frozenset(i - (i > gone) for i in lots if i != gone)

        apart = tuple(
            Apart(pair.first, pair.second, moved(pair.first_lots), moved(pair.second_lots)) for pair in self.apart
        )
        return Rules(apart, self.max_lots, self.least[:gone] + self.least[gone + 1 :])

    def only_apart(self) -> Rules:
        """The safety rule alone: for answers in which a lot's amount has no meaning."""
        return Rules(self.apart, None, (None,) * len(self.least))


def apart_pairs(campaign: Campaign) -> tuple[tuple[str, str], ...]:
    """Every two patterns of each keep_apart list, in the order they are written."""
    pairs = (pair for patterns in campaign.house.keep_apart for pair in combinations(patterns, 2))
    return tuple(dict.fromkeys(pairs))


def holds_both(campaign: Campaign, lot: Lot) -> tuple[str, str] | None:
    """The two patterns kept apart that one lot matches both, or None."""
    for first, second in apart_pairs(campaign):
        if matches(first, lot) and matches(second, lot):
            return first, second
    return None


def is_kept(campaign: Campaign, names: Sequence[str]) -> bool:
    """Whether no two of these lots are kept apart."""
    lots = [campaign.lot(name) for name in names]
    return not any(
        any(matches(first, lot) for lot in lots) and any(matches(second, lot) for lot in lots)
        for first, second in apart_pairs(campaign)
    )


def rules_of(campaign: Campaign, lots: Sequence[Lot]) -> Rules:
    """The house rules for the n usable lots of one order."""

    def matching(pattern: str) -> frozenset[int]:
        return frozenset(i for i, lot in enumerate(lots) if matches(pattern, lot))

    every = [Apart(p, q, matching(p), matching(q)) for p, q in apart_pairs(campaign)]
    house = campaign.house
    least = []
    for lot in lots:
        typed = lot.least_if_used.value if lot.least_if_used else None
        own = [value for value in (house.least_if_used, typed) if value]
        least.append(max(own) if own else None)
    most = house.max_lots if house.max_lots is not None and house.max_lots < len(lots) else None
    return Rules(tuple(pair for pair in every if pair.first_lots and pair.second_lots), most, tuple(least))


def breach(rules: Rules, names: Sequence[str], shares: Mapping[str, Fraction]) -> str | None:
    """The name of a rule that shares by lot break, or None: what is shown is checked with this."""
    used = frozenset(i for i, name in enumerate(names) if shares.get(name))
    for pair in rules.apart:
        if used & pair.first_lots and used & pair.second_lots:
            return pair.name
    if rules.max_lots is not None and len(used) > rules.max_lots:
        return MAX_LOTS
    for i in used:
        least = rules.least[i]
        if least is not None and shares[names[i]] < least:
            return LEAST_IF_USED
    return None
