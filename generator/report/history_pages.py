"""History as files: the timeline, one page per revision, and which of them have to be drawn at all.

What was drawn once stays as it is: a page depends on its own revision, on its neighbours' names, and on the
look.  Groups of revisions that are closed have a page of their own, so that no page grows without end.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass

from generator import identity
from generator.disk import digest_of
from generator.history.archive import Entry
from generator.history.chronicle import Line, closed_groups, recent
from generator.report import addresses, words
from generator.report.history_trends import trend_figures
from generator.report.history_view import history_index, revision_address, revision_sections
from generator.report.page_records import Link, Page
from generator.report.pages import METHOD, dressed
from generator.report.parts import Fact, Section
from generator.report.themes import Theme
from generator.report.views import CampaignPages

_CAUSES = {"inputs": "edited input", "program version": "another version of the program"}


@dataclass(frozen=True, slots=True, kw_only=True)
class Shelf:
    """Where a history's lines come from, and what is published of it.

    ``entries`` are all revisions, oldest first; ``read`` reads one's line; ``published`` maps the addresses
    of pages that stand in the output to the keys they were drawn under.
    """

    entries: Sequence[Entry] = ()
    read: Callable[[Entry], Line]
    published: Mapping[str, str]


@dataclass(frozen=True, slots=True, kw_only=True)
class HistoryFiles:
    """Pages by address, the keys of all pages that need no drawing again, and those that stay as published."""

    files: Mapping[str, bytes]
    keys: Mapping[str, str]
    kept: tuple[str, ...]


@dataclass(frozen=True, slots=True, kw_only=True)
class TimelineItem:
    """One revision on the timeline as its template receives it."""

    number: int
    href: str
    recorded: str
    headline: str
    counts: tuple[tuple[str, str, int], ...]
    in_words: str
    is_damaged: bool


def draw_history(book: CampaignPages, theme: Theme, shelf: Shelf) -> HistoryFiles:
    """Every page of a campaign's history that is not published as it has to be."""
    if not shelf.entries:
        return HistoryFiles(files={}, keys={}, kept=())
    work = _Work(book, theme, shelf)
    work.revisions()
    work.groups()
    work.index()
    return HistoryFiles(files=work.files, keys=work.keys, kept=tuple(work.kept))


