import errno
import json
import logging
import os
import re
import shutil
import signal
import subprocess
import sys
import threading
import time
from collections.abc import Callable, Iterator
from pathlib import Path

import pytest

from generator import folders, hints
from generator import watch as watching
from generator.hints import is_telling, mount_type, wants_events
from generator.lock import LockedError
from generator.settling import Scan
from generator.status import read_status
from generator.watch import watch
from tests.sample import ASSAYS, NOON, TARGETS, Told, light_pages, make_job, put_campaign, run

#: Far more than anything here takes, so that a busy machine fails no test.
PATIENCE = 60.0
SETTLE = 0.1


def eventually(claim: Callable[[], bool], what: str = "it never came true") -> None:
    deadline = time.monotonic() + PATIENCE
    while not claim():
        assert time.monotonic() < deadline, what
        time.sleep(0.02)


class Watched:
    """A watcher at work in a thread, with light pages."""

    def __init__(self, root: Path, poll: str) -> None:
        self.root = root
        self.campaigns = root / "campaigns"
        self.output = root / "output"
        self.log = Told()
        self._stop = threading.Event()
        self._errors: list[BaseException] = []
        self._thread = threading.Thread(target=self._watch, args=(poll,))
        self._thread.start()

    def _watch(self, poll: str) -> None:
        try:
            watch(make_job(self.root), self.log, settle_seconds=SETTLE, poll=poll, clock=lambda: NOON, stop=self._stop)
        except BaseException as error:
            self._errors.append(error)

    def end(self) -> None:
        self._stop.set()
        self._thread.join(PATIENCE)
        assert not self._thread.is_alive()
        assert self._errors == []

    def page(self, slug: str = "spring") -> str:
        try:
            return (self.output / slug / "index.html").read_text(encoding="utf-8")
        except FileNotFoundError:
            return ""

    def shows(self, text: str, slug: str = "spring") -> None:
        eventually(lambda: text in self.page(slug), f"{text!r} never came to {slug}: {self.log.said} {self.log.warned}")

    def lacks(self, slug: str) -> None:
        eventually(lambda: not (self.output / slug).exists() and slug not in self.index(), f"{slug} never went")

    def index(self) -> str:
        return (self.output / "index.html").read_text(encoding="utf-8")

    def builds(self) -> int:
        """How many campaigns were built, all builds together."""
        return sum(int(found[1]) for line in self.log.said if (found := re.search(r" (\d+) built, ", line)))

    def rests(self) -> None:
        """Wait out a few settle times, in which anything due would be built."""
        time.sleep(SETTLE * 6)


