"""One build, start to end: read → find → record → draw → publish.

Only campaigns whose fingerprint differs from the published one are made; the others are looked at
and left.  The fingerprint is of everything that a campaign's pages are made of: input bytes, the
revisions there are, theme, program and libraries.
"""

from __future__ import annotations

import contextlib
import time
from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass, replace
from pathlib import Path

from generator import disk
from generator.folders import Folder, find_campaigns, read_inputs
from generator.history.check import check_history
from generator.job import Job, Log, Outcome, WrongUseError, history_of
from generator.lock import OwnerLock
from generator.problems import Problem
from generator.report.addresses import slugify
from generator.report.manifest import Published
from generator.report.publish import SHARED, Publication
from generator.run import Run
from generator.status import write_status
from generator.workers import Crew, Here, Makers, Tick

LOCK_NAME = ".hullbook-lock"
#: Called now and then while building; the build ends early when it says no.
IsWanted = Callable[[], bool]


def writer_lock(output: Path) -> OwnerLock:
    """Make the lock that a builder of this output folder has to hold."""
    return OwnerLock(output / LOCK_NAME)


def check_job(job: Job) -> None:
    """Refuse what can't be meant: no campaigns folder, folders that feed on each other, no such theme.

    WrongUseError or NoCampaignsError, with what to do.
    """
    find_campaigns(job.campaigns)
    if disk.is_inside(job.output, job.campaigns):
        raise WrongUseError(f"the output folder {job.output} lies in the folder of campaigns; choose another")
    if disk.is_inside(job.campaigns, job.output):
        raise WrongUseError(f"the folder of campaigns {job.campaigns} lies in the output folder; choose another")
    if job.history is not None and disk.is_inside(job.history, job.output):
        raise WrongUseError(f"the history folder {job.history} lies in the output folder; choose another")
    for edition in job.editions:
        if slugify(edition) != edition or not edition:
            raise WrongUseError(f"no edition can be called {edition!r}; write letters, digits, - and _")
    if job.output.exists() and not job.output.is_dir():
        raise WrongUseError(f"{job.output} is a file; give a folder for the pages")
    if job.theme is not None:
        from generator.report.themes import load_theme

        load_theme(job.theme)


def check(campaigns: Path, history: Path | None) -> Iterator[tuple[Folder, tuple[Problem, ...]]]:
    """Read every campaign and verify its history, without writing anything: all problems of each."""
    from generator.chapter import read

    for folder in find_campaigns(campaigns):
        campaign = read(folder, read_inputs(folder))
        yield folder, (*campaign.problems, *check_history(history_of(folder, history)))


def build(
    job: Job,
    lock: OwnerLock,
    log: Log,
    *,
    only: frozenset[Path] | None = None,
    without: frozenset[Path] = frozenset(),
    before_replace: Callable[[Path], None] | None = None,
    is_wanted: IsWanted = lambda: True,
    makers: Makers | None = None,
    thorough: bool = False,
    tries_again: bool = True,
) -> Outcome:
    """Build once; the caller holds ``lock``.

    ``only`` names campaign folders that may have changed: others are left unread as published.
    ``without`` names folders that are not ready to be read: they stay as published, or out.  When
    ``is_wanted`` turns false, campaigns not yet made are left for the next build.  ``makers`` are those of
    the caller, kept from build to build.  ``thorough`` finds pages that others have written into as well;
    ``tries_again`` makes campaigns again that took too long before.  Raises NoCampaignsError, and WriteError
    or LockedError where the output folder can't be written any more; the last good pages then stay.
    """
    began = time.monotonic()

    def tick() -> bool:
        lock.beat()
        return is_wanted()

    how = _How(log, only, without, before_replace, tick, thorough, tries_again)
    own = Crew(job.jobs, job.time_limit) if makers is None and job.jobs else contextlib.nullcontext()
    with own as crew:
        chosen = makers or crew or Here()
        outcome = _build_each(job, how, chosen) if len(job.editions) > 1 else _build(job, how, chosen)
    outcome = replace(outcome, seconds=time.monotonic() - began)
    if is_wanted():
        write_status(job.output, job.moment, outcome)
    return outcome


@dataclass(frozen=True, slots=True)
class _How:
    """How a build goes about its campaigns: see :func:`build`."""

    log: Log
    only: frozenset[Path] | None
    without: frozenset[Path]
    before_replace: Callable[[Path], None] | None
    tick: Tick
    thorough: bool
    tries_again: bool


def _build(job: Job, how: _How, makers: Makers) -> Outcome:
    """Build one edition."""
    folders = find_campaigns(job.campaigns)
    publication = Publication(job.output, moment=job.moment, before_replace=how.before_replace, thorough=how.thorough)
    run = Run(job, publication, how.log, makers, how.tick, tries_again=how.tries_again)
    _remove_editions(job, publication, kept=())
    if SHARED not in publication.old.campaigns or not publication.old.campaigns[SHARED].files:
        run.put_shared([])  # every page links to the index: it has to be there before them
    run.make(folders, how.only, how.without)
    run.put_shared(folders)
    return run.outcome(folders, publication.finish())


def _build_each(job: Job, how: _How, makers: Makers) -> Outcome:
    """Build every edition in a folder of its own; pages of a single edition are removed from the output folder."""
    outcomes = []
    for edition in job.editions:
        how.log.say(f"edition {edition}")
        outcomes.append(_build(replace(job, editions=(edition,), output=job.output / edition), how, makers))
    publication = Publication(job.output, moment=job.moment, before_replace=how.before_replace)
    _remove_editions(job, publication, kept=job.editions)
    publication.put(SHARED, Published(fingerprint="", files={}, about={"editions": list(job.editions)}), {})
    removed = publication.finish().paths
    made = dict.fromkeys(slug for outcome in outcomes for slug in outcome.made)
    every = dict.fromkeys(slug for outcome in outcomes for slug in (*outcome.made, *outcome.kept))
    return Outcome(
        made=tuple(made),
        kept=tuple(slug for slug in every if slug not in made),
        written=sum(outcome.written for outcome in outcomes),
        removed=sum(outcome.removed for outcome in outcomes) + len(removed),
        pending=tuple(
            f"{edition}/{path}"
            for edition, outcome in zip(job.editions, outcomes, strict=True)
            for path in outcome.pending
        ),
        problems={
            slug: tuple(dict.fromkeys(problem for outcome in outcomes for problem in outcome.problems.get(slug, ())))
            for slug in {slug: None for outcome in outcomes for slug in outcome.problems}
        },
        themes=frozenset(theme for outcome in outcomes for theme in outcome.themes),
    )


def _remove_editions(job: Job, publication: Publication, kept: Sequence[str]) -> None:
    """Remove editions that an earlier build put into folders of theirs and that are not wanted any more."""
    shared = publication.old.campaigns.get(SHARED)
    earlier = shared.about.get("editions", ()) if shared is not None else ()
    for edition in earlier if isinstance(earlier, list) else ():
        if edition not in kept and isinstance(edition, str):
            Publication(job.output / edition, moment=job.moment).finish()
