"""CSV as it is found: the bytes are written here, one dialect each."""

from __future__ import annotations

import codecs
from fractions import Fraction

import pytest

from generator.intake import tables
from generator.intake.campaign import is_whole
from tests.intake.make import ASSAYS, read, sentences, told, values

F = Fraction
PLAIN = {"A": {"N": F(10), "K2O": F(20)}, "B": {"N": F(30), "K2O": F(5)}}
DECIMAL = {"A": {"N": F("12.5"), "K2O": F(20)}, "B": {"N": F("0.25"), "K2O": F(5)}}

FILES = {
    "plain": (b"lot,N,K2O\nA,12.5,20\nB,0.25,5\n", []),
    "CRLF line ends": (b"lot,N,K2O\r\nA,12.5,20\r\nB,0.25,5\r\n", []),
    "old Mac line ends": (b"lot,N,K2O\rA,12.5,20\rB,0.25,5\r", []),
    "no last line end": (b"lot,N,K2O\nA,12.5,20\nB,0.25,5", []),
    "UTF-8 with mark": (codecs.BOM_UTF8 + b"lot,N,K2O\nA,12.5,20\nB,0.25,5\n", []),
    "UTF-16 LE with mark": (
        b"\xff\xfe" + "lot,N,K2O\nA,12.5,20\nB,0.25,5\n".encode("utf-16-le"),
        ["assays.csv None: read as UTF-16"],
    ),
    "UTF-16 BE with mark": (
        b"\xfe\xff" + "lot,N,K2O\nA,12.5,20\nB,0.25,5\n".encode("utf-16-be"),
        ["assays.csv None: read as UTF-16"],
    ),
    "UTF-16 without mark": (
        b"l\0o\0t\0,\0N\0,\0K\x002\0O\0\n\0A\0,\x001\x002\0.\x005\0,\x002\x000\0\n\0B\0,\x000\0.\x002\x005\0,\x005\0\n\0",
        ["assays.csv None: read as UTF-16"],
    ),
    "semicolon with decimal comma": (
        b"lot;N;K2O\nA;12,5;20\nB;0,25;5\n",
        [
            "assays.csv None: cells are separated by semicolon",
            "assays.csv None: numbers are read with a decimal comma",
        ],
    ),
    "comma with quoted decimal comma": (
        b'lot,N,K2O\nA,"12,5",20\nB,"0,25",5\n',
        ["assays.csv None: numbers are read with a decimal comma"],
    ),
    "tab": (b"lot\tN\tK2O\nA\t12.5\t20\nB\t0.25\t5\n", ["assays.csv None: cells are separated by tab"]),
    "sep line": (
        b"sep=;\r\nlot;N;K2O\r\nA;12.5;20\r\nB;0.25;5\r\n",
        ["assays.csv None: cells are separated by semicolon"],
    ),
    "trailing empty columns and rows": (b"lot,N,K2O,,\nA,12.5,20,,\nB,0.25,5,,\n,,,,\n,,,,\n\n\n", []),
    "blank rows between": (b"\n\nlot,N,K2O\n\nA,12.5,20\n , ,\nB,0.25,5\n", []),
    "preamble": (
        b"Report 17 of the laboratory\nOrder,12345\n\nlot,N,K2O\nA,12.5,20\nB,0.25,5\n",
        ["assays.csv 1: above the header: left out", "assays.csv 2: above the header: left out"],
    ),
    "preamble that looks like a header": (
        b"Lot,of May\nlot,N,K2O\nA,12.5,20\nB,0.25,5\n",
        ["assays.csv 1: above the header: left out"],
    ),
    "row of units": (b"lot,N,K2O\n,%,%\nA,12.5,20\nB,0.25,5\n", ["assays.csv 2: a row of units"]),
    "header again": (b"lot,N,K2O\nA,12.5,20\nLot,N,K2O\nB,0.25,5\n", ["assays.csv 3: the header again: left out"]),
    "totals row": (
        b"lot,N,K2O\nA,12.5,20\nB,0.25,5\nTotal,,25\nMean:,6.375,12.5\n",
        [
            "assays.csv 4: totals or means (Total): left out",
            "assays.csv 5: totals or means (Mean:): left out",
        ],
    ),
    "totals row without a lot name": (
        b"lot,N,K2O\nA,12.5,20\nB,0.25,5\n,12.75,25\n",
        ["assays.csv 4: no lot, and the sum or mean of the rows above: left out"],
    ),
    "mean row without a lot name, rounded": (
        b"lot,N,K2O\nA,12.5,20\nB,0.25,5\n,6.4,12.5\n",
        ["assays.csv 4: no lot, and the sum or mean of the rows above: left out"],
    ),
    "no-break spaces": ("lot,N,K2O\nA,12.5\u00a0,\u00a020\nB,0.25,5\u202f\n".encode(), []),
    "header in other case and space": (b" LOT ,N, K2O\nA,12.5,20\nB,0.25,5\n", []),
}


