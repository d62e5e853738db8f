"""One campaign of a build: its bytes are read, answered, recorded and drawn.

A campaign that stops keeps the answers of its last good revision, under a banner of its problems.
Nothing that one campaign holds can stop the build: an unexpected error becomes a problem.
"""

from __future__ import annotations

import functools
import traceback
from collections.abc import Iterator, Mapping
from dataclasses import dataclass, field, replace
from pathlib import Path
from typing import TYPE_CHECKING, Any

from generator import __version__, identity
from generator.disk import WriteError, digest_of
from generator.findings import results
from generator.findings.records import Findings, RevisionMark
from generator.folders import Folder, Inputs
from generator.history import compare, story_files
from generator.history.archive import History, OvertakenError, Revision, contents, entries, read_history, verified
from generator.history.chronicle import GROUP, read_line, read_lines, recent
from generator.history.headlines import with_cause
from generator.history.recording import Material, record_story
from generator.history.records import Story
from generator.intake.campaign import read_campaign
from generator.intake.records import Campaign
from generator.lock import LockedError
from generator.problems import HullbookError, Problem, stopping
from generator.report.veil import EditionError
from generator.report.views import CampaignPages, IndexEntry, RevisionLine, index_entry
from generator.tasks import Chapter, Incident, Task

if TYPE_CHECKING:
    from generator.report.themes import Theme, ThemeError


@dataclass(frozen=True, slots=True, kw_only=True)
class Told:
    """A campaign with its answers, ready to be drawn for its audience; ``theme`` is the one wanted.

    ``history`` is the folder of its revisions where the audience may see them; ``drawn`` as in the task.
    """

    book: CampaignPages
    theme: str
    is_recorded: bool = True
    history: Path | None = None
    drawn: Mapping[str, str] = field(default_factory=dict)


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
    except EditionError as error:
        return _without_edition(task, error)
    except Exception as error:  # noqa: BLE001 - the last guard: one campaign's defect is no other's
        return _after_defect(task, error)


def make_stopped(task: Task, problem: Problem) -> Chapter:
    """Show a campaign's last good answers, without working on it, under a banner of this problem."""
    try:
        history = read_history(task.history, newest=GROUP)
        return _drawn(_stopped(task, replace(_blank(task), problems=(problem,)), history, (problem,)))
    except EditionError as error:
        return _without_edition(task, error)
    except Exception as error:  # noqa: BLE001 - as above
        return _after_defect(task, error)


def read(folder: Folder, inputs: Inputs) -> Campaign:
    """Read the campaign, with the faults of its folder; a file that can't be read is not also missing."""
    campaign = read_campaign(inputs.files, slug=folder.slug, folder=folder.name)
    told = [problem for problem in campaign.problems if problem.file not in inputs.unreadable]
    return replace(campaign, problems=(*inputs.problems, *told))


def _made(task: Task) -> Chapter:
    return _drawn(tell(task))


def tell(task: Task) -> Told:
    """Read, answer and record a campaign; EditionError where it does not know the edition or the client."""
    campaign = read(task.folder, task.inputs)
    history = read_history(task.history, newest=GROUP)
    if campaign.is_stopped:
        return _stopped(task, campaign, history, campaign.problems)
    # What is wrong with the folder is no matter of the files' content: told now, not archived.
    around = task.inputs.problems
    answered = _answer(task, replace(campaign, problems=campaign.problems[len(around) :]), history)
    problems = around + answered.findings.problems + answered.notes
    if stopping(problems):
        return _stopped(task, campaign, history, problems)
    findings = replace(answered.findings, problems=problems)
    told = _told(task, replace(campaign, problems=problems), findings, answered.history)
    return replace(told, is_recorded=answered.is_recorded)


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
    if history.head is not None:
        notes = tuple(dict.fromkeys(notes + _archived(history.head)[1]))
    material = Material(
        inputs=task.inputs.files,
        campaign=campaign,
        findings=findings,
        cause=cause,
        moment=task.moment,
        program=__version__,
        read=lambda files: read_campaign(files, slug=task.folder.slug, folder=task.folder.name),
    )
    try:
        revision = record_story(task.history, material)
    except (WriteError, LockedError, OvertakenError) as error:
        notes += (_not_recorded(error),)
        return _Answered(findings=findings, history=history, notes=notes, is_recorded=False)
    marked = _renamed(findings, campaign, revision.mark)
    return _Answered(findings=marked, history=read_history(task.history, newest=GROUP), notes=notes)


def _stopped(task: Task, campaign: Campaign, history: History, problems: tuple[Problem, ...]) -> Told:
    """Tell the last good revision under a banner; without one, the problems alone."""
    problems = tuple(dict.fromkeys(problems + history.problems))
    for revision in _newest_first(task, history):
        good = _good(task, campaign, revision)
        if isinstance(good, Problem):
            problems = tuple(dict.fromkeys((*problems, good)))
            continue
        old, findings = good
        until = replace(history, revisions=tuple(item for item in history.revisions if item.number <= revision.number))
        return _told(task, old, replace(findings, problems=problems), until, banner=problems)
    return _told(task, replace(campaign, problems=problems), _empty(campaign, problems), history)