class _Work:
    """One drawing of a history."""

    def __init__(self, book: CampaignPages, theme: Theme, shelf: Shelf) -> None:
        self._book = book
        self._theme = theme
        self._shelf = shelf
        self._slug = book.campaign.slug
        settings = book.campaign.settings
        self._numbers = {entry.number for entry in shelf.entries}
        gaps = sorted(set(range(1, max(self._numbers) + 1)) - self._numbers)
        self._look = digest_of([theme.digest, identity.program(), self._slug, settings.title, book.version, gaps])
        self._lines: dict[str, Line] = {line.name: line for line in book.past}
        self.files: dict[str, bytes] = {}
        self.keys: dict[str, str] = {}
        self.kept: list[str] = []

    def revisions(self) -> None:
        """One page for each revision, with links to the ones beside it."""
        found = self._shelf.entries
        for position, entry in enumerate(found):
            before = found[position - 1] if position else None
            after = found[position + 1] if position + 1 < len(found) else None
            beside = [None if other is None else other.name for other in (before, entry, after)]
            address = revision_address(self._slug, entry.number)
            if not self._is_kept(address, digest_of([self._look, beside])):
                self._revision(address, self._line(entry), before, after)

    def groups(self) -> None:
        """One page for each closed group of revisions."""
        groups = closed_groups(self._shelf.entries)
        for position, group in enumerate(groups):
            address = _group_address(self._slug, group)
            older = groups[position - 1] if position else None
            newer = groups[position + 1] if position + 1 < len(groups) else None
            beside = [[entry.name for entry in other or ()] for other in (older, group, newer)]
            if not self._is_kept(address, digest_of([self._look, beside])):
                self._group(address, group, older, newer)

    def index(self) -> None:
        """The newest revisions, their trends, and the way to all groups."""
        address = history_index(self._slug)
        found, newest = self._shelf.entries, recent(self._shelf.entries)
        span = f"{words.plural(len(found), 'revision')}, the first of {words.moment(found[0].moment.isoformat())}"
        lead = f"{span}, the last of {words.moment(found[-1].moment.isoformat())}." if len(found) > 1 else f"{span}."
        if len(newest) < len(found):
            lead += f" The newest {len(newest)} stand here."
        links = tuple(
            Link(text=_group_title(group), href=addresses.relative(address, _group_address(self._slug, group)))
            for group in reversed(closed_groups(found))
        )
        self._timeline(address, "History", lead, newest, links=links)

    def _is_kept(self, address: str, key: str) -> bool:
        self.keys[address] = key
        if self._shelf.published.get(address) != key:
            return False
        self.kept.append(address)
        return True

    def _line(self, entry: Entry) -> Line:
        if entry.name not in self._lines:
            self._lines[entry.name] = self._shelf.read(entry)
        return self._lines[entry.name]

    def _revision(self, address: str, line: Line, before: Entry | None, after: Entry | None) -> None:
        lead = line.headline
        if line.damage:
            # Drawn again until it is mended, so it has no key.
            del self.keys[address]
            lead = f"This revision is damaged and not used: {line.damage}."
        facts = [Fact(name="Recorded", value=words.moment(line.recorded))]
        if line.digest:
            facts += [
                Fact(name="Recorded because of", value=_reason(line)),
                Fact(name="Program", value=line.program),
                Fact(name="Digest", value=line.digest[:12]),
            ]
        page = self._page(
            address,
            f"Revision {line.number}",
            lead,
            previous=self._link(address, before),
            following=self._link(address, after),
            facts=tuple(facts),
            sections=revision_sections(line),
            is_below=True,
        )
        others = self._others(address, line)
        text = self._theme.render("revision.html", page=dressed(page, self._theme), others=others)
        self.files[address] = text.encode()

    def _others(self, address: str, line: Line) -> tuple[Link, ...]:
        """The earlier revisions that this one is compared with, and the timeline."""
        further = line.story.comparisons[1:] if line.story else ()
        links = [
            Link(
                text=f"Revision {one.number}, {one.title}",
                href=addresses.relative(address, revision_address(self._slug, one.number)),
            )
            for one in further
            if one.number in self._numbers
        ]
        return (*links, Link(text="All revisions", href=addresses.relative(address, history_index(self._slug))))

    def _group(
        self, address: str, group: Sequence[Entry], older: Sequence[Entry] | None, newer: Sequence[Entry] | None
    ) -> None:
        span = f"From {words.moment(group[0].moment.isoformat())} to {words.moment(group[-1].moment.isoformat())}."
        following = (_group_address(self._slug, newer), _group_title(newer)) if newer else None
        if following is None:
            following = (history_index(self._slug), "Newest revisions")
        self._timeline(
            address,
            _group_title(group),
            span,
            group,
            previous=Link(text=_group_title(older), href=addresses.relative(address, _group_address(self._slug, older)))
            if older
            else None,
            following=Link(text=following[1], href=addresses.relative(address, following[0])),
        )

    def _timeline(
        self,
        address: str,
        title: str,
        lead: str,
        group: Sequence[Entry],
        *,
        links: tuple[Link, ...] = (),
        previous: Link | None = None,
        following: Link | None = None,
    ) -> None:
        lines = [self._line(entry) for entry in group]
        settings = self._book.campaign.settings
        money = f"{settings.currency} per {settings.quantity_unit}"
        figures = trend_figures(lines, money, settings.quantity_unit)
        sections = (Section(anchor="trends", title="Trends", figures=figures, layout="grid"),) if figures else ()
        page = self._page(
            address,
            title,
            lead,
            previous=previous,
            following=following,
            sections=sections,
            is_below=address != history_index(self._slug),
        )
        items = tuple(self._item(address, line) for line in reversed(lines))
        text = self._theme.render("history.html", page=dressed(page, self._theme), items=items, groups=links)
        self.files[address] = text.encode()

    def _item(self, address: str, line: Line) -> TimelineItem:
        points = line.story.summary.orders.values() if line.story else ()
        counted = [(kind, sum(point.verdict == kind for point in points)) for kind in words.VERDICTS]
        counts = tuple((kind, words.VERDICT_WORDS[kind], count) for kind, count in counted if count)
        return TimelineItem(
            number=line.number,
            href=addresses.relative(address, revision_address(self._slug, line.number)),
            recorded=words.moment(line.recorded),
            headline=f"Damaged: {line.damage}." if line.damage else line.headline,
            counts=counts,
            in_words=words.counts_in_words(dict(counted)),
            is_damaged=bool(line.damage),
        )

    def _link(self, address: str, entry: Entry | None) -> Link | None:
        if entry is None:
            return None
        target = revision_address(self._slug, entry.number)
        return Link(text=f"Revision {entry.number}", href=addresses.relative(address, target))

    def _page(
        self,
        address: str,
        title: str,
        lead: str,
        *,
        previous: Link | None,
        following: Link | None,
        is_below: bool,
        facts: tuple[Fact, ...] = (),
        sections: tuple[Section, ...] = (),
    ) -> Page:
        crumbs = [
            Link(text="Campaigns", href=addresses.relative(address, "index.html")),
            Link(
                text=self._book.campaign.settings.title,
                href=addresses.relative(address, f"{self._slug}/index.html"),
            ),
        ]
        if is_below:
            crumbs.append(Link(text="History", href=addresses.relative(address, history_index(self._slug))))
        return Page(
            title=title,
            lead=lead,
            style=addresses.relative(address, self._theme.style_address),
            method=addresses.relative(address, METHOD),
            crumbs=tuple(crumbs),
            version=self._book.version,
            kind="history",
            previous=previous,
            following=following,
            facts=facts,
            sections=sections,
        )


def _reason(line: Line) -> str:
    return "first answers" if line.number == 1 else _CAUSES.get(line.cause, line.cause)


def _group_address(slug: str, group: Sequence[Entry]) -> str:
    return f"{slug}/history/revisions-{group[0].number:04d}-{group[-1].number:04d}.html"


def _group_title(group: Sequence[Entry]) -> str:
    return f"Revisions {group[0].number} to {group[-1].number}"