@pytest.mark.parametrize("data, notes", FILES.values(), ids=FILES.keys())
def test_dialects(data: bytes, notes: list[str]) -> None:
    """The same numbers come out of every dialect, and "what was read" says what was special."""
    campaign = read(data)
    assert sentences(campaign) == []
    assert values(campaign) == DECIMAL
    assert [note for note in told(campaign) if note.startswith("assays")] == notes


def test_windows_1252_is_said() -> None:
    """A file that is not UTF-8 is read as Windows-1252, and that is said."""
    campaign = read(b"lot,supplier,N,K2O\nA,M\xfcller \x80,10,20\nB,,30,5\n")
    assert campaign.lots[0].supplier == "Müller €"
    assert "assays.csv None: read as Windows-1252" in told(campaign)


def test_encoding_can_be_set() -> None:
    """The encoding of a file without a mark can be set."""
    campaign = read("lot,supplier,N,K2O\nA,Łódź,10,20\n".encode("cp1250"), campaign='[csv]\nencoding = "Windows-1250"')
    assert campaign.lots[0].supplier == "Łódź"


def test_undecodable_bytes_stop() -> None:
    """Bytes of no known encoding are a problem, not a guess."""
    assert sentences(read(b"lot,N,K2O\nA\x81,10,20\n")) == [
        'stops: assays.csv: can\'t be read as text; save it as "CSV UTF-8", or name its [csv] encoding in campaign.toml'
    ]


@pytest.mark.parametrize(
    "typed",
    ["1,234.5", "1'234.5", "1’234.5", "1 234.5", "1\u00a0234.5", "1\u202f234.5", "1234.5", "1.2345e3", "+1234.50"],
)
def test_thousands_with_decimal_point(typed: str) -> None:
    """Every way to group thousands reads as the same number."""
    campaign = read(f'lot,N,K2O,cost\nA,10,20,"{typed}"\n')
    assert sentences(campaign) == []
    assert campaign.lots[0].cost is not None
    assert (campaign.lots[0].cost.value, campaign.lots[0].cost.text) == (F("1234.5"), " ".join(typed.split()))


@pytest.mark.parametrize("typed", ["1.234,5", "1'234,5", "1 234,5", "1\u202f234,5", "1\u00a0234,5", "1234,5"])
def test_thousands_with_decimal_comma(typed: str) -> None:
    """Grouping works beside a decimal comma too."""
    campaign = read(f"lot;N;K2O;cost\nA;10;20;{typed}\n")
    assert sentences(campaign) == []
    assert campaign.lots[0].cost is not None
    assert campaign.lots[0].cost.value == F("1234.5")


