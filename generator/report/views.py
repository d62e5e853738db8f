"""What the report is given: one campaign with its answers, and one line of the index."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

from generator.findings.records import Findings
from generator.history.chronicle import Line
from generator.intake.records import Campaign
from generator.problems import Problem
from generator.report import words


@dataclass(frozen=True, slots=True, kw_only=True)
class RevisionLine:
    """One revision as the campaign page lists it; ``recorded`` is ISO text, ``headline`` one sentence."""

    number: int
    recorded: str
    digest: str
    program: str
    headline: str


@dataclass(frozen=True, slots=True, kw_only=True)
class CampaignPages:
    """Everything that a campaign's pages show.

    ``revisions`` are oldest first; ``changes`` are sentences, the answers that changed since the
    revision before the last.  ``banner_problems`` are those of a campaign that stopped: it shows its
    last good campaign and findings, under a banner; empty otherwise.  A ``campaign`` that is itself
    stopped has no good revision, and gets a problem page.  ``edition`` is whom the pages are for,
    ``hidden`` what it leaves out (already taken out of the records), ``client`` whose orders alone are
    shown ("": all); ``apart`` is every two lots that the house rules keep apart.  ``past`` are the newest
    revisions' stories, oldest first, where history pages stand beside these; they tell of everything, so
    that no other edition than the internal one has them.
    """

    campaign: Campaign
    findings: Findings
    revisions: tuple[RevisionLine, ...] = ()
    changes: tuple[str, ...] = ()
    banner_problems: tuple[Problem, ...] = ()
    version: str
    edition: str = "internal"
    hidden: frozenset[str] = frozenset()
    client: str = ""
    apart: tuple[tuple[str, str], ...] = ()
    past: tuple[Line, ...] = ()


@dataclass(frozen=True, slots=True, kw_only=True)
class IndexEntry:
    """One campaign on the index; ``counts`` by verdict ("none": an order without an answer)."""

    slug: str
    title: str
    counts: Mapping[str, int]
    recorded: str = ""
    headline: str = ""
    problems: tuple[Problem, ...] = ()
    is_stopped: bool = False
    together: str = ""


def index_entry(book: CampaignPages) -> IndexEntry:
    """The line of the index that belongs to a campaign's pages."""
    counts: dict[str, int] = {}
    if not book.campaign.is_stopped:
        for finding in book.findings.orders:
            verdict = finding.verdict or "none"
            counts[verdict] = counts.get(verdict, 0) + 1
    last = book.revisions[-1] if book.revisions else None
    return IndexEntry(
        slug=book.campaign.slug,
        title=book.campaign.settings.title,
        counts=counts,
        recorded=last.recorded if last else "",
        headline=last.headline if last else "",
        problems=book.banner_problems or book.campaign.problems,
        is_stopped=book.campaign.is_stopped or bool(book.banner_problems),
        together="" if book.campaign.is_stopped else words.together(book.findings),
    )