@pytest.fixture(params=["never", "always"], ids=["events", "polling"])
def watched(request: pytest.FixtureRequest, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Iterator[Watched]:
    monkeypatch.setattr(watching, "POLL_EVERY", 0.1)
    put_campaign(tmp_path / "campaigns")
    with light_pages():
        watcher = Watched(tmp_path, request.param)
        try:
            watcher.shows("1: makeable")
            eventually(lambda: watcher.builds() == 1)
            yield watcher
        finally:
            watcher.end()


def test_an_edit_is_published(watched: Watched) -> None:
    """A saved edit comes to the page, and its campaign alone is built."""
    put_campaign(watched.campaigns, targets_csv=TARGETS.replace(">= 16", ">= 21"))
    watched.shows("1: unreachable")
    assert "changed: Order 1 is now unreachable; it was makeable." in watched.page()


def test_a_copied_folder_appears_and_goes(watched: Watched) -> None:
    """A folder copied in becomes a campaign, one renamed changes its address, one removed goes."""
    shutil.copytree(watched.campaigns / "spring", watched.campaigns / "summer")
    watched.shows("1: makeable", "summer")
    (watched.campaigns / "summer").rename(watched.campaigns / "autumn")
    watched.shows("1: makeable", "autumn")
    watched.lacks("summer")
    shutil.rmtree(watched.campaigns / "autumn")
    watched.lacks("autumn")


def test_a_renamed_folder_is_still_watched(watched: Watched) -> None:
    """Edits in a folder that was renamed while watching are seen."""
    (watched.campaigns / "spring").rename(watched.campaigns / "renamed")
    watched.shows("1: makeable", "renamed")
    put_campaign(watched.campaigns, "renamed", targets_csv=TARGETS.replace(">= 16", ">= 21"))
    watched.shows("1: unreachable", "renamed")


def test_a_slow_writer_is_waited_for(watched: Watched) -> None:
    """A file that comes in pieces, the last of them ending inside quotes, is built once, when whole."""
    before = watched.builds()
    path = watched.campaigns / "spring" / "assays.csv"
    pieces = [ASSAYS[:20], ASSAYS[20:40], ASSAYS[40:] + '"D, the last', '",0,1,20,30\n']
    path.write_text("")
    for piece in pieces:
        with path.open("a") as stream:
            stream.write(piece)
        time.sleep(SETTLE / 2)
    eventually(lambda: watched.builds() > before)
    watched.rests()
    assert watched.builds() == before + 1
    assert "banner" not in watched.page()


def test_a_spreadsheet_save_is_one_edit(watched: Watched) -> None:
    """Temporary names and two renames, as a spreadsheet saves, end in the new content and no flicker."""
    folder = watched.campaigns / "spring"
    (folder / "~$targets.csv").write_text("lock")
    (folder / "3F2A1B00").write_text(TARGETS.replace(">= 16", ">= 21"))
    (folder / "targets.csv").rename(folder / "5C11D0.tmp")
    (folder / "3F2A1B00").rename(folder / "targets.csv")
    (folder / "5C11D0.tmp").unlink()
    (folder / "~$targets.csv").unlink()
    watched.shows("1: unreachable")
    assert not any("problem" in line or "missing" in line for line in watched.log.warned)


def test_lock_files_and_readers_build_nothing(watched: Watched) -> None:
    """Files that are no input, and files that are only read, wake nothing."""
    before = watched.builds()
    folder = watched.campaigns / "spring"
    (folder / ".~lock.assays.csv#").write_text("me")
    (folder / "assays.csv.bak").write_text("old")
    for _ in range(20):
        (folder / "assays.csv").read_bytes()
    watched.rests()
    assert watched.builds() == before


def test_a_broken_file_keeps_the_last_good_page(watched: Watched) -> None:
    """A typo is published as a banner over the last good answers, and goes when it is mended."""
    put_campaign(watched.campaigns, campaign_toml="title = \n")
    watched.shows("banner: campaign.toml")
    assert "1: makeable" in watched.page()
    put_campaign(watched.campaigns, campaign_toml='title = "Mended"\n')
    watched.shows("Mended")
    assert "banner" not in watched.page()


def test_site_settings_reach_every_campaign(watched: Watched) -> None:
    """An edit of site.toml builds all campaigns that it applies to."""
    put_campaign(watched.campaigns, "other")
    watched.shows("1: makeable", "other")
    (watched.campaigns / "site.toml").write_text('currency = "SEK"\n')
    for slug in ("spring", "other"):
        address = watched.output / slug / "results.json"
        eventually(lambda address=address: json.loads(address.read_bytes())["campaign"]["currency"] == "SEK")


def test_the_root_may_go_and_come_back(watched: Watched) -> None:
    """While the campaigns folder is away the pages stay; when it is back, edits are seen again."""
    away = watched.root / "away"
    watched.campaigns.rename(away)
    eventually(lambda: any("is not there" in line for line in watched.log.warned))
    watched.rests()
    assert "1: makeable" in watched.page()
    put_campaign(away, targets_csv=TARGETS.replace(">= 16", ">= 21"))
    away.rename(watched.campaigns)
    watched.shows("1: unreachable")
    assert sum("is not there" in line for line in watched.log.warned) == 1
    put_campaign(watched.campaigns)
    watched.shows("1: makeable")


def test_events_come_from_the_folder_that_is_there_now(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """After another folder was put in the place of the campaigns folder, it is the one that is observed."""
    monkeypatch.setattr(watching, "RESCAN_EVERY", 0.3)
    put_campaign(tmp_path / "campaigns")
    put_campaign(tmp_path / "other", targets_csv=TARGETS.replace(">= 16", ">= 21"))
    with light_pages():
        watcher = Watched(tmp_path, "never")
        try:
            eventually(lambda: watcher.builds() == 1)
            watcher.rests()  # the observer is started anew to follow the theme as well
            (tmp_path / "campaigns").rename(tmp_path / "old")
            (tmp_path / "other").rename(tmp_path / "campaigns")
            watcher.shows("1: unreachable")
            watcher.rests()
            monkeypatch.setattr(watching, "RESCAN_EVERY", 3600.0)  # from now on nothing but events
            time.sleep(1.0)
            put_campaign(watcher.campaigns, campaign_toml='title = "seen by its event"\n')
            watcher.shows("seen by its event")
        finally:
            watcher.end()


def test_an_edit_just_after_the_return_is_seen_at_once(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """As soon as the campaigns folder is back its events count; the next regular scan need not be waited for."""
    monkeypatch.setattr(watching, "RESCAN_EVERY", 0.3)
    put_campaign(tmp_path / "campaigns")
    with light_pages():
        watcher = Watched(tmp_path, "never")
        try:
            eventually(lambda: watcher.builds() == 1)
            (tmp_path / "campaigns").rename(tmp_path / "away")
            eventually(lambda: any("is not there" in line for line in watcher.log.warned))
            monkeypatch.setattr(watching, "RESCAN_EVERY", 3600.0)
            (tmp_path / "away").rename(tmp_path / "campaigns")
            eventually(lambda: any("is back" in line for line in watcher.log.said))
            put_campaign(watcher.campaigns, campaign_toml='title = "just after"\n')
            watcher.shows("just after")
        finally:
            watcher.end()


def test_an_unexpected_error_does_not_end_the_watch(watched: Watched, monkeypatch: pytest.MonkeyPatch) -> None:
    """A defect is told and kept in the log of errors, the pages stay, and the watch goes on."""
    monkeypatch.setattr(watching, "RETRY_PAUSES", (0.2,))
    scan = folders.scan
    broken = threading.Event()
    broken.set()

    def failing(root: Path) -> Scan:
        if broken.is_set():
            raise RuntimeError("out of luck")
        return scan(root)

    monkeypatch.setattr(folders, "scan", failing)
    put_campaign(watched.campaigns, campaign_toml='title = "after the defect"\n')
    eventually(lambda: any("internal error RuntimeError: out of luck" in line for line in watched.log.warned))
    eventually(lambda: read_status(watched.output).get("state") == "trouble")
    assert "1: makeable" in watched.page()
    assert "in failing" in (watched.output / ".hullbook-errors.log").read_text(encoding="utf-8")
    broken.clear()
    watched.shows("after the defect")


def test_nothing_is_written_where_the_output_disk_was(watched: Watched, monkeypatch: pytest.MonkeyPatch) -> None:
    """While the disk with the pages is not mounted they are not written into the folder below; then they come."""
    monkeypatch.setattr(watching, "RETRY_PAUSES", (0.2,))
    place_of = hints.place_of
    away = threading.Event()

    def other_disk(path: Path | str) -> hints.Place | None:
        place = place_of(path)
        return (place[0] + 1, place[1]) if place and away.is_set() else place

    monkeypatch.setattr(watching, "place_of", other_disk)
    away.set()
    watched.output.rename(watched.root / "unmounted")
    put_campaign(watched.campaigns, campaign_toml='title = "while it is away"\n')
    eventually(lambda: any("its disk is not mounted" in line for line in watched.log.warned))
    watched.rests()
    assert watched.page() == ""
    shutil.rmtree(watched.output, ignore_errors=True)
    (watched.root / "unmounted").rename(watched.output)
    away.clear()
    watched.shows("while it is away")


def test_a_burst_ends_in_the_final_state(watched: Watched) -> None:
    """After hundreds of quick edits in several folders each shows its last state."""
    for turn in range(100):
        for name in ("spring", "b", "c"):
            put_campaign(watched.campaigns, name, campaign_toml=f'title = "turn {turn} of {name}"\n')
    for name in ("spring", "b", "c"):
        watched.shows(f"turn 99 of {name}", name)


def test_a_removed_output_is_published_again(watched: Watched) -> None:
    """Pages come back, and the lock with them, when somebody removes the output folder."""
    watched.output.rename(watched.root / "old")
    put_campaign(watched.campaigns, campaign_toml='title = "again"\n')
    watched.shows("again")


def test_a_full_disk_is_tried_again(watched: Watched, monkeypatch: pytest.MonkeyPatch) -> None:
    """A build that can't write says so, leaves the pages, and is tried again after a pause."""
    from generator import disk

    monkeypatch.setattr(watching, "RETRY_PAUSES", (0.2,))
    create = disk.create
    is_full = threading.Event()
    is_full.set()

    def full(path: Path, data: bytes, *, durable: bool = False) -> None:
        if is_full.is_set() and "output" in path.parts and "lock" not in path.name:
            raise OSError(errno.ENOSPC, "No space left on device")
        create(path, data, durable=durable)

    monkeypatch.setattr(disk, "create", full)
    put_campaign(watched.campaigns, campaign_toml='title = "later"\n')
    eventually(lambda: any("trying again in" in line for line in watched.log.warned))
    assert "1: makeable" in watched.page()
    is_full.clear()
    watched.shows("later")


def test_a_folder_removed_and_made_again_is_built(watched: Watched) -> None:
    """A campaign deleted and recreated under its name shows what it holds now."""
    shutil.rmtree(watched.campaigns / "spring")
    put_campaign(watched.campaigns, targets_csv=TARGETS.replace(">= 16", ">= 21"))
    watched.shows("1: unreachable")


def test_a_folder_moved_out_and_in_again(watched: Watched) -> None:
    """A campaign moved elsewhere goes, edits there are nobody's business, and it comes back with them."""
    put_campaign(watched.campaigns, "other")
    watched.shows("1: makeable", "other")
    away = watched.root / "away"
    (watched.campaigns / "other").rename(away)
    watched.lacks("other")
    (away / "targets.csv").write_text(TARGETS.replace(">= 16", ">= 21"))
    away.rename(watched.campaigns / "other")
    watched.shows("1: unreachable", "other")


def test_a_clock_set_back_hides_no_edit(watched: Watched) -> None:
    """An edit whose moment lies before the last build's, or far ahead, is one all the same."""
    path = watched.campaigns / "spring" / "targets.csv"
    for moment, limit, verdict in ((1, "21", "unreachable"), (4_000_000_000, "15", "makeable")):
        path.write_text(TARGETS.replace(">= 16", f">= {limit}"))
        os.utime(path, (moment, moment))
        watched.shows(f"1: {verdict}")


def test_a_theme_is_followed(watched: Watched) -> None:
    """An edit of the theme that a campaign is shown in draws its pages anew, and no sooner than it is saved."""
    theme = watched.root / "mine"
    theme.mkdir()
    (theme / "style.css").write_text("p { color: red }")
    put_campaign(watched.campaigns, campaign_toml=f'theme = "{theme}"\n')
    watched.shows("theme mine")
    eventually(lambda: watched.builds() == 2)
    watched.rests()
    assert watched.builds() == 2
    (theme / "style.css").write_text("p { color: blue }")
    eventually(lambda: watched.builds() > 2, "the theme was not followed")


def test_the_status_tells_of_the_missing_folder(watched: Watched) -> None:
    """Monitoring hears that the campaigns folder is away, and that it is back."""
    away = watched.root / "away"
    watched.campaigns.rename(away)
    eventually(lambda: read_status(watched.output).get("state") == "trouble")
    away.rename(watched.campaigns)
    eventually(lambda: read_status(watched.output).get("state") == "well")


def test_a_page_written_into_is_restored_by_the_full_look(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """What somebody writes into a published page is gone after the next full look."""
    monkeypatch.setattr(watching, "FULL_LOOK_EVERY", 0.3)
    put_campaign(tmp_path / "campaigns")
    with light_pages():
        watcher = Watched(tmp_path, "always")
        try:
            watcher.shows("1: makeable")
            (tmp_path / "output/spring/index.html").write_text("my own words")
            watcher.shows("1: makeable")
        finally:
            watcher.end()


def test_an_overflow_of_events_wakes_the_loop(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """The observer tells of lost events in its log only; a scan follows at once."""
    monkeypatch.setattr(watching, "RESCAN_EVERY", 3600.0)
    monkeypatch.setattr(watching.Hints, "ensure", lambda self: True)
    put_campaign(tmp_path / "campaigns")
    with light_pages():
        watcher = Watched(tmp_path, "never")
        try:
            watcher.shows("1: makeable")
            put_campaign(watcher.campaigns, targets_csv=TARGETS.replace(">= 16", ">= 21"))
            logging.getLogger("watchdog.observers.inotify").warning("Inotify queue overflowed")
            watcher.shows("1: unreachable")
        finally:
            watcher.end()


def test_lost_events_are_made_up_for(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """When no event ever arrives the regular scan finds the change."""
    monkeypatch.setattr(watching, "RESCAN_EVERY", 0.2)
    monkeypatch.setattr(watching.Hints, "ensure", lambda self: True)
    put_campaign(tmp_path / "campaigns")
    with light_pages():
        watcher = Watched(tmp_path, "never")
        try:
            watcher.shows("1: makeable")
            put_campaign(watcher.campaigns, targets_csv=TARGETS.replace(">= 16", ">= 21"))
            watcher.shows("1: unreachable")
        finally:
            watcher.end()


def test_a_change_behind_the_stamps_is_found_by_the_full_look(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """Content that changed with size, time and inode alike is found when everything is looked at anew."""
    monkeypatch.setattr(watching, "FULL_LOOK_EVERY", 0.3)
    folder = put_campaign(tmp_path / "campaigns")
    with light_pages():
        watcher = Watched(tmp_path, "always")
        try:
            watcher.shows("1: makeable")
            path = folder / "targets.csv"
            status = path.stat()
            path.write_text(TARGETS.replace(">= 16", ">= 21"))
            os.utime(path, ns=(status.st_atime_ns, status.st_mtime_ns))
            watcher.shows("1: unreachable")
        finally:
            watcher.end()


def test_without_events_from_the_system_it_polls(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """Where the system refuses an observer (its limit is reached) the watcher says so and polls."""
    monkeypatch.setattr(watching, "POLL_EVERY", 0.1)
    monkeypatch.setattr(watching.Hints, "ensure", lambda self: False)
    put_campaign(tmp_path / "campaigns")
    with light_pages():
        watcher = Watched(tmp_path, "auto")
        try:
            watcher.shows("1: makeable")
            put_campaign(watcher.campaigns, campaign_toml='title = "polled"\n')
            watcher.shows("polled")
        finally:
            watcher.end()
    assert any("polling instead" in line for line in watcher.log.warned)


def test_a_second_watcher_is_refused(watched: Watched) -> None:
    """Two writers of one output folder are one too many."""
    with pytest.raises(LockedError, match=f"process {os.getpid()} on "):
        watch(make_job(watched.root), Told(), settle_seconds=0.1, poll="always", clock=lambda: NOON)


def test_a_linked_campaigns_folder_is_watched(tmp_path: Path) -> None:
    """A campaigns folder that is a link gives events like any other."""
    put_campaign(tmp_path / "real")
    (tmp_path / "campaigns").symlink_to(tmp_path / "real")
    with light_pages():
        watcher = Watched(tmp_path, "never")
        try:
            watcher.shows("1: makeable")
            put_campaign(tmp_path / "real", campaign_toml='title = "through a link"\n')
            watcher.shows("through a link")
        finally:
            watcher.end()


@pytest.mark.parametrize("poll", ["auto", "always"])
@pytest.mark.parametrize("number", [signal.SIGTERM, signal.SIGINT])
def test_the_command_from_start_to_signal(tmp_path: Path, poll: str, number: signal.Signals) -> None:
    """``hullbook watch`` publishes an edit for real, and ends cleanly with status 0 at a signal."""
    put_campaign(tmp_path / "campaigns", targets_csv="order,N\n1,>= 20\n")
    command = [sys.executable, "-m", "generator", "watch", "campaigns", "output", "--settle", "0.1", "--poll", poll]
    page = tmp_path / "output/spring/index.html"
    environment = {**os.environ, "PYTHONPATH": str(Path(__file__).parent.parent)}
    with subprocess.Popen(command, cwd=tmp_path, env=environment, stderr=subprocess.PIPE, text=True) as process:
        try:
            eventually(page.exists, "the page never came")
            put_campaign(tmp_path / "campaigns", targets_csv="order,N\n1,>= 31\n")
            eventually(lambda: "unreachable" in page.read_text(encoding="utf-8"))
            process.send_signal(number)
            _, told = process.communicate(timeout=PATIENCE)
        finally:
            process.kill()
    assert process.returncode == 0
    assert told.endswith("stopped watching\n")
    assert not (tmp_path / "output/.hullbook-lock").exists()


@pytest.mark.parametrize(
    "path, kind, is_folder, tells",
    [
        ("spring/assays.csv", "modified", False, True),
        ("spring/ASSAYS.CSV", "created", False, True),
        ("site.toml", "closed", False, True),
        ("spring/.~lock.assays.csv#", "created", False, False),
        ("spring/3F2A1B00", "moved", False, False),
        ("spring", "created", True, True),
        ("spring", "deleted", True, True),
        ("spring", "modified", True, False),
        (".", "deleted", True, True),
        ("spring/history", "created", True, False),
        ("spring/history/0001-x/inputs/assays.csv", "created", False, False),
        ("spring/history/head.json", "moved", False, False),
    ],
)
def test_which_events_may_tell_of_a_change(path: str, kind: str, is_folder: bool, tells: bool) -> None:
    """Input files and folders of campaigns count; temporary files, locks and the program's own history don't."""
    assert is_telling("/campaigns", f"/campaigns/{path}", kind, is_folder=is_folder) is tells


MOUNTS = """\
/dev/sda1 / ext4 rw 0 0
//server/blends /mnt/blends cifs rw 0 0
server:/x /mnt/with\\040space nfs4 rw 0 0
tmpfs /mnt/blends/local tmpfs rw 0 0
"""


@pytest.mark.parametrize(
    "path, kind",
    [
        ("/home/me", "ext4"),
        ("/mnt/blends", "cifs"),
        ("/mnt/blends/spring", "cifs"),
        ("/mnt/blends-2", "ext4"),
        ("/mnt/with space/x", "nfs4"),
        ("/mnt/blends/local/x", "tmpfs"),
    ],
)
def test_the_type_of_a_mount(path: str, kind: str) -> None:
    """The longest mount point above a path decides, by folder names and not by text."""
    assert mount_type(path, MOUNTS) == kind


def test_nothing_is_known_of_an_empty_mount_table() -> None:
    """Without a mount table, or with nonsense in it, the type is unknown."""
    assert mount_type("/x", "") == mount_type("/x", "nonsense\n") == ""


def test_polling_can_be_chosen(tmp_path: Path) -> None:
    """The option decides; automatic means events on a local disk."""
    assert [wants_events(tmp_path, poll) for poll in ("always", "never", "auto")] == [False, True, True]


def test_a_build_is_refused_while_watching(watched: Watched) -> None:
    """A build into the folder of a running watcher is refused with the watcher's name."""
    with pytest.raises(LockedError, match="is being written by process"):
        run(make_job(watched.root))
