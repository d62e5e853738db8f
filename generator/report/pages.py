"""Answers become files: every page of a campaign, the index, the method page, and what they load.

Pure functions from records to bytes; addresses are paths below the output folder.
"""

from __future__ import annotations

from collections import Counter
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, replace

from markupsafe import Markup

from generator import __version__
from generator.findings.records import OrderFinding
from generator.intake.records import Lot
from generator.report import addresses, words
from generator.report.batch_view import batch_card, card_addresses, card_facts, card_lead
from generator.report.campaign_view import (
    campaign_facts,
    campaign_sections,
    problems_section,
    record_sections,
    trouble_words,
    verdict_counts,
)
from generator.report.history_own import lot_history, order_history
from generator.report.lookup import Lookup, lookup_of
from generator.report.lot_view import lot_facts, lot_sections, lot_sentence
from generator.report.notes import rendered
from generator.report.order_view import order_facts, order_sections
from generator.report.page_records import Link, Page, Sheet
from generator.report.parts import Section
from generator.report.plan_view import order_in_plan, plan_address, plan_facts, plan_lead, plan_sections
from generator.report.planes import Planes
from generator.report.themes import Theme
from generator.report.views import CampaignPages, IndexEntry
from generator.report.wholes import Wholes

INDEX = "index.html"
METHOD = "method.html"
#: The script that only pages with a trial blend load.
_TRIAL = "trial"


@dataclass(frozen=True, slots=True, kw_only=True)
class IndexRow:
    """A campaign on the index as its template receives it."""

    title: str
    href: str
    counts: tuple[tuple[str, str, int], ...]
    in_words: str
    together: str
    recorded: str
    headline: str
    trouble: str
    is_stopped: bool


def draw_campaign(book: CampaignPages, theme: Theme) -> dict[str, bytes]:
    """Every page of a campaign by address; a problem page alone where it has no answers at all.

    The campaign page links to ``SLUG/results.json``, which the caller adds.
    """
    return {sheet.address: rendered_sheet(sheet, theme).encode() for sheet in campaign_sheets(book, theme)}


def campaign_sheets(book: CampaignPages, theme: Theme) -> list[Sheet]:
    """Every page of a campaign before it is laid out, in the order in which they are read."""
    if book.campaign.is_stopped:
        address = f"{book.campaign.slug}/{INDEX}"
        return [Sheet(address=address, template="problem.html", page=_problem_page(book, theme))]
    lookup = lookup_of(book)
    planes, wholes = Planes(lookup), Wholes(lookup)
    home = _campaign_page(lookup, planes, wholes, theme)
    sheets = [Sheet(address=lookup.home, template="campaign.html", page=home)]
    findings = [finding for finding in book.findings.orders if finding.order in lookup.order_addresses]
    for position, finding in enumerate(findings):
        page = _order_page(lookup, planes, wholes, theme, findings, position)
        sheets.append(Sheet(address=lookup.order_addresses[finding.order], template="order.html", page=page))
    sheets += _plan_sheets(lookup, theme)
    for position, lot in enumerate(book.campaign.lots):
        page = _lot_page(lookup, theme, book.campaign.lots, position)
        sheets.append(Sheet(address=lookup.lot_addresses[lot.name], template="lot.html", page=page))
    edition = words.edition_in_words(book.edition)
    return [replace(sheet, page=replace(sheet.page, edition=edition)) for sheet in sheets]


def rendered_sheet(sheet: Sheet, theme: Theme) -> str:
    """A page laid out, with what the theme adds to every page."""
    return theme.render(sheet.template, page=dressed(sheet.page, theme))


def dressed(page: Page, theme: Theme) -> Page:
    """A page with the theme's scripts and logo, which stand where its style sheet does."""
    root = page.style.removesuffix(theme.style_address)
    names = [name for name in theme.scripts if name != _TRIAL or any(section.trial for section in page.sections)]
    return replace(
        page,
        scripts=tuple(root + theme.script_address(name) for name in names),
        logo=root + theme.logo_address if theme.logo else "",
        logo_words=theme.logo.words if theme.logo else "",
    )


def draw_index(entries: Iterable[IndexEntry], theme: Theme, version: str = __version__) -> bytes:
    """The index of all campaigns, in the order given."""
    listed = list(entries)
    rows = tuple(_index_row(entry) for entry in listed)
    totals = Counter[str]()
    for entry in listed:
        totals.update(entry.counts)
    page = Page(
        title="Campaigns",
        lead=_index_lead(rows, totals),
        style=addresses.relative(INDEX, theme.style_address),
        method=METHOD,
        crumbs=(),
        version=version,
        kind="index",
    )
    return theme.render(
        "index.html",
        page=dressed(page, theme),
        rows=rows,
        totals=words.told_counts(totals) if len(rows) > 1 else (),
        totals_in_words=words.counts_in_words(totals),
    ).encode()


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
    return theme.render("method.html", page=dressed(page, theme), verdicts=verdicts).encode()


def assets(theme: Theme) -> dict[str, bytes]:
    """What pages load, named by content."""
    files = {theme.style_address: theme.style.encode()}
    files |= {theme.script_address(name): script.encode() for name, script in theme.scripts.items()}
    return {**files, theme.logo_address: theme.logo.data} if theme.logo else files


