"""History pages tell edits, changes and causes; what was drawn once is not drawn again."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace
from datetime import UTC, datetime, timedelta
from pathlib import Path

import pytest

from generator.findings.answers import find
from generator.history.archive import Entry, entries
from generator.history.chronicle import GROUP, Line, read_line, read_lines, recent
from generator.history.recording import Material, record_story
from generator.history.records import Cause, Change, Comparison, Edit, LotPoint, OrderPoint, Part, Story, Summary
from generator.intake.campaign import read_campaign
from generator.report.figures import trends
from generator.report.history_pages import HistoryFiles, Shelf, draw_history
from generator.report.history_view import MOST_PARTS, changes_section
from generator.report.manifest import Published
from generator.report.pages import assets, draw_campaign, draw_index, draw_method
from generator.report.publish import Publication
from generator.report.themes import Theme, load_theme
from generator.report.views import CampaignPages, index_entry
from tests.history.making import Tables
from tests.report.checks import PageReader, check_pages
from tests.sample import TARGETS, light_pages, make_job, put_campaign, run, text_of

EDITS = tuple(
    Edit(kind="lot", name=name, field="cost", old="1", new="2", clause=f"lot {name} is dearer") for name in "AB"
)
MOMENT = datetime(2026, 3, 2, 12, tzinfo=UTC)
HOSTILE = """<b onclick="x()">&"'</script>{{ 7*7 }} $x$"""


def table(**cells: str) -> Tables:
    """Lots A and B and an order midway, with the cells of lot A as given."""
    return Tables(
        lots={
            "A": {"stock": "100", "cost": "10", "N": "10", "K": "20", **cells},
            "B": {"stock": "100", "cost": "20", "N": "30", "K": "5"},
        },
        orders={"1042": {"amount": "10", "N": ">= 20", "K": ">= 10"}, "7": {"amount": "10", "N": ">= 5"}},
        toml="[components.N]\nsd = 0.2\n[components.K]\nsd = 0.2\n",
    )


def read(files: object):
    return read_campaign(files, slug="spring", folder="spring")  # type: ignore[arg-type]


def record(folder: Path, one: Tables, days: float) -> CampaignPages:
    """Record one revision; the campaign's pages as a build would have them."""
    campaign = one.campaign()
    findings = find(campaign)
    record_story(
        folder,
        Material(
            inputs=one.files(),
            campaign=campaign,
            findings=findings,
            cause="inputs",
            moment=MOMENT + timedelta(days=days),
            program="0.1.0",
            read=read,
        ),
    )
    past = read_lines(recent(entries(folder)))
    return CampaignPages(campaign=campaign, findings=findings, version="0.1.0", past=past)


def shelf(folder: Path, published: dict[str, str] | None = None) -> Shelf:
    return Shelf(entries=entries(folder), read=read_line, published=published or {})


@pytest.fixture(scope="module")
def theme() -> Theme:
    return load_theme()


