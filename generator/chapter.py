"""One campaign of a build: its bytes are read, answered, recorded and drawn.

A campaign that stops keeps the answers of its last good revision, under a banner of its problems.
Nothing that one campaign holds can stop the build: an unexpected error becomes a problem.
"""

from __future__ import annotations

import functools
import traceback
from collections.abc import Mapping
from dataclasses import dataclass, replace
from datetime import datetime
from pathlib import Path
from typing import TYPE_CHECKING, Any

from generator import __version__, identity
from generator.disk import WriteError, digest_of
from generator.findings import results
from generator.findings.records import Findings, RevisionMark
from generator.folders import Folder, Inputs
from generator.history import compare
from generator.history.archive import Draft, History, Revision, contents, read_history, record, verified
from generator.intake.campaign import read_campaign
from generator.intake.records import Campaign
from generator.lock import LockedError
from generator.problems import HullbookError, Problem, stopping
from generator.report.views import CampaignPages, IndexEntry, RevisionLine, index_entry

if TYPE_CHECKING:
    from generator.report.themes import Theme


@dataclass(frozen=True, slots=True, kw_only=True)
class Task:
    """What one campaign's work needs: picklable, so that another process can do it.

    ``theme`` is the command's, None for the campaign's own.
    """

    folder: Folder
    inputs: Inputs
    history: Path
    theme: str | None
    moment: datetime


@dataclass(frozen=True, slots=True, kw_only=True)
class Incident:
    """An unexpected error: the reference that pages show, and the traceback for the log file."""

    reference: str
    trace: str


@dataclass(frozen=True, slots=True, kw_only=True)
class Chapter:
    """What came of a campaign: files by address (None: keep what is published) and its index line.

    ``is_recorded`` is False where a revision was due and could not be written.
    """

    files: Mapping[str, bytes] | None
    entry: IndexEntry
    theme: str
    is_recorded: bool = True
    incident: Incident | None = None


@dataclass(frozen=True, slots=True, kw_only=True)
class _Answered:
    """Findings with the revision they belong to; ``notes`` are of this build alone, not archived."""

    findings: Findings
    history: History
    notes: tuple[Problem, ...] = ()
    is_recorded: bool = True


def make(task: Task) -> Chapter:
    """Do one campaign from bytes to files; raises nothing but what stops the whole program."""
    try:
        return _made(task)
    except Exception as error:  # noqa: BLE001 - the last guard: one campaign's defect is no other's
        return _after_defect(task, error)


def read(folder: Folder, inputs: Inputs) -> Campaign:
    """Read the campaign, with the faults of its folder; a file that can't be read is not also missing."""
    campaign = read_campaign(inputs.files, slug=folder.slug, folder=folder.name)
    told = [problem for problem in campaign.problems if problem.file not in inputs.unreadable]
    return replace(campaign, problems=(*inputs.problems, *told))


def _made(task: Task) -> Chapter:
    campaign = read(task.folder, task.inputs)
    history = read_history(task.history)
    if campaign.is_stopped:
        return _stopped(task, campaign, history, campaign.problems)
    # What is wrong with the folder is no matter of the files' content: told now, not archived.
    around = task.inputs.problems
    answered = _answer(task, replace(campaign, problems=campaign.problems[len(around) :]), history)
    problems = around + answered.findings.problems + answered.notes
    if stopping(problems):
        return _stopped(task, campaign, history, problems)
    findings = replace(answered.findings, problems=problems)
    chapter = _drawn(task, replace(campaign, problems=problems), findings, answered.history)
    return replace(chapter, is_recorded=answered.is_recorded)


def _answer(task: Task, campaign: Campaign, history: History) -> _Answered:
    """Take the answers from the newest revision if it holds these inputs, else find and record them."""
    head = history.head
    notes = history.problems
    if head is not None and head.holds(task.inputs.files):
        old, damage = _archived(head)
        notes += damage
        if old is not None and head.engine == identity.engine():
            return _Answered(findings=_renamed(old, campaign, head.mark), history=history, notes=notes)
        findings = _find(campaign)
        if old is None or not compare.changes(old, findings) or stopping(findings.problems):
            return _Answered(findings=_renamed(findings, campaign, head.mark), history=history, notes=notes)
        return _recorded(task, campaign, findings, history, notes, cause="program version")
    return _recorded(task, campaign, _find(campaign), history, notes, cause="inputs")