def test_one_clear_cell_decides_the_file() -> None:
    """A cell that could be read both ways follows the cells that can't."""
    comma = read("lot;N;K2O;cost\nA;10;20;1,234\nB;3,5;4;2,345\n")
    point = read('lot,N,K2O,cost\nA,10,20,"1,234"\nB,3.5,4,"2,345"\n')
    assert [lot.cost and lot.cost.value for lot in comma.lots] == [F("1.234"), F("2.345")]
    assert [lot.cost and lot.cost.value for lot in point.lots] == [F(1234), F(2345)]


def test_undecidable_mark_names_the_setting() -> None:
    """Where nothing decides the decimal mark the problem names the setting, and the setting decides."""
    assays = "lot;N;K2O;cost\nA;10;20;1,234\n"
    assert sentences(read(assays)) == [
        "stops: assays.csv, row 2, column cost: found '1,234': could be a decimal mark or one that groups thousands; "
        'write decimal = "." or decimal = "," under [csv] in campaign.toml ([csv] decimal)'
    ]
    for mark, value in ((".", F(1234)), (",", F("1.234"))):
        lot = read(assays, campaign=f'[csv]\ndecimal = "{mark}"').lots[0]
        assert lot.cost is not None
        assert lot.cost.value == value


def test_both_marks_alike_are_undecidable() -> None:
    """One cell with a point and one with a comma decide nothing."""
    (sentence,) = sentences(read("lot;N;K2O\nA;1.5;20\nB;1,5;20\n"))
    assert sentence.startswith(
        "stops: assays.csv, row 2, column N: found '1.5': numbers are written with a decimal point and"
    )


def test_the_odd_one_out_is_a_problem() -> None:
    """A lone decimal comma among points is a mistake in its cell, never another number."""
    assert sentences(read('lot,N,K2O\nA,1.5,2.5\nB,"12,5",3.5\n')) == [
        "drops: assays.csv, row 3, column N: found '12,5': is not a number; write 12.5"
    ]


def test_point_with_three_digits_in_a_comma_file() -> None:
    """In a comma-separated file 1.234 has a decimal point."""
    assert values(read("lot,N,K2O\nA,1.234,2.345\n"))["A"]["N"] == F("1.234")


def test_rows_count_records() -> None:
    """A quoted line break stays in its spreadsheet row, so later rows keep their numbers."""
    campaign = read('lot,Note,N,K2O\nA,"two\nlines\r\nthree",10,20\nB,"a ""b"", c",x,5\n')
    assert sentences(campaign) == [
        "drops: assays.csv, row 3, column N: found 'x': is not a number; "
        "write a number, or leave the cell blank where it was not measured"
    ]
    assert campaign.lots[0].remarks == {"Note": "two lines three"}


def test_unclosed_quote_stops() -> None:
    """A quote that is not closed is a problem with its row."""
    assert sentences(read('lot,N,K2O\nA,10,20\n"B,30,5\n')) == [
        "stops: assays.csv, row 3: has a quotation mark that is not closed or stands inside a cell; "
        'write quotation marks in pairs around the whole cell, and "" for one inside it'
    ]


def test_nul_stops() -> None:
    """A zero-filled file is a problem."""
    assert sentences(read(b"lot,N,K2O\nA,10,20\nB,30\0\0\0\0\n")) == [
        "stops: assays.csv, row 3: holds a NUL character; save the file again: it may be half copied"
    ]


def test_duplicate_headers_stop() -> None:
    """Two columns for one thing are a problem, whatever their case, and never one over the other."""
    assert sentences(read("lot,N,n [%],K2O\nA,10,11,20\n")) == [
        "stops: assays.csv, row 1, column n [%]: found 'n [%]': is a second column for n, beside column 2 (N); "
        "leave one of them out, or name one under [columns] ignore in campaign.toml"
    ]


def test_no_header_stops() -> None:
    """A table without the key column is a problem that shows what was found."""
    assert sentences(read("Sample No,N,K2O\nA,10,20\n")) == [
        "stops: assays.csv, row 1: found 'Sample No, N, K2O': has no header row with a column \"lot\"; "
        'name that column "lot", or write "its name" = "lot" under [columns] in campaign.toml'
    ]


