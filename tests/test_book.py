import errno
import json
import os
import re
import shutil
import socket
from collections.abc import Iterable, Iterator
from dataclasses import replace
from datetime import timedelta
from pathlib import Path

import pytest

from generator import disk, identity
from generator.book import check, check_job
from generator.disk import WriteError, stamp
from generator.findings import answers
from generator.folders import NoCampaignsError, find_campaigns
from generator.history.archive import read_history
from generator.history.check import check_history
from generator.job import WrongUseError
from generator.report.manifest import MANIFEST_NAME
from generator.tasks import Chapter, Task
from generator.workers import Here, Tick
from tests.sample import ASSAYS, TARGETS, Told, light_pages, make_job, pages_of, put_campaign, run, text_of


@pytest.fixture(autouse=True)
def light() -> Iterator[None]:
    with light_pages():
        yield


def results(output: Path, slug: str = "spring") -> dict:
    return json.loads(text_of(output, f"{slug}/results.json"))


def test_a_campaign_becomes_pages_and_a_revision(tmp_path: Path) -> None:
    """One build publishes pages, results and index, and records revision 1 with the given moment."""
    put_campaign(tmp_path / "campaigns")
    log = Told()
    outcome = run(make_job(tmp_path), log)
    assert outcome.is_well
    assert outcome.made == ("spring",)
    assert "revision 1: First answers." in text_of(tmp_path / "output", "spring/index.html")
    published = results(tmp_path / "output")
    (revision,) = read_history(tmp_path / "campaigns/spring/history").revisions
    assert published["revision"] == {"number": 1, "digest": revision.digest, "recorded": "2026-03-02T12:00:00Z"}
    assert [order["verdict"] for order in published["orders"]] == ["makeable", "makeable"]
    assert log.said == log.warned == []
    line = r"1 campaign, 1 built, [0-9]+ files written, 0 removed, 0 held, 0 with problems, [0-9]+\.[0-9]{2} s"
    assert re.fullmatch(line, outcome.sentence())
    assert log.warned == []


def test_the_second_build_writes_nothing(tmp_path: Path) -> None:
    """A build with nothing changed touches no file but the status, whenever it runs and however closely it looks."""
    put_campaign(tmp_path / "campaigns")
    put_campaign(tmp_path / "campaigns", "autumn", assays_csv="lot\n")
    run(make_job(tmp_path))
    paths = [path for path in tmp_path.rglob("*") if path.is_file() and path.name != "status.json"]
    before = {path: stamp(path) for path in paths}
    run(make_job(tmp_path), thorough=True)
    outcome = run(make_job(tmp_path, moment=make_job(tmp_path).moment + timedelta(days=40)))
    assert {path: stamp(path) for path in paths} == before
    assert (outcome.made, outcome.written, outcome.removed) == ((), 0, 0)
    assert outcome.kept == ("autumn", "spring")
    assert not outcome.is_well


