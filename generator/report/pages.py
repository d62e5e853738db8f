"""Answers become files: every page of a campaign, the index, the method page, and what they load.

Pure functions from records to bytes; addresses are paths below the output folder.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass

from markupsafe import Markup

from generator import __version__
from generator.findings.records import OrderFinding
from generator.intake.records import Lot
from generator.report import addresses, words
from generator.report.campaign_view import campaign_sections, problems_section, record_sections, verdict_counts
from generator.report.lookup import Lookup, lookup_of
from generator.report.lot_view import lot_facts, lot_sections, lot_sentence
from generator.report.notes import rendered
from generator.report.order_view import order_facts, order_sections
from generator.report.parts import Fact, Section
from generator.report.planes import Planes
from generator.report.themes import Theme
from generator.report.views import CampaignPages, IndexEntry
from generator.report.wholes import Wholes

INDEX = "index.html"
METHOD = "method.html"


@dataclass(frozen=True, slots=True, kw_only=True)
class Link:
    """A word and where it leads."""

    text: str
    href: str


@dataclass(frozen=True, slots=True, kw_only=True)
class Page:
    """What every template receives: where the page stands, its lead, its sections."""

    title: str
    lead: str
    style: str
    method: str
    crumbs: tuple[Link, ...]
    version: str
    kind: str
    verdict: str = ""
    verdict_word: str = ""
    verdict_meaning: str = ""
    previous: Link | None = None
    following: Link | None = None
    facts: tuple[Fact, ...] = ()
    banner: Section | None = None
    sections: tuple[Section, ...] = ()
    closing: tuple[Section, ...] = ()
    notes: Markup | None = None
    cautions: tuple[str, ...] = ()
    revision: str = ""
    data: str = ""


@dataclass(frozen=True, slots=True, kw_only=True)
class IndexRow:
    """A campaign on the index as its template receives it."""

    title: str
    href: str
    counts: tuple[tuple[str, str, int], ...]
    in_words: str
    recorded: str
    headline: str
    trouble: str
    is_stopped: bool


def draw_campaign(book: CampaignPages, theme: Theme) -> dict[str, bytes]:
    """Every page of a campaign by address; a problem page alone where it has no answers at all.

    The campaign page links to ``SLUG/results.json``, which the caller adds.
    """
    if book.campaign.is_stopped:
        return {f"{book.campaign.slug}/{INDEX}": _encoded(theme, "problem.html", _problem_page(book, theme))}
    lookup = lookup_of(book)
    planes, wholes = Planes(lookup), Wholes(lookup)
    files = {lookup.home: _encoded(theme, "campaign.html", _campaign_page(lookup, planes, wholes, theme))}
    findings = [finding for finding in book.findings.orders if finding.order in lookup.order_addresses]
    for position, finding in enumerate(findings):
        page = _order_page(lookup, planes, wholes, theme, findings, position)
        files[lookup.order_addresses[finding.order]] = _encoded(theme, "order.html", page)
    for position, lot in enumerate(book.campaign.lots):
        page = _lot_page(lookup, theme, book.campaign.lots, position)
        files[lookup.lot_addresses[lot.name]] = _encoded(theme, "lot.html", page)
    return files


def draw_index(entries: Iterable[IndexEntry], theme: Theme, version: str = __version__) -> bytes:
    """The index of all campaigns, in the order given."""
    rows = tuple(_index_row(entry) for entry in entries)
    page = Page(
        title="Campaigns",
        lead=_index_lead(rows),
        style=addresses.relative(INDEX, theme.style_address),
        method=METHOD,
        crumbs=(),
        version=version,
        kind="index",
    )
    return theme.render("index.html", page=page, rows=rows).encode()


def draw_method(theme: Theme, version: str = __version__) -> bytes:
    """The page that tells how each number is made."""
    page = Page(
        title="Method",
        lead="How each number on these pages is made, and what it does not say.",
        style=addresses.relative(METHOD, theme.style_address),
        method=METHOD,
        crumbs=(Link(text="Campaigns", href=INDEX),),
        version=version,
        kind="method",
        cautions=(*words.CAUTIONS, words.CAUTION_APART, words.CAUTION_APART_EMPTY),
    )
    verdicts = [(verdict, words.VERDICT_WORDS[verdict], words.VERDICT_MEANINGS[verdict]) for verdict in words.VERDICTS]
    return theme.render("method.html", page=page, verdicts=verdicts).encode()


def assets(theme: Theme) -> dict[str, bytes]:
    """What pages load, named by content."""
    return {theme.style_address: theme.style.encode()}


def _encoded(theme: Theme, template: str, page: Page) -> bytes:
    return theme.render(template, page=page).encode()


def _index_lead(rows: Sequence[IndexRow]) -> str:
    if not rows:
        return "There is no campaign yet: copy a folder with assays.csv and targets.csv into the campaigns folder."
    stopped = sum(1 for row in rows if row.is_stopped)
    lead = words.plural(len(rows), "campaign")
    return f"{lead}, {stopped} of them stopped by a problem." if stopped else f"{lead}."


def _index_row(entry: IndexEntry) -> IndexRow:
    failing = sum(1 for problem in entry.problems if problem.severity != "note")
    return IndexRow(
        title=entry.title,
        href=addresses.relative(INDEX, f"{entry.slug}/{INDEX}"),
        counts=tuple((v, words.VERDICT_WORDS[v], entry.counts[v]) for v in words.VERDICTS if entry.counts.get(v)),
        in_words=words.counts_in_words(entry.counts) or "no answers",
        recorded=words.moment(entry.recorded),
        headline=entry.headline,
        trouble=words.plural(failing, "problem") if failing else "",
        is_stopped=entry.is_stopped,
    )


def _problem_page(book: CampaignPages, theme: Theme) -> Page:
    address = f"{book.campaign.slug}/{INDEX}"
    section = problems_section(book.campaign.problems)
    return Page(
        title=book.campaign.settings.title,
        lead="This campaign has no answers yet: its input has problems that stop it.",
        style=addresses.relative(address, theme.style_address),
        method=addresses.relative(address, METHOD),
        crumbs=(Link(text="Campaigns", href=addresses.relative(address, INDEX)),),
        version=book.version,
        kind="problem",
        sections=(section,) if section else (),
    )


def _campaign_page(lookup: Lookup, planes: Planes, wholes: Wholes, theme: Theme) -> Page:
    book = lookup.book
    findings = book.findings
    counts = verdict_counts(findings.orders)
    return Page(
        title=book.campaign.settings.title,
        lead=words.summary(findings, counts, book.campaign.has_stock),
        style=addresses.relative(lookup.home, theme.style_address),
        method=addresses.relative(lookup.home, METHOD),
        crumbs=(Link(text="Campaigns", href=addresses.relative(lookup.home, INDEX)),),
        version=book.version,
        kind="campaign",
        banner=_banner(book),
        sections=campaign_sections(lookup, planes, wholes),
        closing=record_sections(lookup),
        notes=Markup(rendered(book.campaign.notes)) if book.campaign.notes.strip() else None,  # noqa: S704  (made harmless)
        cautions=_cautions(lookup),
        revision=_revision(book),
        data="results.json",
    )


def _order_page(
    lookup: Lookup, planes: Planes, wholes: Wholes, theme: Theme, findings: Sequence[OrderFinding], position: int
) -> Page:
    finding = findings[position]
    address = lookup.order_addresses[finding.order]
    verdict = finding.verdict or "none"

    def neighbour(step: int) -> Link | None:
        if not 0 <= position + step < len(findings):
            return None
        name = findings[position + step].order
        return Link(text=f"Order {name}", href=addresses.relative(address, lookup.order_addresses[name]))

    return Page(
        title=f"Order {finding.order}",
        lead=finding.sentence,
        style=addresses.relative(address, theme.style_address),
        method=addresses.relative(address, METHOD),
        crumbs=_crumbs(lookup, address),
        version=lookup.book.version,
        kind="order",
        verdict=verdict,
        verdict_word=words.VERDICT_WORDS[verdict],
        verdict_meaning=words.VERDICT_MEANINGS[verdict],
        previous=neighbour(-1),
        following=neighbour(1),
        facts=order_facts(lookup, finding),
        banner=_banner(lookup.book),
        sections=order_sections(lookup, planes, wholes, finding, address),
        cautions=_cautions(lookup),
        revision=_revision(lookup.book),
    )


def _lot_page(lookup: Lookup, theme: Theme, lots: Sequence[Lot], position: int) -> Page:
    lot = lots[position]
    address = lookup.lot_addresses[lot.name]

    def neighbour(step: int) -> Link | None:
        if not 0 <= position + step < len(lots):
            return None
        name = lots[position + step].name
        return Link(text=f"Lot {name}", href=addresses.relative(address, lookup.lot_addresses[name]))

    return Page(
        title=f"Lot {lot.name}",
        lead=lot_sentence(lookup, lot),
        style=addresses.relative(address, theme.style_address),
        method=addresses.relative(address, METHOD),
        crumbs=_crumbs(lookup, address),
        version=lookup.book.version,
        kind="lot",
        previous=neighbour(-1),
        following=neighbour(1),
        facts=lot_facts(lookup, lot),
        banner=_banner(lookup.book),
        sections=lot_sections(lookup, lot, address),
        revision=_revision(lookup.book),
    )


def _crumbs(lookup: Lookup, address: str) -> tuple[Link, ...]:
    return (
        Link(text="Campaigns", href=addresses.relative(address, INDEX)),
        Link(text=lookup.campaign.settings.title, href=addresses.relative(address, lookup.home)),
    )


def _banner(book: CampaignPages) -> Section | None:
    return problems_section(book.banner_problems, "banner")


def _cautions(lookup: Lookup) -> tuple[str, ...]:
    apart = words.CAUTION_APART if lookup.campaign.house.keep_apart else words.CAUTION_APART_EMPTY
    return (*words.CAUTIONS, apart)


def _revision(book: CampaignPages) -> str:
    if not book.revisions:
        return ""
    last = book.revisions[-1]
    return f"Revision {last.number}, recorded {words.moment(last.recorded)}, digest {last.digest[:12]}"