def _find(campaign: Campaign) -> Findings:
    from generator.findings.answers import find

    return find(campaign)


def _renamed(findings: Findings, campaign: Campaign, mark: RevisionMark | None) -> Findings:
    """Put on archived findings what the folder's present name decides: it may have been copied."""
    return replace(findings, slug=campaign.slug, title=campaign.settings.title, revision=mark)


def _archived(revision: Revision) -> tuple[Findings | None, tuple[Problem, ...]]:
    """A revision's findings; None, and why, where they are damaged."""
    try:
        return results.loads(verified(revision, "results.json")), ()
    except HullbookError as error:
        return None, (_unusable(revision, error),)


def _recorded(
    task: Task, campaign: Campaign, findings: Findings, history: History, notes: tuple[Problem, ...], *, cause: str
) -> _Answered:
    """Record findings as a new revision; where that fails, say so and go on without one."""
    if stopping(findings.problems):
        return _Answered(findings=findings, history=history, notes=notes)
    found, headline, damage = _since(history.head, findings)
    notes = tuple(dict.fromkeys(notes + damage))
    draft = Draft(
        inputs=task.inputs.files,
        results=lambda mark: results.dumps(replace(findings, revision=mark)),
        changes=compare.to_bytes(found),
        headline=headline,
        cause=cause,
        moment=task.moment,
        program=__version__,
        engine=identity.engine(),
    )
    try:
        revision = record(task.history, draft)
    except (WriteError, LockedError) as error:
        notes += (_not_recorded(error),)
        return _Answered(findings=findings, history=history, notes=notes, is_recorded=False)
    marked = _renamed(findings, campaign, revision.mark)
    return _Answered(findings=marked, history=read_history(task.history), notes=notes)


def _since(head: Revision | None, findings: Findings) -> tuple[tuple[compare.Change, ...], str, tuple[Problem, ...]]:
    """What changed since a revision, its headline, and what was wrong with reading it."""
    if head is None:
        return (), compare.FIRST, ()
    old, damage = _archived(head)
    if old is None:
        return (), "The answers before can't be read.", damage
    found = compare.changes(old, findings)
    return found, compare.headline(found), ()


def _stopped(task: Task, campaign: Campaign, history: History, problems: tuple[Problem, ...]) -> Chapter:
    """Draw the last good revision under a banner; without one, a page of the problems."""
    problems = tuple(dict.fromkeys(problems + history.problems))
    for revision in reversed(history.revisions):
        good = _good(task, campaign, revision)
        if isinstance(good, Problem):
            problems = tuple(dict.fromkeys((*problems, good)))
            continue
        old, findings = good
        until = replace(history, revisions=tuple(item for item in history.revisions if item.number <= revision.number))
        return _drawn(task, old, replace(findings, problems=problems), until, banner=problems)
    return _drawn(task, replace(campaign, problems=problems), _empty(campaign, problems), history)


def _good(task: Task, campaign: Campaign, revision: Revision) -> tuple[Campaign, Findings] | Problem:
    """A revision's campaign and findings, read again from the archive; a problem if they can't be."""
    try:
        held = contents(revision)
        old = read_campaign(held.inputs, slug=task.folder.slug, folder=task.folder.name)
        findings = results.loads(held.results)
    except HullbookError as error:
        return _unusable(revision, error)
    if old.is_stopped:
        return _unusable(revision, "this version of the program can't read its inputs")
    return old, _renamed(findings, replace(campaign, settings=old.settings), revision.mark)


def _empty(campaign: Campaign, problems: tuple[Problem, ...]) -> Findings:
    """Findings without any answer."""
    settings = campaign.settings
    return Findings(
        slug=campaign.slug,
        title=settings.title,
        quantity_unit=settings.quantity_unit,
        currency=settings.currency,
        read=campaign.read,
        problems=problems,
    )


