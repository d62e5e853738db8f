import pytest

from generator.intake import campaign as door
from generator.intake import faults
from tests.intake.make import read, sentences


@pytest.mark.parametrize(
    "limit, assays, targets, sentence",
    [
        (
            "MOST_LOTS",
            "lot,N\nA,1\nA,2\nB,3\nC,4\n",
            "order,N\none,<= 2\n",
            "stops: assays.csv, row 5: found 'C': has more than 2 lots; split it into several campaigns",
        ),
        (
            "MOST_ORDERS",
            "lot,N\nA,1\n",
            "order,N\none,<= 2\ntwo,<= 2\nthree,<= 2\n",
            "stops: targets.csv, row 4: found 'three': has more than 2 orders; split it into several campaigns",
        ),
        (
            "MOST_COMPONENTS",
            "lot,N,P,K\nA,1,2,3\n",
            "order,N\none,<= 2\n",
            "stops: assays.csv, row 1, column K: is one of more than 2 components; leave out what no order limits",
        ),
    ],
)
def test_too_many_are_refused_at_the_first_beyond(
    monkeypatch: pytest.MonkeyPatch, limit: str, assays: str, targets: str, sentence: str
) -> None:
    """More lots, orders or components than are answered stop the campaign, with the row of the first too many."""
    monkeypatch.setattr(door, limit, 3)
    assert not read(assays, targets).is_stopped
    monkeypatch.setattr(door, limit, 2)
    assert sentences(read(assays, targets)) == [sentence]


def test_very_many_problems_are_not_all_listed(monkeypatch: pytest.MonkeyPatch) -> None:
    """Of very many problems the gravest and first are listed, and the rest are counted."""
    monkeypatch.setattr(faults, "MOST_PROBLEMS", 2)
    rows = "".join(f"{name},x,1\n" for name in "ABCD")
    told = sentences(read(f"lot,N [%],P [%]\n{rows}E,1,1\n", "order,N\none,<= 2\n"))
    assert len(told) == 3
    assert ["found 'x'" in line for line in told].count(True) == 2
    assert any("there are 2 more problems, which are not listed; mend these first" in line for line in told)


def test_a_column_in_another_unit_is_one_problem_at_its_first_row() -> None:
    """What is wrong with a whole column is told once, with the first row where it shows."""
    told = sentences(read("lot,S [MJ/kg]\nA,\nB,1\nC,2\n", "order,S [%]\none,\ntwo,<= 2\nthree,<= 3\n"))
    assert [sentence.split(":")[1] for sentence in told if "is in %" in sentence] == [
        " targets.csv, row 3, column S [%]"
    ]


def test_a_table_under_a_misspelt_name_is_found_in_its_row() -> None:
    """A table that is no setting is named with its row also where only tables inside it are written."""
    told = sentences(read("lot,N\nA,1\n", "order,N\none,<= 2\n", 'title = "x"\n[cmponents.N]\nsd = 1\n'))
    assert any("campaign.toml, row 2, column cmponents: found 'cmponents': is no setting" in line for line in told)