def test_unchanged_campaigns_are_not_answered_again(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """An edit in one campaign answers and draws that one alone."""
    for name in ("a", "b", "c"):
        put_campaign(tmp_path / "campaigns", name)
    run(make_job(tmp_path))
    asked: list[str] = []
    find = answers.find
    monkeypatch.setattr(answers, "find", lambda campaign: asked.append(campaign.slug) or find(campaign))
    put_campaign(tmp_path / "campaigns", "b", targets_csv=TARGETS.replace("16", "17"))
    assert run(make_job(tmp_path)).made == ("b",)
    assert asked == ["b"]


def test_recorded_answers_are_loaded_not_found_again(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """A new output folder is filled from the newest revision, byte for byte, without any solving."""
    put_campaign(tmp_path / "campaigns")
    run(make_job(tmp_path))
    monkeypatch.setattr(answers, "find", pytest.fail)
    run(make_job(tmp_path, output=tmp_path / "second"))
    assert pages_of(tmp_path / "second") == pages_of(tmp_path / "output")


def test_a_changed_answer_is_told(tmp_path: Path) -> None:
    """A new revision tells what changed, on the campaign's page and on the index."""
    put_campaign(tmp_path / "campaigns")
    run(make_job(tmp_path))
    put_campaign(tmp_path / "campaigns", targets_csv=TARGETS.replace(">= 16", ">= 21"))
    run(make_job(tmp_path))
    page = text_of(tmp_path / "output", "spring/index.html")
    assert "changed: Order 1 is now unreachable; it was makeable." in page
    assert "Order 1 lost on 2 March (unreachable)" in text_of(tmp_path / "output", "index.html")
    assert check_history(tmp_path / "campaigns/spring/history") == ()


def test_gone_orders_and_campaigns_lose_their_pages(tmp_path: Path) -> None:
    """Pages of an order or campaign that is no longer there are removed, foreign files stay."""
    put_campaign(tmp_path / "campaigns")
    put_campaign(tmp_path / "campaigns", "autumn")
    run(make_job(tmp_path))
    (tmp_path / "output/autumn/photo.jpg").write_text("mine")
    put_campaign(tmp_path / "campaigns", targets_csv=TARGETS.splitlines()[0] + "\n1,10,>= 20,>= 16\n")
    shutil.rmtree(tmp_path / "campaigns/autumn")
    run(make_job(tmp_path))
    pages = pages_of(tmp_path / "output")
    assert "spring/orders/2.html" not in pages
    assert [path for path in pages if path.startswith("autumn")] == ["autumn/photo.jpg"]
    assert "autumn" not in text_of(tmp_path / "output", "index.html")


def test_a_copied_folder_is_a_campaign_of_its_own(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """A folder copied with its history shows its own name, and needs no new answers."""
    put_campaign(tmp_path / "campaigns")
    run(make_job(tmp_path))
    shutil.copytree(tmp_path / "campaigns/spring", tmp_path / "campaigns/summer")
    monkeypatch.setattr(answers, "find", pytest.fail)
    assert run(make_job(tmp_path)).made == ("summer",)
    assert results(tmp_path / "output", "summer")["campaign"]["slug"] == "summer"
    assert results(tmp_path / "output", "summer")["campaign"]["title"] == "summer"
    assert len(read_history(tmp_path / "campaigns/summer/history").revisions) == 1


def test_a_stopped_campaign_keeps_its_last_good_answers(tmp_path: Path) -> None:
    """A broken file leaves the last good pages under a banner; results have new problems, old answers."""
    put_campaign(tmp_path / "campaigns", campaign_toml='title = "Spring blends"\n')
    put_campaign(tmp_path / "campaigns", "other")
    run(make_job(tmp_path))
    good = results(tmp_path / "output")
    put_campaign(tmp_path / "campaigns", campaign_toml="title = \n", assays_csv="lot\n")
    log = Told()
    outcome = run(make_job(tmp_path), log)
    assert not outcome.is_well
    page = text_of(tmp_path / "output", "spring/index.html")
    assert page.startswith("Spring blends\n1: makeable")
    assert "banner: campaign.toml" in page
    stopped = results(tmp_path / "output")
    assert stopped["orders"] == good["orders"]
    assert stopped["revision"] == good["revision"]
    assert {problem["severity"] for problem in stopped["problems"]} >= {"stops"}
    assert (tmp_path / "output/spring/orders/1.html").exists()
    assert outcome.with_problems == 1
    assert any("campaign.toml" in line for line in log.warned)
    assert len(read_history(tmp_path / "campaigns/spring/history").revisions) == 1
    assert outcome.kept == ("other",)


def test_a_mended_campaign_loses_its_banner(tmp_path: Path) -> None:
    """After the file is mended the pages are as if nothing had been."""
    put_campaign(tmp_path / "campaigns")
    run(make_job(tmp_path))
    good = pages_of(tmp_path / "output")
    put_campaign(tmp_path / "campaigns", assays_csv=b"\x00\x00")
    run(make_job(tmp_path))
    assert pages_of(tmp_path / "output") != good
    put_campaign(tmp_path / "campaigns")
    assert run(make_job(tmp_path)).is_well
    assert pages_of(tmp_path / "output") == good


def test_a_campaign_that_never_worked_has_a_problem_page(tmp_path: Path) -> None:
    """Without a good revision the page shows the problems, and results hold them; others build."""
    put_campaign(tmp_path / "campaigns", assays_csv="")
    put_campaign(tmp_path / "campaigns", "other")
    outcome = run(make_job(tmp_path))
    assert outcome.made == ("other", "spring")
    assert not outcome.is_well
    assert "problem: assays.csv" in text_of(tmp_path / "output", "spring/index.html")
    assert results(tmp_path / "output")["orders"] == []
    assert results(tmp_path / "output")["revision"] is None
    assert not (tmp_path / "campaigns/spring/history").exists()


def test_an_unexpected_error_is_a_problem_with_a_reference(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """A defect in one campaign is told with a reference and logged with its traceback; others go on."""
    put_campaign(tmp_path / "campaigns")
    run(make_job(tmp_path))
    put_campaign(tmp_path / "campaigns", assays_csv=ASSAYS.replace("A,100", "A,90"))
    put_campaign(tmp_path / "campaigns", "other")
    find = answers.find

    def fail(campaign):
        if campaign.slug == "spring":
            raise ZeroDivisionError("a defect")
        return find(campaign)

    with monkeypatch.context() as patch:
        patch.setattr(answers, "find", fail)
        log = Told()
        assert run(make_job(tmp_path), log).made == ("other", "spring")
        first = text_of(tmp_path / "output", "spring/index.html")
        run(make_job(tmp_path))
        assert text_of(tmp_path / "output", "spring/index.html") == first
    reference = first.split("internal error ")[1][:8]
    logged = text_of(tmp_path / "output", ".hullbook-errors.log")
    assert f"spring {reference}\n" in logged
    assert "ZeroDivisionError: a defect" in logged
    assert "1: makeable" in first
    assert any(reference in line for line in log.warned)
    assert run(make_job(tmp_path)).is_well


def test_a_defect_in_drawing_leaves_the_published_pages(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """Where even the last good answers can't be drawn, the published pages stay and the index tells."""
    put_campaign(tmp_path / "campaigns")
    run(make_job(tmp_path))
    before = text_of(tmp_path / "output", "spring/index.html")
    put_campaign(tmp_path / "campaigns", assays_csv=ASSAYS.replace("A,100", "A,90"))

    def fail(pages, theme):
        raise RuntimeError("no ink")

    with monkeypatch.context() as patch:
        patch.setattr("generator.report.pages.draw_campaign", fail)
        outcome = run(make_job(tmp_path))
        assert not outcome.is_well
        assert text_of(tmp_path / "output", "spring/index.html") == before
        put_campaign(tmp_path / "campaigns", "fresh")
        assert not run(make_job(tmp_path)).is_well
        assert "fresh" not in text_of(tmp_path / "output", "index.html")
    assert run(make_job(tmp_path)).is_well
    assert "fresh" in text_of(tmp_path / "output", "index.html")


def test_a_read_only_campaign_is_published_without_a_revision(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """Where no revision can be written the pages come all the same, with a note; later it is made up for."""
    put_campaign(tmp_path / "campaigns")
    create = disk.create

    def read_only(path: Path, data: bytes, *, durable: bool = False) -> None:
        if "history" in path.parts:
            raise OSError(errno.EROFS, "Read-only file system")
        create(path, data, durable=durable)

    monkeypatch.setattr("generator.history.archive.create", read_only)
    monkeypatch.setattr("generator.lock.create", read_only)
    log = Told()
    assert run(make_job(tmp_path), log).is_well
    assert any("not recorded as a revision" in line for line in log.warned)
    page = text_of(tmp_path / "output", "spring/index.html")
    assert "not recorded as a revision" in page
    assert str(tmp_path) not in page
    assert results(tmp_path / "output")["revision"] is None
    assert run(make_job(tmp_path)).made == ()
    monkeypatch.undo()
    with light_pages():
        assert run(make_job(tmp_path)).made == ("spring",)
    assert results(tmp_path / "output")["revision"]["number"] == 1


def test_a_damaged_revision_never_stops_a_build(tmp_path: Path) -> None:
    """A damaged newest revision is a note; the answers are found again and shown."""
    put_campaign(tmp_path / "campaigns")
    run(make_job(tmp_path))
    (head,) = (tmp_path / "campaigns/spring/history").glob("0001-*")
    (head / "results.json").write_bytes(b"{}")
    shutil.rmtree(tmp_path / "output")
    assert run(make_job(tmp_path)).is_well
    page = text_of(tmp_path / "output", "spring/index.html")
    assert "1: makeable" in page
    assert "results.json was altered" in page
    (head / "revision.json").write_bytes(b"{}")
    shutil.rmtree(tmp_path / "output")
    assert run(make_job(tmp_path)).is_well
    assert results(tmp_path / "output")["revision"]["number"] == 2


def test_another_engine_with_the_same_answers_makes_no_revision(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """A new version of the program answers again, and records only answers that differ."""
    put_campaign(tmp_path / "campaigns")
    run(make_job(tmp_path))
    monkeypatch.setattr(identity, "engine", lambda: "another")
    monkeypatch.setattr(identity, "program", lambda: "another")
    assert run(make_job(tmp_path)).made == ("spring",)
    assert results(tmp_path / "output")["revision"]["number"] == 1
    find = answers.find

    def worse(campaign):
        findings = find(campaign)
        return replace(findings, orders=tuple(replace(order, verdict="edge") for order in findings.orders))

    monkeypatch.setattr(answers, "find", worse)
    monkeypatch.setattr(identity, "program", lambda: "a third")
    run(make_job(tmp_path))
    head = read_history(tmp_path / "campaigns/spring/history").head
    assert (head.number, head.cause) == (2, "program version")


def test_a_history_folder_elsewhere(tmp_path: Path) -> None:
    """With a history folder of its own nothing is written into the campaigns folder."""
    folder = put_campaign(tmp_path / "campaigns")
    run(make_job(tmp_path, history=tmp_path / "revisions"))
    assert sorted(path.name for path in folder.iterdir()) == ["assays.csv", "targets.csv"]
    assert len(read_history(tmp_path / "revisions/spring").revisions) == 1


def test_one_campaign_alone(tmp_path: Path) -> None:
    """CAMPAIGNS may be one campaign; the site.toml beside it applies, as in a build of all."""
    folder = put_campaign(tmp_path / "campaigns")
    (tmp_path / "campaigns/site.toml").write_text('currency = "SEK"\n')
    run(make_job(tmp_path))
    run(make_job(tmp_path, campaigns=folder, output=tmp_path / "alone"))
    assert results(tmp_path / "alone")["campaign"]["currency"] == "SEK"
    assert results(tmp_path / "alone") == results(tmp_path / "output")


def test_the_same_site_from_other_folders(tmp_path: Path) -> None:
    """The same campaigns in another place give the same bytes, and no page names a path, host or user."""
    for place in ("here", "there/deeper"):
        put_campaign(tmp_path / place / "campaigns")
        put_campaign(tmp_path / place / "campaigns", "broken", assays_csv="lot\n")
        run(make_job(tmp_path / place))
    here, there = pages_of(tmp_path / "here/output"), pages_of(tmp_path / "there/deeper/output")
    assert here == there
    manifests = [(tmp_path / place / "output" / MANIFEST_NAME).read_bytes() for place in ("here", "there/deeper")]
    assert manifests[0] == manifests[1]
    for data in (*here.values(), manifests[0]):
        assert os.fsencode(tmp_path) not in data
        assert socket.gethostname().encode() not in data


def test_a_removed_page_is_made_again(tmp_path: Path) -> None:
    """A page that somebody deleted from the output folder comes back with the next build."""
    put_campaign(tmp_path / "campaigns")
    run(make_job(tmp_path))
    for address in ("spring/orders/1.html", "index.html", "method.html"):
        (tmp_path / "output" / address).unlink()
        run(make_job(tmp_path))
        assert (tmp_path / "output" / address).exists()


def test_an_own_theme_is_known_to_the_fingerprint(tmp_path: Path) -> None:
    """An edit in a campaign's theme folder draws that campaign again."""
    theme = tmp_path / "theme"
    theme.mkdir()
    (theme / "style.css").write_text("p { color: red }")
    put_campaign(tmp_path / "campaigns", campaign_toml=f'theme = "{theme}"\n')
    put_campaign(tmp_path / "campaigns", "other")
    run(make_job(tmp_path))
    (theme / "style.css").write_text("p { color: blue }")
    assert run(make_job(tmp_path)).made == ("spring",)


def test_an_unknown_theme_of_a_campaign_is_a_note(tmp_path: Path) -> None:
    """A campaign that names a theme that is not there is drawn in the plain one, and says so."""
    put_campaign(tmp_path / "campaigns", campaign_toml='theme = "fancy"\n')
    run(make_job(tmp_path))
    page = text_of(tmp_path / "output", "spring/index.html")
    assert "theme plain" in page
    assert "this theme can't be used" in page
    assert run(make_job(tmp_path)).made == ()


def test_an_unknown_theme_of_the_site_stops_nothing(tmp_path: Path) -> None:
    """A site.toml that names a theme that is not there leaves the index in the plain one, and is told."""
    put_campaign(tmp_path / "campaigns")
    (tmp_path / "campaigns/site.toml").write_text('theme = "fancy"\n')
    log = Told()
    assert run(make_job(tmp_path), log).made == ("spring",)
    assert "spring" in text_of(tmp_path / "output", "index.html")
    assert any("theme fancy: no such theme" in line for line in log.warned)
    assert run(make_job(tmp_path)).written == 0


def test_killed_at_any_rename_the_next_build_completes(tmp_path: Path) -> None:
    """Kill -9 before each rename of a build in turn: the next build gives the same site as an unharmed one."""

    class Killed(BaseException):
        pass

    put_campaign(tmp_path / "campaigns")
    run(make_job(tmp_path))
    shutil.copytree(tmp_path / "output", tmp_path / "first")
    put_campaign(tmp_path / "campaigns", targets_csv=TARGETS.replace("2,30", "3,30"))
    run(make_job(tmp_path))
    wanted = pages_of(tmp_path / "output")
    for fatal in range(20):
        output = tmp_path / f"try{fatal}"
        shutil.copytree(tmp_path / "first", output)
        left = [fatal]

        def strike(path: Path, left: list[int] = left) -> None:
            if left[0] == 0:
                raise Killed
            left[0] -= 1

        try:
            run(make_job(tmp_path, output=output), before_replace=strike)
        except Killed:
            run(make_job(tmp_path, output=output))
            assert pages_of(output) == wanted
        else:
            assert fatal > 4
            break
    else:
        pytest.fail("the build never ran to its end")


def test_an_output_that_can_not_be_written_is_an_error(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """A full output disk ends the build with a clear error, and the pages stay."""
    put_campaign(tmp_path / "campaigns")
    run(make_job(tmp_path))
    before = pages_of(tmp_path / "output")
    put_campaign(tmp_path / "campaigns", targets_csv=TARGETS.replace("16", "17"))

    def full(path: Path, data: bytes, *, durable: bool = False) -> None:
        raise OSError(errno.ENOSPC, "No space left on device")

    with monkeypatch.context() as patch:
        patch.setattr(disk, "create", full)
        with pytest.raises(WriteError, match="no space left on device"):
            run(make_job(tmp_path))
    assert pages_of(tmp_path / "output") == before
    assert run(make_job(tmp_path)).is_well


def test_only_named_folders_are_read(tmp_path: Path) -> None:
    """A build of named folders leaves others as published, and unready new ones out."""
    first = put_campaign(tmp_path / "campaigns", "first")
    run(make_job(tmp_path))
    second = put_campaign(tmp_path / "campaigns", "second")
    torn = put_campaign(tmp_path / "campaigns", "torn", assays_csv="lot,")
    put_campaign(tmp_path / "campaigns", "first", targets_csv=TARGETS.replace("16", "17"))
    outcome = run(make_job(tmp_path), only=frozenset({second}), without=frozenset({torn}))
    assert outcome.made == ("second",)
    assert "torn" not in text_of(tmp_path / "output", "index.html")
    assert run(make_job(tmp_path), only=frozenset({first}), without=frozenset({torn})).made == ("first",)


class Away(Here):
    """Makes campaigns after one folder was taken away, as when a share goes while a build is on."""

    def __init__(self, folder: Path) -> None:
        self._folder = folder

    def make_all(self, tasks: Iterable[Task], tick: Tick) -> Iterator[tuple[Task, Chapter]]:
        self._folder.rename(self._folder.with_name(".away"))
        return super().make_all(tasks, tick)


def test_a_folder_that_goes_during_a_build_leaves_its_pages(tmp_path: Path) -> None:
    """A campaign that can't be found when its turn comes stays as published: nothing is said of missing files."""
    folder = put_campaign(tmp_path / "campaigns")
    run(make_job(tmp_path))
    before = text_of(tmp_path / "output", "spring/index.html")
    put_campaign(tmp_path / "campaigns", targets_csv=TARGETS.replace("16", "17"))
    put_campaign(tmp_path / "campaigns", "other")
    assert run(make_job(tmp_path), makers=Away(folder)).made == ("other",)
    assert text_of(tmp_path / "output", "spring/index.html") == before
    assert "spring" in text_of(tmp_path / "output", "index.html")


def test_a_build_that_is_not_wanted_any_more_ends_early(tmp_path: Path) -> None:
    """Asked to end, a build finishes the campaign at hand and leaves the rest for the next."""
    for name in ("a", "b", "c"):
        put_campaign(tmp_path / "campaigns", name)
    pages = tmp_path / "output"
    assert run(make_job(tmp_path), is_wanted=lambda: not (pages / "a").exists()).made == ("a",)
    assert run(make_job(tmp_path)).made == ("b", "c")


@pytest.mark.parametrize(
    "names, slugs",
    [
        (["Spring 2026"], ["Spring-2026"]),
        (["a b", "a-b"], ["a-b-2", "a-b"]),
        (["assets", "CON"], ["CON-2", "assets-2"]),
        (["x", ".hidden"], ["x"]),
        (["Ärzte"], ["Ärzte"]),
    ],
)
def test_slugs_of_folders(tmp_path: Path, names: list[str], slugs: list[str]) -> None:
    """Slugs are made of folder names; a name that is one already keeps it; hidden folders are none."""
    for name in names:
        put_campaign(tmp_path, name)
    assert [folder.slug for folder in find_campaigns(tmp_path)] == slugs


def test_folders_without_input_are_no_campaigns(tmp_path: Path) -> None:
    """Folders of other things are left alone, and so are files beside the campaigns."""
    put_campaign(tmp_path)
    (tmp_path / "drafts").mkdir()
    (tmp_path / "drafts/notes.md").write_text("x")
    (tmp_path / "todo.txt").write_text("x")
    assert [folder.name for folder in find_campaigns(tmp_path)] == ["spring"]


def test_names_in_other_letters_are_read(tmp_path: Path) -> None:
    """Assays.CSV is assays.csv; of two the exact one counts, and the other is noted."""
    folder = put_campaign(tmp_path / "campaigns")
    (folder / "assays.csv").rename(folder / "Assays.CSV")
    assert run(make_job(tmp_path)).is_well
    (folder / "assays.csv").write_text(ASSAYS)
    assert run(make_job(tmp_path)).is_well
    assert "Assays.CSV: it is not read" in text_of(tmp_path / "output", "spring/index.html")


def test_a_site_file_inside_a_campaign_is_noted(tmp_path: Path) -> None:
    """A site.toml in the wrong place is not silently left unread."""
    put_campaign(tmp_path / "campaigns", site_toml='currency = "SEK"\n')
    run(make_job(tmp_path))
    assert "stands inside the campaign" in text_of(tmp_path / "output", "spring/index.html")


def test_an_unreadable_file_stops_its_campaign(tmp_path: Path) -> None:
    """A file that can't be read is one problem that says so, not one that it is missing."""
    folder = put_campaign(tmp_path / "campaigns")
    (folder / "assays.csv").unlink()
    (folder / "assays.csv").mkdir()
    log = Told()
    assert not run(make_job(tmp_path), log).is_well
    (line,) = log.warned
    assert line.startswith("spring: assays.csv: it can't be read: it is not a file; ")


@pytest.mark.parametrize(
    "campaigns, output, history",
    [
        ("campaigns", "campaigns/output", None),
        ("campaigns", "campaigns", None),
        ("site/campaigns", "site", None),
        ("campaigns", "output", "output/history"),
    ],
)
def test_folders_that_feed_on_each_other_are_refused(
    tmp_path: Path, campaigns: str, output: str, history: str | None
) -> None:
    """Output inside campaigns, campaigns inside output, history inside output: wrong use."""
    put_campaign(tmp_path / campaigns)
    job = make_job(
        tmp_path,
        campaigns=tmp_path / campaigns,
        output=tmp_path / output,
        history=None if history is None else tmp_path / history,
    )
    with pytest.raises(WrongUseError, match="choose another"):
        check_job(job)


def test_no_campaigns_folder_is_told(tmp_path: Path) -> None:
    """A folder that is not there is wrong use, and an empty one is an empty site."""
    with pytest.raises(NoCampaignsError, match="there is no folder"):
        check_job(make_job(tmp_path))
    (tmp_path / "campaigns").mkdir()
    assert run(make_job(tmp_path)).is_well
    assert (tmp_path / "output/index.html").exists()


def test_check_reads_and_writes_nothing(tmp_path: Path) -> None:
    """Check names problems of input and history, and leaves no trace."""
    put_campaign(tmp_path / "campaigns")
    put_campaign(tmp_path / "campaigns", "broken", assays_csv="lot\n")
    run(make_job(tmp_path))
    (changes,) = (tmp_path / "campaigns/spring/history").glob("0001-*/changes.json")
    changes.write_text("[ ]")
    before = {path: stamp(path) for path in tmp_path.rglob("*")}
    found = {folder.slug: problems for folder, problems in check(tmp_path / "campaigns", None)}
    assert {path: stamp(path) for path in tmp_path.rglob("*")} == before
    assert ["changes.json was altered" in problem.message for problem in found["spring"]] == [True]
    assert found["broken"] != ()


def test_the_error_log_is_bounded(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """The log of unexpected errors is begun anew when it is long."""
    monkeypatch.setattr("generator.run._LONGEST_LOG", 10)
    monkeypatch.setattr(answers, "find", lambda campaign: 1 / 0)
    put_campaign(tmp_path / "campaigns")
    run(make_job(tmp_path))
    size = (tmp_path / "output/.hullbook-errors.log").stat().st_size
    run(make_job(tmp_path))
    assert (tmp_path / "output/.hullbook-errors.log").stat().st_size == size