def _newest_first(task: Task, history: History) -> Iterator[Revision]:
    """The revisions of a history of which the newest were read, then those before them."""
    yield from reversed(history.revisions)
    read_already = {revision.number for revision in history.revisions}
    for revision in reversed(read_history(task.history).revisions):
        if revision.number not in read_already:
            yield revision


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


def _told(
    task: Task, campaign: Campaign, findings: Findings, history: History, *, banner: tuple[Problem, ...] = ()
) -> Told:
    """All that pages show, as the task's audience may see it."""
    from generator.report.editions import edited

    story = _story(history.head)
    book = CampaignPages(
        campaign=campaign,
        findings=findings,
        revisions=tuple(_line(revision) for revision in history.revisions),
        changes=() if story is None else tuple(with_cause(change, story.edits) for change in story.changes),
        banner_problems=banner,
        version=__version__,
    )
    shown = edited(book, task.edition, task.client, story)
    is_internal = (shown.edition, shown.client) == ("internal", "") and not shown.hidden
    return Told(
        book=shown,
        theme=task.theme or campaign.settings.theme,
        history=task.history if is_internal else None,
        drawn=task.drawn,
    )


def _drawn(told: Told) -> Chapter:
    """Draw all pages; where the theme fails that is a problem, and pages in the plain theme are a makeshift."""
    from generator.report.theme_folders import PLAIN
    from generator.report.themes import ThemeError

    try:
        return _in_theme(told, told.theme)
    except ThemeError as error:
        if told.theme == PLAIN:
            raise
        book, fault = told.book, _theme_fault(error)
        problems = (*book.findings.problems, fault)
        faulty = replace(
            book,
            campaign=replace(book.campaign, problems=(*book.campaign.problems, fault)),
            findings=replace(book.findings, problems=problems),
            banner_problems=problems if book.banner_problems else (),
        )
        return replace(_in_theme(replace(told, book=faulty), PLAIN), is_makeshift=True)


def _in_theme(told: Told, name: str) -> Chapter:
    from generator.report.exports import exports
    from generator.report.history_pages import Shelf, draw_history
    from generator.report.pages import assets, draw_campaign
    from generator.report.themes import load_theme

    found = entries(told.history) if told.history is not None else []
    book = replace(told.book, past=read_lines(recent(found)))
    theme = _kept_theme(name, load_theme(name).digest)
    files = {**assets(theme), **draw_campaign(book, theme), **exports(book)}
    files[f"{book.campaign.slug}/results.json"] = results.dumps(book.findings)
    past = draw_history(book, theme, Shelf(entries=found, read=read_line, published=told.drawn))
    return Chapter(
        files={**files, **past.files},
        entry=index_entry(book),
        theme=told.theme,
        is_recorded=told.is_recorded,
        kept=past.kept,
        drawn=past.keys,
    )


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


def _story(head: Revision | None) -> Story | None:
    """What the newest revision changed; None where that is damaged (which is told)."""
    if head is None:
        return None
    try:
        return story_files.from_bytes(verified(head, "changes.json"))
    except HullbookError:
        return None


def _without_edition(task: Task, error: EditionError) -> Chapter:
    """A campaign that does not know the edition has no pages in it."""
    problem = Problem(
        file="campaign.toml",
        column="editions",
        message=error.what,
        remedy="name another edition or client, or write it into campaign.toml",
        severity="stops",
    )
    entry = IndexEntry(slug=task.folder.slug, title=task.folder.name, counts={}, problems=(problem,), is_stopped=True)
    return Chapter(files=None, entry=entry, theme=task.theme or "plain")


def _after_defect(task: Task, error: Exception) -> Chapter:
    """Show the last good revision, or keep what is published where even that can't be drawn."""
    incident = Incident(reference=_reference(task, error), trace="".join(traceback.format_exception(error)))
    problems = (_internal(incident.reference),)
    try:
        campaign = replace(_blank(task), problems=problems)
        chapter = _drawn(_stopped(task, campaign, read_history(task.history), problems))
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


def _theme_fault(error: ThemeError) -> Problem:
    return Problem(
        file=error.file,
        row=error.line,
        message=f"this theme can't be used: {error.what}",
        remedy="mend the theme, or name another",
        severity="drops",
    )


def _not_recorded(error: HullbookError) -> Problem:
    # Who holds the lock is for the log, not for pages.
    why = "another program is recording" if isinstance(error, LockedError | OvertakenError) else error
    return Problem(
        file="history",
        message=f"these answers are not recorded as a revision: {why}",
        remedy="free the disk or allow writing, or give another folder with --history, and build again",
        severity="note",
    )
