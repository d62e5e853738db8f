"""The README tells what the code accepts, and its commands are what the workflow runs."""

from __future__ import annotations

import re
import tomllib
from pathlib import Path

from generator.cli import main
from generator.intake import campaign, cells, faults, tables
from generator.intake.columns import LOT_COLUMNS, ORDER_COLUMNS
from generator.intake.schema import SCHEMA
from generator.job import TIME_LIMIT
from generator.watch import FULL_LOOK_EVERY, RESCAN_EVERY
from tests.findings.making import make_campaign

ROOT = Path(__file__).parent.parent
README = (ROOT / "README.md").read_text(encoding="utf-8")


def section(title: str) -> str:
    """The text under a heading, up to the next heading of any level."""
    return re.split(r"\n#+ ", README.split(f" {title}\n", 1)[1], maxsplit=1)[0]


def first_cells(title: str) -> set[str]:
    """Every word in backquotes in the first column of a section's table."""
    rows = [line.split("|")[1] for line in section(title).splitlines() if line.startswith("|")]
    return {word for row in rows for word in re.findall(r"`([^`]+)`", row)}


def test_columns_in_the_readme_are_those_that_are_read() -> None:
    """Each known column stands in the README's tables, and no other."""
    assert first_cells("Columns of assays.csv and stock.csv") == set(LOT_COLUMNS)
    assert first_cells("Columns of targets.csv") == set(ORDER_COLUMNS)


def test_settings_in_the_readme_are_read_without_a_word() -> None:
    """The README's campaign.toml is accepted as it stands, and names every key there is."""
    text = re.findall(r"```toml\n(.*?)```", section("campaign.toml"), re.DOTALL)[0]
    assays = (
        "lot,material,moisture,K2O,N,CaO,SiO2,Al2O3,Fe2O3,clay,sand,lime\n"
        "scrap 1,urea,5,1,1,1,1,1,1,20,30,50\nB,ammonium nitrate,5,2,2,2,2,2,2,20,30,50\n"
    )
    campaign = make_campaign(assays, "order,K2O\n1,>= 1\n", text.replace('decimal = ","', ""))
    assert [problem.sentence() for problem in campaign.problems] == []
    assert set(tomllib.loads(text)) == set(SCHEMA)


def test_limits_in_the_readme_are_those_of_the_code() -> None:
    """Every limit that is kept stands in the README with its number."""
    told = section("Limits")
    assert f"files of {tables.MOST_BYTES // 1024**2} MB, {tables.MOST_ROWS:,} rows" in told
    assert f"{tables.MOST_COLUMNS:,} columns, {tables.MOST_CHARACTERS:,} characters" in told
    assert f"{campaign.MOST_LOTS:,} lots, {campaign.MOST_ORDERS:,} orders" in told
    assert f"{campaign.MOST_COMPONENTS} components; numbers of {cells.MOST_DIGITS} digits" in told
    assert f"at most {faults.MOST_PROBLEMS:,} problems" in told
    running = section("Leaving it running")
    assert f"`--time-limit` ({TIME_LIMIT:.0f} s)" in running
    assert f"Every {RESCAN_EVERY:.0f} s" in running
    assert f"every {FULL_LOOK_EVERY / 60:.0f} minutes" in running


def test_the_two_commands_stand_first_in_their_blocks() -> None:
    """Two fenced blocks of one line each: the first builds the demonstration, the second runs the tests."""
    blocks = re.findall(r"```sh\n(.*?)\n```", section("Two commands"), re.DOTALL)
    assert len(blocks) == 2
    assert all("\n" not in block for block in blocks)
    assert blocks[0].endswith("hullbook build campaigns output")
    assert "pytest" in blocks[1]


def test_the_readmes_first_campaign_builds(tmp_path: Path) -> None:
    """The two tables of "Try it with your own lots" make a campaign with an answer."""
    tables = re.findall(r"```csv\n(.*?)```", README, re.DOTALL)
    folder = tmp_path / "campaigns" / "spring"
    folder.mkdir(parents=True)
    for name, table in zip(("assays.csv", "targets.csv"), tables, strict=True):
        (folder / name).write_text("\n".join(line.strip() for line in table.splitlines()), encoding="utf-8")
    assert main(["build", str(folder.parent), str(tmp_path / "out"), "--quiet"]) == 0
    assert "makeable" in (tmp_path / "out" / "spring" / "results.json").read_text(encoding="utf-8")