@pytest.fixture(scope="module")
def folder(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """Three revisions: first answers, a dearer lot, and the assay that lost order 1042."""
    folder = tmp_path_factory.mktemp("history")
    record(folder, table(), 0)
    record(folder, table(cost="13"), 3)
    return folder


@pytest.fixture(scope="module")
def book(folder: Path) -> CampaignPages:
    return record(folder, table(cost="13", K="12.5"), 10)


@pytest.fixture(scope="module")
def output(book: CampaignPages, folder: Path, theme: Theme) -> dict[str, bytes]:
    """All files of an output that holds this campaign."""
    return {
        **assets(theme),
        **draw_campaign(book, theme),
        **draw_history(book, theme, shelf(folder)).files,
        "index.html": draw_index([index_entry(book)], theme),
        "method.html": draw_method(theme),
        "spring/results.json": b"{}",
    }


def words(files: dict[str, bytes] | HistoryFiles, address: str) -> str:
    """The text of a page as one line."""
    held = files.files if isinstance(files, HistoryFiles) else files
    text = " ".join(" ".join(PageReader(held[address].decode()).words).split())
    return text.replace("\N{NO-BREAK SPACE}", " ")


def test_every_page_is_whole(output: dict[str, bytes]) -> None:
    """Links of history pages, and links to them, lead somewhere; every table and drawing is told in words."""
    pages = {address: data for address, data in output.items() if not address.endswith(".csv")}
    exported = dict.fromkeys(("spring/orders.csv", "spring/lots.csv", "spring/plan.csv"), b"")
    check_pages({**exported, **pages})
    assert {"spring/history/index.html", "spring/history/0001.html", "spring/history/0003.html"} <= output.keys()


def test_a_revision_tells_edits_changes_and_causes(output: dict[str, bytes]) -> None:
    """The page of the revision that lost an order says which edit did it and that undoing it restores the order."""
    page = words(output, "spring/history/0003.html")
    assert "Order 1042 lost on 12 March (unreachable): lot A's K re-assayed from 20 to 12.5" in page
    assert "Undoing it brings the old verdict back." in page
    assert "Lot A's K re-assayed from 20 to 12.5." in page
    assert "Hull before and after" in page
    assert "Since revision 1, the first revision" in page
    assert "Revision 1, the first revision All revisions" in page


def test_a_cost_is_told_with_its_parts(output: dict[str, bytes]) -> None:
    """The page of the revision that made a recipe dearer says by how much each edit did."""
    assert "+1.50 EUR per t from lot A's cost rose from 10 to 13 EUR per t." in words(
        output, "spring/history/0002.html"
    )


def changed(*changes: Change) -> str:
    """The text of the section of these changes."""
    comparison = Comparison(number=1, recorded="2026-03-01T12:00:00Z", title="", edits=EDITS, changes=changes)
    (table,) = changes_section(comparison, "changes", "Changes").tables
    texts = [[cell.text + (f" / {cell.detail}" if cell.detail else "") for cell in row.cells] for row in table.rows]
    return "\n".join([" | ".join(column.title for column in table.columns), *map(" | ".join, texts)])


def test_every_kind_of_cause_in_words() -> None:
    """Numbers have their parts with units, recipes and plans the edits that did it, and what is not known is said."""
    parts = (Part(group="lot A", edits=(0,), amount=0.031), Part(group="lots", edits=(0, 1), amount=-0.01, error=0.004))
    chance = Change(
        kind="conformity",
        subject="1",
        old=0.9,
        new=0.921,
        sentence="Order 1: the cheapest recipe holds all limits with 92.1 %; it was 90.0 %.",
        cause=Cause(parts=parts, remark="Divided by file only."),
        unit="percentage points",
        places=1,
    )
    recipe = Change(kind="recipe", subject="1", old=0.1, new=0.3, sentence="Order 1: the cheapest recipe moved.")
    alone = replace(recipe, cause=Cause(suffices=((1,),), at_least=1, restores=(1,)))
    found = replace(recipe, cause=Cause(found=(0, 1), at_least=2, remark="Some of these edits may not be needed."))
    plan = Change(kind="plan", subject="", old=1.0, new=2.0, sentence="The plan: its value rose to 2 EUR from 1 EUR.")
    unknown = replace(plan, cause=Cause(remark="Not looked for: at least 9 more plans would be needed."))
    assert changed(chance, alone, found, unknown).splitlines() == [
        "Of | What changed | Cause",
        "Order 1 | The cheapest recipe holds all limits with 92.1 %; it was 90.0 %. | "
        "+3.1 percentage points from lot A is dearer; "
        "−1.0 percentage points (sampled, ± 0.4) from 2 edits of lots. / Divided by file only.",
        "Order 1 | The cheapest recipe moved. | Lot B is dearer. / Undoing it brings the old recipe back.",
        "Order 1 | The cheapest recipe moved. | 2 edits together: lot A is dearer together with lot B is dearer "
        "(no single one does). / Some of these edits may not be needed.",
        "Plan | Its value rose to 2 EUR from 1 EUR. | Not looked for: at least 9 more plans would be needed.",
    ]


def test_many_parts_are_told_by_the_greatest() -> None:
    """Of a number that very many rows changed the greatest parts are told, and the sum of the others."""
    parts = tuple(Part(group="lot A", edits=(0,), amount=float(amount)) for amount in range(20, 0, -1))
    change = Change(kind="cost", subject="1", old=0.0, new=210.0, sentence="", unit="EUR per t", places=2)
    cell = changed(replace(change, cause=Cause(parts=parts))).splitlines()[-1]
    assert cell.count("from lot A is dearer") == MOST_PARTS - 1
    assert cell.endswith("+91.00 EUR per t from 13 smaller parts.")


def test_without_any_cause_there_is_no_column_for_it() -> None:
    """A table of changes that have no cause has no empty column."""
    role = Change(kind="role", subject="A", old="inner", new="corner", sentence="Lot A is now a corner lot.")
    assert changed(role) == "Of | What changed\nLot A | Is now a corner lot."


def test_the_timeline_has_every_headline(output: dict[str, bytes], book: CampaignPages) -> None:
    """The timeline lists all revisions, newest first, with their headlines and trends."""
    page = words(output, "spring/history/index.html")
    assert page.index("Revision 3") < page.index("Revision 2") < page.index("Revision 1")
    for line in book.past:
        assert line.headline.replace("\N{NO-BREAK SPACE}", " ") in page
    assert "Orders by verdict" in page
    assert "Cost of the cheapest recipe" in page


def test_timeline_and_method_have_a_list_to_jump_by(output: dict[str, bytes]) -> None:
    """Every part of the two long pages without facts can be reached from their first screen."""
    for address in ("spring/history/index.html", "method.html"):
        page = PageReader(output[address].decode())
        sections = {f"#{values['id']}" for tag, values in page.tags if tag == "section" and "id" in values}
        assert sections <= set(page.links), address


def test_an_order_and_a_lot_tell_their_own_past(output: dict[str, bytes]) -> None:
    """Order and lot pages list the revisions that touched them, the cause beside, and draw what moved."""
    order, lot = words(output, "spring/orders/1042.html"), words(output, "spring/lots/A.html")
    assert "Is now unreachable; it was makeable. Cause: lot A's K re-assayed from 20 to 12.5." in order
    assert "Its cost rose from 10 to 13 EUR per t." in lot
    assert "Assay of K" in lot
    assert "one standard uncertainty" in lot
    assert "History" not in words(output, "spring/lots/B.html")


def test_without_a_past_no_page_leads_to_a_history(book: CampaignPages, theme: Theme) -> None:
    """Editions and packs that have no history pages have no links to them either."""
    pages = draw_campaign(replace(book, past=()), theme)
    assert not any(b"history/" in data for data in pages.values())


def test_what_is_drawn_stays(folder: Path, book: CampaignPages, theme: Theme) -> None:
    """Published pages are kept: only the timeline's first page is drawn again."""
    first = draw_history(book, theme, shelf(folder))
    again = draw_history(book, theme, shelf(folder, dict(first.keys)))
    assert set(again.files) == {"spring/history/index.html"}
    assert set(again.kept) == set(first.keys)
    assert again.keys == first.keys
    assert again.files["spring/history/index.html"] == first.files["spring/history/index.html"]


def test_a_new_revision_redraws_its_neighbour_only(tmp_path: Path, theme: Theme) -> None:
    """The page before the new one gets a link to it; older pages stay."""
    for days, cost in enumerate(("10", "11", "12")):
        book = record(tmp_path, table(cost=cost), days)
    drawn = draw_history(book, theme, shelf(tmp_path))
    book = record(tmp_path, table(cost="14"), 4)
    again = draw_history(book, theme, shelf(tmp_path, dict(drawn.keys)))
    assert set(again.files) == {f"spring/history/{name}.html" for name in ("index", "0003", "0004")}


def test_another_look_redraws_all(folder: Path, book: CampaignPages, theme: Theme) -> None:
    """A title or theme that changed is on every page."""
    drawn = draw_history(book, theme, shelf(folder))
    campaign = replace(book.campaign, settings=replace(book.campaign.settings, title="Another"))
    again = draw_history(replace(book, campaign=campaign), theme, shelf(folder, dict(drawn.keys)))
    assert again.kept == ()
    assert b"Another" in again.files["spring/history/0001.html"]


def test_a_damaged_revision_has_a_page_that_says_so(tmp_path: Path, theme: Theme) -> None:
    """A damaged revision is told on its page and on the timeline, and is drawn again until it is mended."""
    record(tmp_path, table(), 0)
    record(tmp_path, table(cost="11"), 1)
    (entries(tmp_path)[0].path / "changes.json").write_bytes(b"[]")
    book = record(tmp_path, table(cost="12"), 2)
    drawn = draw_history(book, theme, shelf(tmp_path))
    assert "This revision is damaged and not used" in words(drawn, "spring/history/0001.html")
    assert "Damaged: changes.json was altered" in words(drawn, "spring/history/index.html")
    assert "spring/history/0001.html" not in drawn.keys
    assert "spring/history/0002.html" in drawn.keys


def long_history(count: int, big: int = 0) -> tuple[Sequence[Entry], dict[str, Line]]:
    """Entries and lines of many revisions, none of them on disk; in the newest ``big`` very much changed."""
    found, lines = [], {}
    for number in range(1, count + 1):
        moment = MOMENT + timedelta(hours=number)
        name = f"{number:04d}-{moment:%Y-%m-%dT%H%M%SZ}-abcdef"
        found.append(Entry(number=number, short_digest="abcdef", path=Path(name), name=name))
        story = big_story(number) if number > count - big else Story(headline="x")
        lines[name] = Line(number=number, name=name, recorded=moment.isoformat(), headline="x", story=story)
    return found, lines


def big_story(number: int) -> Story:
    """A revision in which very much changed."""
    edits = tuple(
        Edit(kind="lot", name=f"L{k}", field="N", old="1", new="2", clause=f"lot L{k}'s N re-assayed from 1 to 2 %")
        for k in range(600)
    )
    changes = tuple(
        Change(
            kind="cost",
            subject=f"O{k}",
            old=1.0,
            new=2.0,
            sentence=f"Order O{k}: cheapest cost rose to 2 EUR per t from 1 EUR per t.",
            cause=Cause(parts=tuple(Part(group=f"lot L{j}", edits=(j,), amount=0.25) for j in range(4))),
        )
        for k in range(600)
    )
    points = {f"O{k}": OrderPoint(verdict="makeable", cost=float(number + k), room=1.0) for k in range(600)}
    return Story(
        headline="x",
        comparisons=tuple(
            Comparison(number=1, recorded=MOMENT.isoformat(), title="the first revision", edits=edits, changes=changes)
            for _ in range(4)
        ),
        summary=Summary(orders=points, lots={"L1": LotPoint(stock=float(number), assay={"N": (1.0, 0.1)})}),
    )


def test_no_page_grows_without_end(book: CampaignPages, theme: Theme) -> None:
    """With many revisions in which hundreds of answers changed, every page stays below 300 kB."""
    found, lines = long_history(2 * GROUP + 3, big=3)
    book = replace(book, past=tuple(lines[entry.name] for entry in recent(found)))
    drawn = draw_history(book, theme, Shelf(entries=found, read=lambda entry: lines[entry.name], published={}))
    assert max(len(data) for data in drawn.files.values()) < 300_000
    groups = [address for address in drawn.files if "revisions-" in address]
    assert groups == ["spring/history/revisions-0001-0050.html", "spring/history/revisions-0051-0100.html"]
    assert "more changes: see changes.json" in words(drawn, "spring/history/0103.html")
    assert "Revisions 51 to 100" in words(drawn, "spring/history/index.html")


def test_hostile_names_stay_text(book: CampaignPages, theme: Theme) -> None:
    """Names that look like markup are text on every history page, in drawings too."""
    found, lines = long_history(2)
    edit = Edit(kind="lot", name=HOSTILE, field="N", old="", new="", clause=f"lot {HOSTILE} is new")
    points = [{HOSTILE: OrderPoint(verdict="makeable", cost=cost)} for cost in (1.0, 2.0)]
    told = {
        entry.name: replace(
            lines[entry.name],
            story=Story(
                headline=HOSTILE,
                comparisons=(Comparison(number=1, recorded=MOMENT.isoformat(), title="x", edits=(edit,)),),
                summary=Summary(orders=orders),
            ),
        )
        for entry, orders in zip(found, points, strict=True)
    }
    drawn = draw_history(replace(book, past=()), theme, Shelf(entries=found, read=lambda e: told[e.name], published={}))
    for address, data in drawn.files.items():
        page = PageReader(data.decode())
        assert page.faults == [], address
        assert not any(tag == "b" for tag, _ in page.tags)


def test_ticks_are_round() -> None:
    """Ticks are multiples of 1, 2 or 5 times a power of ten, inside their ends."""
    assert trends.ticks((0.0, 10.0)) == (0.0, 2.0, 4.0, 6.0, 8.0, 10.0)
    assert trends.ticks((-0.3, 1.1)) == (0.0, 0.5, 1.0)
    for low, high in ((0.0, 1e-9), (-5e6, 3e7), (41.3, 41.9)):
        found = trends.ticks((low, high))
        assert 2 <= len(found) <= 8
        assert all(low <= tick <= high for tick in found)


def test_a_single_value_can_be_drawn() -> None:
    """A line of one value, of equal values, and with gaps draws without fault."""
    for values in ([3.0], [3.0, 3.0], [None, 2.0, None, 4.0], [0.0]):
        series = trends.Series(name="x", values=values, errors=[0.5] * len(values))
        assert trends.lines([series], ["2 Mar"] * len(values), "X").startswith("<svg")
    assert "nan" not in trends.lines([trends.Series(name="x", values=[None])], ["2 Mar"], "X")


def edit(root: Path, limit: str) -> None:
    put_campaign(root / "campaigns", targets_csv=TARGETS.replace(">= 16", limit))


def test_a_build_writes_only_what_a_new_revision_changes(tmp_path: Path) -> None:
    """From build to build, old revision pages stay on the disk untouched, and one that was removed comes back."""
    history = tmp_path / "output/spring/history"
    with light_pages():
        for limit in (">= 15", ">= 16", ">= 17"):
            edit(tmp_path, limit)
            run(make_job(tmp_path))
        stamps = {path.name: path.stat().st_mtime_ns for path in history.iterdir()}
        assert sorted(stamps) == ["0001.html", "0002.html", "0003.html", "index.html"]
        edit(tmp_path, ">= 21")
        run(make_job(tmp_path))
        after = {path.name: path.stat().st_mtime_ns for path in history.iterdir()}
        assert {name for name in stamps if stamps[name] == after[name]} == {"0001.html", "0002.html"}
        (history / "0001.html").unlink()
        edit(tmp_path, ">= 22")
        run(make_job(tmp_path))
    assert sorted(path.name for path in history.iterdir()) == [*(f"000{n}.html" for n in range(1, 6)), "index.html"]


def test_a_client_sees_no_history(tmp_path: Path) -> None:
    """The client edition has no history pages: they tell costs, stock and other clients' orders."""
    edit(tmp_path, ">= 15")
    run(make_job(tmp_path, editions=("client",)))
    assert not (tmp_path / "output/spring/history").exists()
    assert "history/" not in text_of(tmp_path / "output", "spring/index.html")


def test_what_a_killed_publication_wrote_is_drawn_again(tmp_path: Path) -> None:
    """Pages named in the journal of a killed publication are not trusted to be as the manifest says."""
    pages = {"spring/history/0001.html": b"<p>1", "spring/history/0002.html": b"<p>2"}
    first = Publication(tmp_path, moment=MOMENT)
    first.put("spring", Published(fingerprint="f", files={}), pages)
    first.finish()
    assert Publication(tmp_path, moment=MOMENT).standing("spring") == pages.keys()
    killed = Publication(tmp_path, moment=MOMENT)
    killed.put("spring", Published(fingerprint="g", files={}), {**pages, "spring/history/0002.html": b"<p>changed"})
    after = Publication(tmp_path, moment=MOMENT)
    assert after.standing("spring") == {"spring/history/0001.html"}
    after.put("spring", Published(fingerprint="h", files={}), {"spring/x.html": b""}, kept=["spring/history/0001.html"])
    after.finish()
    names = {path.relative_to(tmp_path).as_posix() for path in (tmp_path / "spring").rglob("*.html")}
    assert names == {"spring/history/0001.html", "spring/x.html"}
