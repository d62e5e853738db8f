import json
import os
import signal
import time
from collections.abc import Iterator
from pathlib import Path

import pytest

from generator import workers
from generator.workers import Crew
from tests.sample import Told, make_job, put_campaign, run, text_of

#: Far more than anything here takes, so that a busy machine fails no test.
PATIENCE = 120.0
#: Given to what never ends.
SHORT = 1.0

SMALL = "order,N\n1,>= 20\n"


def always() -> bool:
    return True


@pytest.fixture
def crew() -> Iterator[Crew]:
    with Crew(1, PATIENCE) as hired:
        assert hired.call("operator:add", 1, 2, tick=always) == 3  # its process has imported everything now
        yield hired


def test_a_process_is_kept(crew: Crew) -> None:
    """Call after call goes to one process, which is not this one."""
    first, second = (crew.call("tests.crew_calls:process_number", tick=always) for _ in range(2))
    assert first == second != os.getpid()


def test_a_call_that_never_ends_is_given_up(crew: Crew) -> None:
    """After its time a call has no answer, its process is gone, and the next call has another one."""
    before = crew.call("tests.crew_calls:process_number", tick=always)
    crew.longest = SHORT
    assert crew.call("tests.crew_calls:sleep_for_ever", tick=always) is None
    with pytest.raises(ProcessLookupError):
        os.kill(before, 0)
    crew.longest = PATIENCE
    assert crew.call("tests.crew_calls:process_number", tick=always) != before


def test_a_call_that_kills_its_process_has_no_answer(crew: Crew) -> None:
    """A process that dies takes only its own call with it."""
    assert crew.call("tests.crew_calls:die", tick=always) is None
    assert crew.call("operator:add", 1, 2, tick=always) == 3


def test_an_idle_process_that_was_ended_is_replaced(crew: Crew) -> None:
    """Somebody may end a process between two builds."""
    os.kill(crew.call("tests.crew_calls:process_number", tick=always), signal.SIGKILL)
    time.sleep(0.2)
    assert crew.call("operator:add", 1, 2, tick=always) == 3


def test_old_processes_make_way(crew: Crew, monkeypatch: pytest.MonkeyPatch) -> None:
    """After many calls a process is replaced, so that memory stays flat."""
    before = crew.call("tests.crew_calls:process_number", tick=always)
    monkeypatch.setattr(workers, "MOST_CALLS", 2)
    assert crew.call("tests.crew_calls:process_number", tick=always) != before


def test_work_ends_when_it_is_not_wanted_any_more(crew: Crew) -> None:
    """A campaign under way is left as soon as the caller says so."""
    began = time.monotonic()
    assert crew.call("tests.crew_calls:sleep_for_ever", tick=lambda: time.monotonic() < began + SHORT) is None
    assert time.monotonic() - began < PATIENCE / 2


def test_hostile_campaigns_starve_no_other(tmp_path: Path, crew: Crew, monkeypatch: pytest.MonkeyPatch) -> None:
    """One that takes too long and one that kills its process show a banner; the others are built as ever."""
    put_campaign(tmp_path / "campaigns", "slow", targets_csv=SMALL)
    run(make_job(tmp_path), makers=crew)
    monkeypatch.setattr(workers, "MAKE", "tests.crew_calls:make_or_hang")
    for name in ("slow", "deadly", "unlucky", "usual"):
        put_campaign(tmp_path / "campaigns", name, targets_csv=SMALL.replace("20", "31"))
    log = Told()
    crew.longest = 10.0
    outcome = run(make_job(tmp_path, time_limit=10.0), log, makers=crew)
    problems = {slug: [problem.message for problem in found] for slug, found in outcome.problems.items() if slug}
    assert problems == {
        "slow": ["its answers took longer than 10 s and were given up"],
        "deadly": ["the process that worked on it died without an answer (ended by someone, or out of memory)"],
        "unlucky": [],
        "usual": [],
    }
    assert [order["verdict"] for order in json.loads(text_of(tmp_path / "output", "slow/results.json"))["orders"]] == [
        "makeable"
    ], "the last good answers stay"
    for slug in ("unlucky", "usual"):
        results = json.loads(text_of(tmp_path / "output", f"{slug}/results.json"))
        assert [order["verdict"] for order in results["orders"]] == ["unreachable"]
    monkeypatch.undo()
    again = run(make_job(tmp_path, time_limit=10.0), makers=crew, tries_again=False)
    assert again.made == ("deadly",), "too slow for this limit is known"
    assert run(make_job(tmp_path, time_limit=PATIENCE), makers=crew, tries_again=False).made == ("slow",)