def _drawn(
    task: Task, campaign: Campaign, findings: Findings, history: History, *, banner: tuple[Problem, ...] = ()
) -> Chapter:
    """Draw all pages; a theme that fails gives way to the plain one, and is a problem."""
    from generator.report.themes import PLAIN, ThemeError

    name = task.theme or campaign.settings.theme
    book = CampaignPages(
        campaign=campaign,
        findings=findings,
        revisions=tuple(_line(revision) for revision in history.revisions),
        changes=_sentences(history.head),
        banner_problems=banner,
        version=__version__,
    )
    try:
        return _in_theme(book, name, name)
    except ThemeError as error:
        if name == PLAIN:
            raise
        problems = (*findings.problems, _theme_fault(name, error))
        told = replace(
            book,
            campaign=replace(campaign, problems=(*campaign.problems, problems[-1])),
            findings=replace(findings, problems=problems),
            banner_problems=problems if banner else (),
        )
        return _in_theme(told, PLAIN, name)


def _in_theme(book: CampaignPages, name: str, asked: str) -> Chapter:
    from generator.report.pages import assets, draw_campaign
    from generator.report.themes import load_theme

    theme = _kept_theme(name, load_theme(name).digest)
    files = {**assets(theme), **draw_campaign(book, theme)}
    files[f"{book.campaign.slug}/results.json"] = results.dumps(book.findings)
    return Chapter(files=files, entry=index_entry(book), theme=asked)


@functools.lru_cache(maxsize=4)
def _kept_theme(name: str, digest: str) -> Theme:  # noqa: ARG001 - an edited theme is another one
    """Load a theme once for many campaigns, so that its templates are compiled once."""
    from generator.report.themes import load_theme

    return load_theme(name)


def _line(revision: Revision) -> RevisionLine:
    return RevisionLine(
        number=revision.number,
        recorded=revision.recorded,
        digest=revision.digest,
        program=revision.program,
        headline=revision.headline,
    )


def _sentences(head: Revision | None) -> tuple[str, ...]:
    """The changes of the newest revision in words; none where they are damaged (which is told)."""
    if head is None:
        return ()
    try:
        return tuple(change.sentence for change in compare.from_bytes(verified(head, "changes.json")))
    except (HullbookError, ValueError):
        return ()


def _after_defect(task: Task, error: Exception) -> Chapter:
    """Show the last good revision, or keep what is published where even that can't be drawn."""
    incident = Incident(reference=_reference(task, error), trace="".join(traceback.format_exception(error)))
    problems = (_internal(incident.reference),)
    try:
        campaign = replace(_blank(task), problems=problems)
        chapter = _stopped(task, campaign, read_history(task.history), problems)
    except Exception:  # noqa: BLE001 - drawing itself is what fails: leave the published pages alone
        entry = IndexEntry(slug=task.folder.slug, title=task.folder.name, counts={}, problems=problems, is_stopped=True)
        return Chapter(files=None, entry=entry, theme="plain", incident=incident)
    return replace(chapter, incident=incident)


def _blank(task: Task) -> Campaign:
    """A campaign of which nothing is known but its name."""
    return replace(read_campaign({}, slug=task.folder.slug, folder=task.folder.name), problems=())


def _reference(task: Task, error: Exception) -> str:
    """The same for the same defect on the same input, so that a rebuild writes the same bytes."""
    frames = traceback.extract_tb(error.__traceback__)
    where: Any = [Path(frames[-1].filename).name, frames[-1].lineno] if frames else None
    inputs = {name: digest_of(data.hex()) for name, data in task.inputs.files.items()}
    return digest_of([type(error).__name__, where, inputs])[:8]


def _internal(reference: str) -> Problem:
    return Problem(
        file="campaign",
        message=f"internal error {reference}",
        remedy="this is a defect of the program: send its maker the log file .hullbook-errors.log of the output folder",
        severity="stops",
    )


def _unusable(revision: Revision, why: object) -> Problem:
    return Problem(
        file=f"history/{revision.folder.name}",
        message=f"this revision can't be used: {why}",
        remedy="bring its folder back from a backup; the others are not affected",
        severity="note",
    )


def _theme_fault(name: str, error: HullbookError) -> Problem:
    return Problem(
        file="campaign.toml",
        column="theme",
        found=name,
        message=f"this theme can't be used, and plain is shown instead: {error}",
        remedy="mend the theme, or name another",
        severity="note",
    )


def _not_recorded(error: HullbookError) -> Problem:
    # Who holds the lock is for the log, not for pages.
    why = "another program is recording" if isinstance(error, LockedError) else error
    return Problem(
        file="history",
        message=f"these answers are not recorded as a revision: {why}",
        remedy="free the disk or allow writing, or give another folder with --history, and build again",
        severity="note",
    )
