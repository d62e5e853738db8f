import json
import os
import re
import subprocess
import sys
from datetime import UTC, datetime
from pathlib import Path

import pytest

from generator import __version__, cli
from generator.problems import HullbookError
from tests.sample import ASSAYS, light_pages, pages_of, put_campaign, text_of

CHECKOUT = Path(__file__).parent.parent
#: Drawn for real, so as little as there can be of it.
SMALL = "order,N\n1,>= 20\n"


def hullbook(folder: Path, *arguments: str, **environment: str) -> subprocess.CompletedProcess[str]:
    return subprocess.run(
        [sys.executable, "-m", "generator", *arguments],
        cwd=folder,
        env={**os.environ, "PYTHONPATH": str(CHECKOUT), **environment},
        capture_output=True,
        text=True,
        check=False,
    )


def run_here(monkeypatch: pytest.MonkeyPatch, folder: Path, *arguments: str) -> int:
    """The same in this process, with light pages."""
    monkeypatch.chdir(folder)
    monkeypatch.setenv("SOURCE_DATE_EPOCH", "1772442720")
    own = ("--jobs", "0") if arguments[0] in ("build", "watch") else ()
    with light_pages():
        return cli.main((*arguments, *own))


def test_build_with_the_default_folders(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    """``build`` reads campaigns/, fills output/, tells it in one line of one form, and exits 0."""
    put_campaign(tmp_path / "campaigns")
    assert run_here(monkeypatch, tmp_path, "build") == 0
    line = r"2026-03-02T09:12:00Z 1 campaign, {}, 0 removed, 0 held, 0 with problems, [0-9]+\.[0-9]{{2}} s\n"
    assert re.fullmatch(line.format("1 built, [0-9]+ files written"), capsys.readouterr().err)
    assert json.loads(text_of(tmp_path / "output", "spring/results.json"))["revision"]["recorded"] == (
        "2026-03-02T09:12:00Z"
    )
    assert run_here(monkeypatch, tmp_path, "build") == 0
    assert re.fullmatch(line.format("0 built, 0 files written"), capsys.readouterr().err)


@pytest.mark.skipif(not Path("/dev/full").exists(), reason="the system has no device that is always full")
def test_a_log_that_is_full_ends_nothing(tmp_path: Path) -> None:
    """Where standard error goes to a full disk the pages come all the same."""
    put_campaign(tmp_path / "campaigns", targets_csv=SMALL)
    with Path("/dev/full").open("w") as full:
        subprocess.run(
            [sys.executable, "-m", "generator", "build"],
            cwd=tmp_path,
            env={**os.environ, "PYTHONPATH": str(CHECKOUT)},
            stderr=full,
            check=False,
        )
    assert (tmp_path / "output/index.html").exists()
    assert not (tmp_path / "output/.hullbook-lock").exists()
    assert json.loads(text_of(tmp_path / "output", "status.json"))["state"] == "well"


def test_problems_are_exit_1_each_time(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    """A campaign with problems makes the status 1, and they are told at every build, quiet or not."""
    put_campaign(tmp_path / "campaigns", assays_csv="")
    assert run_here(monkeypatch, tmp_path, "build") == 1
    first = [line for line in capsys.readouterr().err.splitlines() if line.startswith("spring: assays.csv")]
    assert first
    assert run_here(monkeypatch, tmp_path, "build", "--quiet") == 1
    assert capsys.readouterr().err.splitlines() == first


def test_quiet_says_nothing_when_all_is_well(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    """``--quiet`` leaves a good build without a word."""
    put_campaign(tmp_path / "campaigns")
    assert run_here(monkeypatch, tmp_path, "build", "--quiet") == 0
    assert capsys.readouterr() == ("", "")


@pytest.mark.parametrize(
    "arguments, told",
    [
        (["build", "nowhere"], "hullbook: there is no folder nowhere"),
        (["build", "campaigns", "campaigns/output"], "lies in the folder of campaigns; choose another"),
        (["build", "--theme", "fancy"], "hullbook: theme fancy: no such theme, and no folder of that name"),
        (["build", "campaigns", "campaigns/spring/assays.csv"], "lies in the folder of campaigns"),
        (["build", "campaigns", "file"], "file is a file; give a folder for the pages"),
        (["check", "nowhere"], "hullbook: there is no folder nowhere"),
        (["watch", "nowhere"], "hullbook: there is no folder nowhere"),
    ],
)
def test_wrong_use_is_exit_2(
    tmp_path: Path,
    monkeypatch: pytest.MonkeyPatch,
    capsys: pytest.CaptureFixture[str],
    arguments: list[str],
    told: str,
) -> None:
    """What can't be meant is told in one line, and nothing is written."""
    put_campaign(tmp_path / "campaigns")
    (tmp_path / "file").write_text("x")
    before = sorted(tmp_path.rglob("*"))
    assert run_here(monkeypatch, tmp_path, *arguments) == 2
    (line,) = capsys.readouterr().err.splitlines()
    assert told in line
    assert sorted(tmp_path.rglob("*")) == before


@pytest.mark.parametrize(
    "arguments",
    [
        [],
        ["bake"],
        ["build", "a", "b", "c"],
        ["build", "--jobs", "65"],
        ["watch", "--settle", "-1"],
        ["watch", "--poll", "x"],
    ],
)
def test_unknown_words_are_exit_2(arguments: list[str], capsys: pytest.CaptureFixture[str]) -> None:
    """What the command line does not know is told with how to use it."""
    with pytest.raises(SystemExit) as ended:
        cli.main(arguments)
    assert ended.value.code == 2
    assert "usage: hullbook" in capsys.readouterr().err


def test_check_tells_and_writes_nothing(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    """``check`` prints problems of inputs and history on standard output, and exits 1 for them."""
    folder = put_campaign(tmp_path / "campaigns")
    assert run_here(monkeypatch, tmp_path, "check") == 0
    assert capsys.readouterr() == ("", "spring: all well\n")
    assert sorted(path.name for path in folder.iterdir()) == ["assays.csv", "targets.csv"]
    put_campaign(tmp_path / "campaigns", assays_csv=ASSAYS.replace("A,100", "A,10o"))
    assert run_here(monkeypatch, tmp_path, "check") == 1
    assert "spring: assays.csv, row 2, column stock: found '10o'" in capsys.readouterr().out


def test_an_interrupt_is_told(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    """Ctrl-C during a build ends it with a line and no traceback, and the lock is given back."""
    from generator.findings import answers

    def interrupted(campaign: object) -> None:
        raise KeyboardInterrupt

    put_campaign(tmp_path / "campaigns")
    monkeypatch.setattr(answers, "find", interrupted)
    assert run_here(monkeypatch, tmp_path, "build") == 130
    assert capsys.readouterr().err == "hullbook: stopped; the next build goes on from here\n"
    assert not (tmp_path / "output/.hullbook-lock").exists()


def test_the_moment_is_the_environments(monkeypatch: pytest.MonkeyPatch) -> None:
    """SOURCE_DATE_EPOCH is the moment recorded, without it the clock's; nonsense is refused."""
    assert cli.now({"SOURCE_DATE_EPOCH": "0"}) == datetime(1970, 1, 1, tzinfo=UTC)
    assert cli.now({}).tzinfo is UTC
    for nonsense in ("yesterday", "-5", "1e9", "9" * 20, "²"):
        with pytest.raises(HullbookError, match="SOURCE_DATE_EPOCH"):
            cli.now({"SOURCE_DATE_EPOCH": nonsense})


def test_a_terminal_of_few_letters_is_no_error(tmp_path: Path) -> None:
    """Names that the terminal can't show are escaped."""
    put_campaign(tmp_path / "campaigns", "Čačak", assays_csv="")
    told = hullbook(tmp_path, "build", PYTHONIOENCODING="ascii")
    assert told.returncode == 1
    assert "\\u010ca\\u010dak: " in told.stderr


def test_version_and_help_are_quick_to_load(tmp_path: Path) -> None:
    """``--version`` and ``--help`` import no solver, no drawing library and no template library."""
    for option in ("--version", "--help"):
        told = subprocess.run(
            [sys.executable, "-X", "importtime", "-m", "generator", option],
            cwd=CHECKOUT,
            capture_output=True,
            text=True,
            check=True,
        )
        assert not {"scipy", "matplotlib", "numpy", "jinja2", "watchdog"} & _loaded(told.stderr)
    assert f"hullbook {__version__}" in hullbook(tmp_path, "--version").stdout


def test_nothing_changed_loads_no_solver(tmp_path: Path) -> None:
    """A build that finds nothing changed imports neither scipy nor matplotlib."""
    put_campaign(tmp_path / "campaigns", targets_csv=SMALL)
    assert hullbook(tmp_path, "build").returncode == 0
    told = subprocess.run(
        [sys.executable, "-X", "importtime", "-m", "generator", "build"],
        cwd=tmp_path,
        env={**os.environ, "PYTHONPATH": str(CHECKOUT)},
        capture_output=True,
        text=True,
        check=True,
    )
    assert " 0 built, " in told.stderr
    assert not {"scipy", "matplotlib", "numpy"} & _loaded(told.stderr)


def _loaded(report: str) -> set[str]:
    """The top-level packages in a report of ``-X importtime``."""
    lines = [line for line in report.splitlines() if line.startswith("import time:")]
    return {line.rsplit("|", 1)[1].strip().split(".")[0] for line in lines}


def test_two_builds_elsewhere_are_the_same_bytes(tmp_path: Path) -> None:
    """Another folder, time zone, language, hash seed and number of processes change no byte."""
    moment = {"SOURCE_DATE_EPOCH": "1772442720"}
    for place in ("here", "there/deeper"):
        put_campaign(tmp_path / place / "campaigns", targets_csv=SMALL)
        put_campaign(tmp_path / place / "campaigns", "broken", assays_csv="lot\n")
    here = hullbook(tmp_path / "here", "build", PYTHONHASHSEED="1", TZ="UTC", **moment)
    there = hullbook(
        tmp_path / "there/deeper",
        "build",
        "--jobs",
        "2",
        PYTHONHASHSEED="2",
        TZ="Asia/Kathmandu",
        LC_ALL="de_DE.UTF-8",
        **moment,
    )
    assert (here.returncode, there.returncode) == (1, 1)
    assert pages_of(tmp_path / "here/output") == pages_of(tmp_path / "there/deeper/output")
    # A busy machine takes its time, and is told how far it is.
    of_time = r", [0-9]+\.[0-9]{2} s\n|[0-9]+ of 2 campaigns done, .*\n"
    assert re.sub(of_time, "", here.stderr) == re.sub(of_time, "", there.stderr)


def test_an_edit_is_built_and_shown(tmp_path: Path) -> None:
    """From the command line to the page: an edited target changes verdict, page and headline."""
    put_campaign(tmp_path / "campaigns", targets_csv=SMALL)
    assert hullbook(tmp_path, "build").returncode == 0
    put_campaign(tmp_path / "campaigns", targets_csv=SMALL.replace("20", "31"))
    assert hullbook(tmp_path, "build").returncode == 0
    assert "is now unreachable; it was makeable" in text_of(tmp_path / "output", "spring/index.html")
    assert "(unreachable): its limit on N tightened" in text_of(tmp_path / "output", "index.html")