def test_wide_row_drops_its_lot() -> None:
    """A row with more cells than the header is not guessed at: an unquoted decimal comma shifts every value."""
    campaign = read("lot,N,K2O\nA,12,5,20\nB,30,5\n")
    assert sentences(campaign) == [
        "drops: assays.csv, row 2: found '20': the row has 4 cells, the header 3; "
        "put quotation marks around a cell that holds a comma, or delete what is too much"
    ]
    assert [lot.name for lot in campaign.lots] == ["B"]


def test_nameless_row_is_a_problem() -> None:
    """A row without a name that is no sum or mean is a forgotten name."""
    assert sentences(read("lot,N,K2O\nA,10,20\nB,30,5\n,17,8\n")) == [
        "drops: assays.csv, row 4, column lot: found '17, 8': the row names no lot; "
        "write the lot's name, or delete the row"
    ]


def test_values_without_header_are_told() -> None:
    """A column of values under a blank header is left out, and a note says so."""
    assert sentences(read("lot,,N,K2O\nA,7,10,20\n")) == [
        "note: assays.csv, row 1: column 2 has values and no header: left out; write its name in the header row"
    ]


@pytest.mark.parametrize(
    "data, message",
    [
        (b"", "is empty"),
        (b"\xef\xbb\xbf \n\n", "is empty"),
        (b"lot,N\n" + b"A" * 10_001 + b",5\n", "has a cell of more than 10,000 characters"),
        (b"lot,N\nA," + b"9" * 200_000 + b"\n", "has a cell of more than 10,000 characters"),
        (b"lot" + b",N" * 1_001 + b"\n", "has more than 1,000 columns"),
        (b"lot,N\n" + b"A,1\n" * 100_001, "has more than 100,000 rows"),
        (b"lot,N\n" + b"\n" * (20 * 1024 * 1024), "is larger than 20 MB"),
    ],
)
def test_sizes(data: bytes, message: str) -> None:
    """A file that is empty or beyond all measure is a problem."""
    assert [(p.severity, p.message) for p in read(data).problems if p.file == "assays.csv"] == [("stops", message)]


@pytest.mark.parametrize(
    "name, data, expected",
    [
        ("assays.csv", ASSAYS.encode(), True),
        ("assays.csv", b"", True),
        ("assays.csv", ASSAYS.encode("utf-16"), True),
        ("assays.csv", ASSAYS.encode("utf-16")[:-1], False),
        ("assays.csv", b"lot,N\nA,1\0\0\0", False),
        ("assays.csv", b'lot,Note\nA,"half', False),
        ("assays.csv", b'lot;Note\nA;"half', False),
        ("assays.csv", b'lot,Note\nA,"all"\n', True),
        ("assays.csv", b'lot,Note\nA,5" pipe\n', True),
        ("assays.csv", b"lot,Note\nA,\xc3\x81\x81\n", False),
        ("notes.md", b'a "quote', True),
        ("campaign.toml", b'title = "half', True),
        ("campaign.toml", b"title\0", False),
    ],
)
def test_is_whole(name: str, data: bytes, expected: bool) -> None:
    """A half-copied file is told from one with a slip of the pen."""
    assert is_whole(name, data) is expected


def test_delimiters_are_told_apart_by_all_rows() -> None:
    """Semicolons inside cells of a comma file don't make it a semicolon file."""
    campaign = read('lot,material,N,K2O\nA,urea; prilled; old,10,20\nB,"map, fine; x",30,5\n')
    assert values(campaign) == PLAIN
    assert campaign.lots[0].materials == ("urea", "prilled", "old")


def test_totals_words() -> None:
    """Words for totals are known, names that begin like them are not."""
    assert tables.is_totals_word("Grand total")
    assert tables.is_totals_word("MEAN:")
    assert not tables.is_totals_word("Summer")
    assert not tables.is_totals_word("Total 7")
