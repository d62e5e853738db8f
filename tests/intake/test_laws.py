"""Laws of reading: dialects change nothing, and no bytes whatever raise."""

from __future__ import annotations

from fractions import Fraction

from hypothesis import given, settings
from hypothesis import strategies as st

from generator.intake.campaign import INPUT_NAMES, is_whole, read_campaign
from tests.intake.make import read, values

NAMES = st.text(alphabet="ABab12 é;,\"'\n", min_size=1, max_size=6).map(lambda name: f"lot {name}".strip())
#: Four decimals, so that no number can be one with grouped thousands.
NUMBERS = st.integers(-(10**7), 10**7).map(lambda n: f"{'-' if n < 0 else ''}{abs(n) // 10000}.{abs(n) % 10000:04d}")


def quoted(cell: str, delimiter: str) -> str:
    if any(char in cell for char in f'"\n{delimiter}'):
        return '"' + cell.replace('"', '""') + '"'
    return cell


@st.composite
def tables(draw: st.DrawFn) -> list[list[str]]:
    names = draw(st.lists(NAMES, min_size=1, max_size=4, unique_by=lambda name: " ".join(name.split())))
    return [[name, draw(NUMBERS), draw(NUMBERS)] for name in names]


@given(
    rows=tables(),
    delimiter=st.sampled_from(",;\t"),
    mark=st.sampled_from(".,"),
    ending=st.sampled_from(["\n", "\r\n"]),
    encoding=st.sampled_from(["utf-8", "utf-8-sig", "utf-16", "utf-16-le", "cp1252"]),
    trailing=st.integers(0, 2),
    blanks=st.integers(0, 2),
    has_preamble=st.booleans(),
)
@settings(max_examples=150, deadline=None)
def test_any_dialect_is_the_same_campaign(
    rows: list[list[str]],
    delimiter: str,
    mark: str,
    ending: str,
    encoding: str,
    trailing: int,
    blanks: int,
    has_preamble: bool,
) -> None:
    """A table written in any dialect and read again has the same lots and exact values."""
    lines = [["lot", "N", "K2O"], *([row[0], *(cell.replace(".", mark) for cell in row[1:])] for row in rows)]
    text = f"Report of the laboratory{ending}{ending}" if has_preamble else ""
    for line in lines:
        text += delimiter.join(quoted(cell, delimiter) for cell in line) + delimiter * trailing + ending * (1 + blanks)
    campaign = read(text.encode(encoding))
    assert campaign.problems == ()
    expected = {" ".join(name.split()): {"N": Fraction(n), "K2O": Fraction(k)} for name, n, k in rows}
    assert values(campaign) == expected


FILES = {
    "assays.csv": (
        "lot,material,stock,N [%],K2O,K2O sd,moisture,use\nA,urea;x,10,1.5,<0.2,1,2,\nB,,unlimited,3,4,n/a,3,no\n"
    ),
    "targets.csv": "order,amount,N,K2O min,E,g,only lots,due\none,10..20,<= 2,1,<= 5,max 30,A*,2024-03-04\n",
    "stock.csv": "lot,place\nA,bay\n",
    "campaign.toml": (
        'basis = "dry"\n[derived]\nE = "N + 0.658*K2O"\n[groups.g]\nlots = ["A*"]\nshare = "<= 30"\n'
        "[house]\nmax_lots = 3\n"
    ),
    "site.toml": '[components.N]\nsd = "2 %"\nblank = "zero"\n[whole]\ncomponents = ["N", "K2O"]\n',
    "notes.md": "# Notes\n",
}
SHARDS = st.one_of(
    st.binary(max_size=6),
    st.sampled_from(
        [
            b'"',
            b",",
            b";",
            b"\n",
            b"\0",
            b"\xff\xfe",
            b"nan",
            b"1e99999",
            b"8-Oct",
            b"1,234",
            b"total",
            b"[",
            b"#",
            b"=",
        ]
    ),
)


@given(
    name=st.sampled_from(INPUT_NAMES),
    cuts=st.lists(st.tuples(st.integers(0, 130), st.integers(0, 8), SHARDS), min_size=1, max_size=4),
)
@settings(max_examples=300, deadline=None)
def test_mutated_files_never_raise(name: str, cuts: list[tuple[int, int, bytes]]) -> None:
    """A damaged file gives a campaign with problems, each of one line with a remedy, and never an error."""
    data = FILES[name].encode()
    for start, length, shard in cuts:
        data = data[:start] + shard + data[start + length :]
    files = {key: text.encode() for key, text in FILES.items()} | {name: data}
    campaign = read_campaign(files, slug="s", folder="S")
    assert all(problem.remedy and "\n" not in problem.sentence() for problem in campaign.problems)
    assert campaign == read_campaign(files, slug="s", folder="S")
    assert is_whole(name, data) in (True, False)


@given(st.dictionaries(st.sampled_from(INPUT_NAMES), st.binary(max_size=80)))
@settings(max_examples=150, deadline=None)
def test_random_bytes_never_raise(files: dict[str, bytes]) -> None:
    """Any bytes give a campaign; without two readable tables it is stopped."""
    campaign = read_campaign(files, slug="s", folder="S")
    assert campaign.is_stopped or (campaign.lots and "targets.csv" in files)
