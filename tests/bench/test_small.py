"""Small versions of what the benches do at length, so that the suite holds what they claim."""

from pathlib import Path

import pytest

from tests.bench.kill_build import kill_many
from tests.bench.making import make_campaign, write_campaign
from tests.bench.mutate_inputs import SMALL, mutate
from tests.bench.soak import soak
from tests.bench.whole import faults

CHECKOUT = Path(__file__).parents[2]


def test_killed_builds_leave_whole_sites(tmp_path: Path) -> None:
    """Builds and watchers killed at random moments leave whole pages and revisions, which the next build completes."""
    report = kill_many(tmp_path / "killing", times=3, seed=5)
    assert report.is_good, report


def test_mutated_inputs_are_refused_with_file_and_row() -> None:
    """No mutated campaign fails, hangs, or is refused without saying where."""
    report = mutate(300, seed=7, limit=60.0, answers=30, checkout=CHECKOUT)
    assert report.read == 300
    assert report.refused > 100
    assert report.is_good, report


def test_a_watcher_under_edits_ends_in_the_final_state(tmp_path: Path) -> None:
    """After a few seconds of edits by four writers the pages are those of a build anew."""
    report = soak(tmp_path / "soaking", minutes=0.1, campaigns=4, seed=3)
    assert report.is_final
    assert (report.faults, report.status) == ([], 0)


def test_made_campaigns_are_the_same_for_a_seed(tmp_path: Path) -> None:
    """A seed stands for one campaign."""
    assert make_campaign(3) == make_campaign(3) != make_campaign(4)
    write_campaign(tmp_path / "c", make_campaign(3))
    assert (tmp_path / "c/targets.csv").read_text() == make_campaign(3)["targets.csv"]
    assert len(SMALL) == 3


@pytest.mark.parametrize(
    "name, content, fault",
    [
        ("a.html", "<html><p>cut off", "a.html: is not whole"),
        ("a.html", '<html><a href="b.html#x">b</a></html>', "a.html: links to b.html, which is not there"),
        ("a.html", '<html><img src="data:x"><a href="#top">t</a></html>', None),
        ("a.json", "{", "a.json: is not whole"),
        (".hullbook-1234.tmp/a.html", "<html>", None),
    ],
)
def test_the_checker_sees_what_a_reader_would(tmp_path: Path, name: str, content: str, fault: str | None) -> None:
    """Pages cut off, links that lead nowhere and broken data are found; folders under way are left alone."""
    path = tmp_path / name
    path.parent.mkdir(exist_ok=True)
    path.write_text(content)
    assert faults(tmp_path) == ([fault] if fault else [])
