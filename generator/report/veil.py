"""What one audience may not see, and what things are called for it.

A :class:`Veil` is made from the campaign as read, before anything is taken out of it; redaction and
pages ask it, and nothing else, what is hidden.
"""

from __future__ import annotations

import re
from collections.abc import Mapping
from dataclasses import dataclass, field, replace
from functools import cached_property
from itertools import count

from generator.findings.house_rules import apart_pairs
from generator.intake.patterns import matches
from generator.intake.records import Campaign, Lot
from generator.problems import HullbookError

INTERNAL = "internal"
CLIENT = "client"

#: Fields of a lot that every basis but "as received" is computed from.
CARRIERS = frozenset({"moisture", "LOI", "density", "molar mass"})
#: Shown where a reason would tell what is hidden.
NOT_ON_OFFER = "not on offer"
#: More lots than this, behind one pattern, are counted instead of named.
_MOST_NAMED = 3


class EditionError(HullbookError):
    """An edition or a client that the campaign does not know.

    The text says which there are, for the one at the keyboard; ``what`` does not, for pages.
    """

    def __init__(self, what: str, known: str) -> None:
        super().__init__(f"{what}; {known}")
        self.what = what


@dataclass(frozen=True)
class Veil:
    """What is hidden, under which name each lot is shown, and which orders are shown at all.

    ``hidden`` are names as in ``hide``; ``lots`` maps every lot's name to the shown one; ``patterns`` are
    texts of rules that would tell a real name; ``client`` "" shows every client's orders.
    """

    hidden: frozenset[str] = frozenset()
    lots: Mapping[str, str] = field(default_factory=dict)
    patterns: Mapping[str, str] = field(default_factory=dict)
    client: str = ""
    is_internal: bool = True

    @property
    def is_clear(self) -> bool:
        """Whether everything is shown as it is."""
        return self.is_internal and not self.client

    def hides(self, *names: str) -> bool:
        """Whether one of these inputs is hidden."""
        return not self.hidden.isdisjoint(names)

    def lot(self, name: str) -> str:
        """What a lot is called."""
        return self.lots.get(name, name)

    def text(self, words: str) -> str:
        """A text with every lot's real name replaced, where it stands as a word of its own."""
        if self._real_names is None:
            return words
        return self._real_names.sub(lambda match: self._shown[match.group(0)], words)

    def shows_client(self, client: str) -> bool:
        """Whether the orders of this client are shown."""
        return not self.client or _same(client, self.client)

    @cached_property
    def renamed(self) -> Mapping[str, str]:
        """The lots whose real name is not shown."""
        return {name: shown for name, shown in self.lots.items() if name != shown}

    @cached_property
    def _shown(self) -> Mapping[str, str]:
        return {**self.patterns, **self.renamed}

    @cached_property
    def _real_names(self) -> re.Pattern[str] | None:
        if not self._shown:
            return None
        longest_first = sorted(self._shown, key=lambda name: (-len(name), name))
        return re.compile(rf"(?<![\w-])(?:{'|'.join(map(re.escape, longest_first))})(?![\w-])")


def editions_of(campaign: Campaign) -> tuple[str, ...]:
    """The names of the editions that a campaign can be built in."""
    return (INTERNAL, *dict.fromkeys([CLIENT, *campaign.settings.hidden]))


def veil_of(campaign: Campaign, edition: str = INTERNAL, client: str = "") -> Veil:
    """What an edition hides of a campaign, and a client of its orders; EditionError if it knows neither."""
    if edition not in editions_of(campaign):
        raise EditionError(f"no edition is called {edition!r}", f"there are {', '.join(editions_of(campaign))}")
    clients = dict.fromkeys(order.client for order in campaign.orders if order.client)
    spelled = next((known for known in clients if _same(client, known)), "")
    if client and not spelled:
        known_clients = f"there are {', '.join(clients)}" if clients else "no order names a client"
        raise EditionError(f"no order is for the client {client!r}", known_clients)
    if edition == INTERNAL:
        return Veil(lots={lot.name: lot.name for lot in campaign.lots}, client=spelled)
    lots = _shown_names(campaign.lots)
    hidden = {*campaign.settings.hidden.get(edition, ()), "remarks"}
    hidden |= {
        derived.name
        for derived in campaign.derived
        for form in (derived.numerator, derived.denominator)
        if form is not None and any(name in hidden for name, _ in form.terms)
    }
    return Veil(
        hidden=frozenset(hidden),
        lots=lots,
        patterns=_telling_patterns(campaign, lots),
        client=spelled,
        is_internal=False,
    )


def apart_lots(campaign: Campaign) -> tuple[tuple[str, str], ...]:
    """Every two lots that the house rules keep apart, by their real names."""
    pairs = {
        frozenset((one.name, other.name)): (one.name, other.name)
        for first, second in apart_pairs(campaign)
        for one in campaign.lots
        if matches(first, one)
        for other in campaign.lots
        if other is not one and matches(second, other)
    }
    return tuple(pairs.values())


def _shown_names(lots: tuple[Lot, ...]) -> dict[str, str]:
    """Each lot's alias, else its name; a name that two lots would share gets a number."""
    taken = {lot.name for lot in lots if not lot.alias}
    shown: dict[str, str] = {}
    for lot in lots:
        if not lot.alias:
            shown[lot.name] = lot.name
            continue
        numbered = (lot.alias if number == 1 else f"{lot.alias} ({number})" for number in count(1))
        shown[lot.name] = next(name for name in numbered if name not in taken)
        taken.add(shown[lot.name])
    return shown


def _telling_patterns(campaign: Campaign, lots: Mapping[str, str]) -> dict[str, str]:
    """Patterns of rules that match the real name of a lot with an alias, and what is said instead."""
    patterns = {pattern for pair in apart_pairs(campaign) for pattern in pair}
    told = {}
    for pattern in sorted(patterns):
        by_name = [
            lot for lot in campaign.lots if lots[lot.name] != lot.name and matches(pattern, _nameless(lot, lot.name))
        ]
        by_material = [lot for lot in campaign.lots if matches(pattern, _nameless(lot, ""))]
        if by_name and not by_material:
            matching = [lots[lot.name] for lot in campaign.lots if matches(pattern, lot)]
            more = len(matching) - _MOST_NAMED
            told[pattern] = ", ".join(matching[:_MOST_NAMED]) + (f" and {more} more" if more > 0 else "")
    return told


def _nameless(lot: Lot, name: str) -> Lot:
    """A lot with this name; without materials where it has one."""
    return replace(lot, name=name, materials=() if name else lot.materials)


def _same(one: str, other: str) -> bool:
    return one.strip().casefold() == other.strip().casefold()