def _index_lead(rows: Sequence[IndexRow], totals: Mapping[str, int]) -> str:
    if not rows:
        return "There is no campaign yet: copy a folder with assays.csv and targets.csv into the campaigns folder."
    stopped = sum(1 for row in rows if row.is_stopped)
    told = f"{words.plural(len(rows), 'campaign')}."
    if totals:
        told += f" {words.made(totals)}"
    if stopped:
        told += f" {words.plural(stopped, 'campaign')} {'is' if stopped == 1 else 'are'} stopped by problems."
    return told


def _index_row(entry: IndexEntry) -> IndexRow:
    failing = sum(1 for problem in entry.problems if problem.severity != "note")
    return IndexRow(
        title=entry.title,
        href=addresses.relative(INDEX, f"{entry.slug}/{INDEX}"),
        counts=words.told_counts(entry.counts),
        in_words=words.counts_in_words(entry.counts) or "no answers",
        together=entry.together,
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
        lead=words.summary(findings, counts),
        style=addresses.relative(lookup.home, theme.style_address),
        method=addresses.relative(lookup.home, METHOD),
        crumbs=(Link(text="Campaigns", href=addresses.relative(lookup.home, INDEX)),),
        version=book.version,
        kind="campaign",
        counts=words.told_counts(counts),
        counts_in_words=words.counts_in_words(counts),
        facts=campaign_facts(lookup),
        trouble=_trouble(lookup, lookup.home),
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

    own = order_sections(lookup, planes, wholes, finding, address)

    def neighbour(step: int) -> Link | None:
        if not 0 <= position + step < len(findings):
            return None
        name = findings[position + step].order
        return Link(text=f"Order {name}", href=addresses.relative(address, lookup.order_addresses[name]))

    return Page(
        title=f"Order {finding.order}",
        lead=words.beside_verdict(finding.sentence),
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
        trouble=_trouble(lookup, address),
        banner=_banner(lookup.book),
        sections=(
            *own[:1],
            *order_in_plan(lookup, finding, address, card_addresses(lookup)),
            *own[1:],
            *order_history(lookup, finding.order, address),
        ),
        cautions=_cautions(lookup),
        revision=_revision(lookup.book),
    )


def _plan_sheets(lookup: Lookup, theme: Theme) -> list[Sheet]:
    """The plan's page and a batch card for each order that it serves."""
    plan, cards = lookup.book.findings.plan, card_addresses(lookup)
    if plan is None:
        return []
    address = plan_address(lookup)
    page = Page(
        title="Plan",
        lead=plan_lead(lookup, plan),
        style=addresses.relative(address, theme.style_address),
        method=addresses.relative(address, METHOD),
        crumbs=_crumbs(lookup, address),
        version=lookup.book.version,
        kind="plan",
        facts=plan_facts(lookup, plan),
        trouble=_trouble(lookup, address),
        banner=_banner(lookup.book),
        sections=plan_sections(lookup, plan, address, cards),
        cautions=_cautions(lookup),
        revision=_revision(lookup.book),
        data="results.json",
    )
    findings = [finding for finding in lookup.book.findings.orders if finding.order in cards]
    return [
        Sheet(address=address, template="plan.html", page=page),
        *(_card_sheet(lookup, theme, findings, position) for position in range(len(findings))),
    ]


def _card_sheet(lookup: Lookup, theme: Theme, findings: Sequence[OrderFinding], position: int) -> Sheet:
    finding, cards = findings[position], card_addresses(lookup)
    address = cards[finding.order]

    def neighbour(step: int) -> Link | None:
        if not 0 <= position + step < len(findings):
            return None
        name = findings[position + step].order
        return Link(text=f"Card {name}", href=addresses.relative(address, cards[name]))

    back = Link(text=f"Order {finding.order}", href=addresses.relative(address, lookup.order_addresses[finding.order]))
    page = Page(
        title=f"Batch card, order {finding.order}",
        lead=card_lead(lookup, finding),
        style=addresses.relative(address, theme.style_address),
        method=addresses.relative(address, METHOD),
        crumbs=(*_crumbs(lookup, address), back),
        version=lookup.book.version,
        kind="batch",
        previous=neighbour(-1),
        following=neighbour(1),
        facts=card_facts(lookup, finding),
        banner=_banner(lookup.book),
        cautions=_cautions(lookup),
        revision=_revision(lookup.book),
        card=batch_card(lookup, finding, address),
    )
    return Sheet(address=address, template="batch.html", page=page)


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
        sections=(*lot_sections(lookup, lot, address), *lot_history(lookup, lot.name, address)),
        revision=_revision(lookup.book),
    )


def _crumbs(lookup: Lookup, address: str) -> tuple[Link, ...]:
    return (
        Link(text="Campaigns", href=addresses.relative(address, INDEX)),
        Link(text=lookup.campaign.settings.title, href=addresses.relative(address, lookup.home)),
    )


def _banner(book: CampaignPages) -> Section | None:
    return problems_section(book.banner_problems, "banner")


def _trouble(lookup: Lookup, address: str) -> Link | None:
    """What was left out of all answers, and where it is told; None under a banner, which tells it already."""
    text = "" if lookup.book.banner_problems else trouble_words(lookup.campaign.problems)
    return Link(text=text, href=f"{addresses.relative(address, lookup.home)}#problems") if text else None


def _cautions(lookup: Lookup) -> tuple[str, ...]:
    apart = words.CAUTION_APART if lookup.campaign.house.keep_apart else words.CAUTION_APART_EMPTY
    return (*words.CAUTIONS, apart)


def _revision(book: CampaignPages) -> str:
    if not book.revisions:
        return ""
    last = book.revisions[-1]
    return f"Revision {last.number}, recorded {words.moment(last.recorded)}, digest {last.digest[:12]}"
