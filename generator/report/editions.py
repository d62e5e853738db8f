"""Editions: what one audience may see of a campaign, taken out before anything is drawn."""

from __future__ import annotations

from dataclasses import replace
from datetime import datetime

from generator.findings.retelling import retold
from generator.history.headlines import NO_CHANGE, headline, with_cause
from generator.history.records import Change, Edit, Story
from generator.report.redacted_findings import redacted_findings
from generator.report.redacted_story import redacted_story
from generator.report.redaction import redacted, shown_problems
from generator.report.veil import INTERNAL, apart_lots, veil_of
from generator.report.views import CampaignPages, RevisionLine


def edited(book: CampaignPages, edition: str = INTERNAL, client: str = "", story: Story | None = None) -> CampaignPages:
    """The pages' records as an edition shows them, and only one client's orders if one is named.

    ``story`` is that of the newest revision, from which "what changed last" is told.  Pure; EditionError
    for an edition or a client that the campaign does not know.
    """
    veil = veil_of(book.campaign, edition, client)
    apart = tuple((veil.lot(one), veil.lot(other)) for one, other in apart_lots(book.campaign))
    if veil.is_clear:
        return replace(book, apart=apart)
    campaign = redacted(book.campaign, veil)
    findings = redacted_findings(book.findings, book.campaign, veil)
    edits, changes = redacted_story(story or Story(headline=""), book.campaign, veil)
    if not campaign.is_stopped:
        findings = retold(findings, book.campaign, campaign, veil.lot)
    return replace(
        book,
        campaign=campaign,
        findings=findings,
        edition=edition,
        hidden=veil.hidden,
        client=veil.client,
        apart=apart,
        revisions=_lines(book, edits, changes),
        changes=tuple(with_cause(change, edits) for change in changes),
        past=(),
        banner_problems=shown_problems(book.banner_problems, veil),
    )


def _lines(book: CampaignPages, edits: tuple[Edit, ...], changes: tuple[Change, ...]) -> tuple[RevisionLine, ...]:
    """The revisions without headlines, but for the newest one's, which is made anew."""
    lines = tuple(replace(line, headline="") for line in book.revisions)
    if not lines or len(book.revisions) == 1:
        return lines
    last = lines[-1]
    text = headline(changes, edits, datetime.fromisoformat(last.recorded)) if changes else NO_CHANGE
    return (*lines[:-1], replace(last, headline=text))
