"""What a page is before it is laid out: the record that every template receives."""

from __future__ import annotations

from dataclasses import dataclass

from markupsafe import Markup

from generator.report.batch_view import Card
from generator.report.parts import Fact, Section


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
    counts: tuple[tuple[str, str, int], ...] = ()
    counts_in_words: str = ""
    trouble: Link | None = None
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
    scripts: tuple[str, ...] = ()
    logo: str = ""
    logo_words: str = ""
    edition: str = ""
    card: Card | None = None


@dataclass(frozen=True, slots=True, kw_only=True)
class Sheet:
    """A page with its address and the template that lays it out."""

    address: str
    template: str
    page: Page
