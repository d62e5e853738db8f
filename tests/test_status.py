import json
from datetime import timedelta
from pathlib import Path

import pytest

from generator.status import STATUS_NAME, read_status, write_trouble
from tests.sample import NOON, light_pages, make_job, put_campaign, run


@pytest.fixture(autouse=True)
def _light():
    with light_pages():
        yield


def test_a_good_build_is_well(tmp_path: Path) -> None:
    """After a build the status tells its state, moment, duration and counts."""
    put_campaign(tmp_path / "campaigns")
    run(make_job(tmp_path))
    status = dict(read_status(tmp_path / "output"))
    assert status.pop("seconds") >= 0
    assert status.pop("program")
    assert status == {
        "format": "hullbook-status-1",
        "state": "well",
        "looked": "2026-03-02T12:00:00Z",
        "built": "2026-03-02T12:00:00Z",
        "campaigns": 1,
        "with_problems": 0,
        "files_held": 0,
        "problems": {},
        "trouble": "",
    }


def test_a_look_is_no_build(tmp_path: Path) -> None:
    """A build that finds nothing changed moves the moment of the last look only."""
    put_campaign(tmp_path / "campaigns")
    run(make_job(tmp_path))
    run(make_job(tmp_path, moment=NOON + timedelta(hours=1)))
    status = read_status(tmp_path / "output")
    assert (status["looked"], status["built"]) == ("2026-03-02T13:00:00Z", "2026-03-02T12:00:00Z")


def test_problems_are_named(tmp_path: Path) -> None:
    """The status names each campaign with problems, and what they are, as long as they last."""
    put_campaign(tmp_path / "campaigns", assays_csv="")
    put_campaign(tmp_path / "campaigns", "good")
    for _ in range(2):
        run(make_job(tmp_path))
        status = read_status(tmp_path / "output")
        assert (status["state"], status["with_problems"]) == ("problems", 1)
        assert list(status["problems"]) == ["spring"]
        assert status["problems"]["spring"][0].startswith("assays.csv: is empty")


def test_trouble_stands_beside_what_was_known(tmp_path: Path) -> None:
    """When nothing can be built the status says why, and keeps what the last build told."""
    put_campaign(tmp_path / "campaigns")
    run(make_job(tmp_path))
    write_trouble(tmp_path / "output", NOON + timedelta(hours=1), "campaigns is not there")
    status = read_status(tmp_path / "output")
    assert (status["state"], status["trouble"], status["campaigns"]) == ("trouble", "campaigns is not there", 1)
    run(make_job(tmp_path))
    assert read_status(tmp_path / "output")["state"] == "well"


@pytest.mark.parametrize("content", [b"mine", b"{}", b'{"format": "other"}', b"\xff"])
def test_a_foreign_status_file_stays(tmp_path: Path, content: bytes) -> None:
    """Somebody else's file of that name is never written over."""
    put_campaign(tmp_path / "campaigns")
    (tmp_path / "output").mkdir()
    (tmp_path / "output" / STATUS_NAME).write_bytes(content)
    assert run(make_job(tmp_path)).is_well
    assert (tmp_path / "output" / STATUS_NAME).read_bytes() == content


def test_no_campaign_takes_its_place(tmp_path: Path) -> None:
    """A campaign of that name gets another address."""
    put_campaign(tmp_path / "campaigns", "status.json")
    assert run(make_job(tmp_path)).made == ("status.json-2",)
    assert json.loads((tmp_path / "output" / STATUS_NAME).read_bytes())["campaigns"] == 1


def test_editions_have_one_status_beside_them(tmp_path: Path) -> None:
    """What goes to a client holds no status: it tells the problems of all."""
    put_campaign(tmp_path / "campaigns")
    run(make_job(tmp_path, editions=("internal", "client")))
    assert [path.parent.name for path in (tmp_path / "output").rglob(STATUS_NAME)] == ["output"]
