"""Bytes to a table of cells, as spreadsheets and laboratories write CSV."""

from __future__ import annotations

import csv
import io
import itertools
import re
from collections import Counter
from collections.abc import Callable, Collection
from dataclasses import dataclass

from generator.intake.decoding import decode
from generator.intake.faults import Faults, fold, tidy
from generator.intake.records import Place

MOST_BYTES = 20 * 1024 * 1024
MOST_ROWS = 100_000
MOST_COLUMNS = 1_000
MOST_CHARACTERS = 10_000

#: The header stands within this many rows that are not blank.
LONGEST_PREAMBLE = 200

#: In the order of preference where all else is equal.
DELIMITERS = {",": "comma", ";": "semicolon", "\t": "tab", "|": "bar"}

_SEP_LINE = re.compile(r'"?sep=(?P<mark>[,;\t|])"?[ ,;\t]*(?:\r\n|\r|\n|$)', re.IGNORECASE)
#: A last record that arrives intact only if every quote before it was closed.
_SENTINEL = "end of file"
_TOTALS = re.compile(
    r"(?:(?:grand|sub)[ -]?)?(?:totals?|sum|mean|average|avg|median|st\.? ?dev\.?|std|min|max|minimum|maximum"
    r"|summe|gesamt|mittel|mittelwert|durchschnitt|somme|moyenne)\s*:?"
)


@dataclass(frozen=True, slots=True)
class Row:
    """One record: its spreadsheet row and its cells without surrounding space."""

    number: int
    cells: tuple[str, ...]

    def cell(self, index: int) -> str:
        """The cell of that column; "" beyond the row's end."""
        return self.cells[index] if index < len(self.cells) else ""

    @property
    def is_blank(self) -> bool:
        """Whether no cell holds anything."""
        return not any(self.cells)


@dataclass(frozen=True, slots=True, kw_only=True)
class Table:
    """A table of one file: its header row and the rows under it that are not blank and no repeated headers."""

    file: str
    header: Row
    key: int
    rows: tuple[Row, ...]
    delimiter: str


@dataclass(frozen=True, slots=True, kw_only=True)
class Dialect:
    """What the settings fix; None: told from the file."""

    delimiter: str | None = None
    encoding: str | None = None


class BrokenTableError(ValueError):
    """Text that is not delimited cells: the row, what is wrong, what to do."""

    def __init__(self, row: int, message: str, remedy: str) -> None:
        super().__init__(message)
        self.row, self.message, self.remedy = row, message, remedy


def is_whole(name: str, data: bytes) -> bool:
    """Whether a file looks completely written: it decodes, holds no NUL and, a CSV file, closes its quotes.

    A file with a typing mistake is whole; its problem is to be told.
    """
    decoded = decode(data)
    if decoded is None or "\x00" in decoded.text:
        return False
    return not name.casefold().endswith(".csv") or _closes_quotes(decoded.text)


def _closes_quotes(text: str) -> bool:
    # Closed quotes come in pairs; a single one inside a cell (5" pipe) is a slip that swallows nothing.
    if text.count('"') % 2 == 0:
        return True
    text, mark = _strip_sep_line(text)
    return all(_ends_with_sentinel(text, delimiter) for delimiter in ([mark] if mark else DELIMITERS))


def _ends_with_sentinel(text: str, delimiter: str) -> bool:
    last: list[str] = []
    try:
        for last in csv.reader(io.StringIO(f"{text}\n{_SENTINEL}\n", newline=""), delimiter=delimiter):  # noqa: B007
            pass
    except csv.Error:
        # A field beyond csv's own limit: most likely all that follows an unclosed quote.
        return False
    return last == [_SENTINEL]


def read_table(
    file: str,
    data: bytes,
    key: str,
    is_key: Callable[[str], bool],
    is_known: Callable[[str], bool],
    dialect: Dialect,
    faults: Faults,
) -> Table | None:
    """The table that a file holds, or None where a problem says why not.

    ``key`` is the name of the column that every row must fill ("lot" or "order"); ``is_key`` and ``is_known`` tell
    header cells.  The header is found below a preamble; blank rows and repeated headers are left out.
    """
    text = _text(file, data, dialect, faults)
    if text is None:
        return None
    text, marked = _strip_sep_line(text)
    try:
        delimiter = dialect.delimiter or marked or _find_delimiter(text, is_key)
        records = _records(text, delimiter)
    except BrokenTableError as broken:
        faults.stops(Place(file, broken.row, None), broken.message, broken.remedy)
        return None
    if delimiter != ",":
        faults.tell(file, None, f"cells are separated by {DELIMITERS[delimiter]}")
    return _table(file, records, key, is_key, is_known, delimiter, faults)


def _text(file: str, data: bytes, dialect: Dialect, faults: Faults) -> str | None:
    whole = Place(file, None, None)
    if len(data) > MOST_BYTES:
        faults.stops(whole, f"is larger than {MOST_BYTES // 1024**2} MB", "split it into several campaigns")
        return None
    decoded = decode(data, dialect.encoding)
    if decoded is None:
        faults.stops(
            whole, "can't be read as text", 'save it as "CSV UTF-8", or name its [csv] encoding in campaign.toml'
        )
        return None
    if "\x00" in decoded.text:
        row = decoded.text[: decoded.text.index("\x00")].count("\n") + 1
        faults.stops(Place(file, row, None), "holds a NUL character", "save the file again: it may be half copied")
        return None
    if decoded.encoding != "UTF-8":
        faults.tell(file, None, f"read as {decoded.encoding}")
    if not decoded.text.strip():
        faults.stops(whole, "is empty", "write a header row and one row for each entry")
        return None
    return decoded.text


def _strip_sep_line(text: str) -> tuple[str, str | None]:
    """The text without a first line ``sep=;`` (spreadsheets swallow it, so it is no row), and its mark."""
    match = _SEP_LINE.match(text)
    return (text[match.end() :], match["mark"]) if match is not None else (text, None)


def _records(text: str, delimiter: str) -> list[list[str]]:
    """Every record, blank ones too, so that a record's position is its spreadsheet row.  Raises BrokenTableError."""
    records: list[list[str]] = []
    try:
        for record in csv.reader(io.StringIO(text, newline=""), delimiter=delimiter, strict=True):
            records.append(_checked(record, len(records) + 1))
    except csv.Error as error:
        row = len(records) + 1
        if "limit" in str(error):
            raise _too_long(row) from None
        raise BrokenTableError(
            row,
            "has a quotation mark that is not closed or stands inside a cell",
            'write quotation marks in pairs around the whole cell, and "" for one inside it',
        ) from None
    return records


def _too_long(row: int) -> BrokenTableError:
    return BrokenTableError(
        row, f"has a cell of more than {MOST_CHARACTERS:,} characters", "shorten it, or close its quotation mark"
    )


def _checked(record: list[str], row: int) -> list[str]:
    while record and not record[-1].strip():
        record.pop()
    if row > MOST_ROWS and record:
        raise BrokenTableError(row, f"has more than {MOST_ROWS:,} rows", "split it into several campaigns")
    if len(record) > MOST_COLUMNS:
        raise BrokenTableError(row, f"has more than {MOST_COLUMNS:,} columns", "leave out columns that are not needed")
    if any(len(cell) > MOST_CHARACTERS for cell in record):
        raise _too_long(row)
    return record


_LOOKS_NUMERIC = re.compile(r"[<>=≤≥ ]*[-+−]?[0-9][0-9.,'’\s]*")


def _find_delimiter(text: str, is_key: Callable[[str], bool]) -> str:
    """The delimiter under which the rows make most sense as one table.

    In this order: a header with the key column is found, rows are equally wide, cells are numbers.  A delimiter
    under which the cells can't be read is out; its fault is raised where no other finds a header.
    """
    best, fault = None, None
    for delimiter in DELIMITERS:
        try:
            records = _records(text, delimiter)
        except BrokenTableError as broken:
            fault = fault or broken
            continue
        score = _score(records, is_key)
        if best is None or score > best[0]:
            best = (score, delimiter)
    if fault is not None and (best is None or not best[0][0]):
        raise fault
    assert best is not None
    return best[1]


def _score(records: list[list[str]], is_key: Callable[[str], bool]) -> tuple[bool, float]:
    rows = [record for record in records if record]
    widths = Counter(len(row) for row in rows)
    width, count = max(widths.items(), key=lambda item: (item[1], item[0]), default=(0, 0))
    if width < 2:
        return False, 0.0
    has_key = any(len(row) > 1 and any(is_key(cell) for cell in row) for row in rows[:LONGEST_PREAMBLE])
    cells = [cell for row in rows for cell in row if cell.strip()]
    numeric = sum(_LOOKS_NUMERIC.fullmatch(cell[:100]) is not None for cell in cells) / len(cells)
    return has_key, count / len(rows) + numeric


def _table(
    file: str,
    records: list[list[str]],
    key: str,
    is_key: Callable[[str], bool],
    is_known: Callable[[str], bool],
    delimiter: str,
    faults: Faults,
) -> Table | None:
    rows = [Row(number, tuple(tidy(cell) for cell in record)) for number, record in enumerate(records, start=1)]
    header = _find_header(rows, is_key, is_known)
    if header is None:
        first = next((row for row in rows if not row.is_blank), rows[0])
        faults.stops(
            Place(file, first.number, None),
            f'has no header row with a column "{key}"',
            f'name that column "{key}", or write "its name" = "{key}" under [columns] in campaign.toml',
            found=", ".join(first.cells),
        )
        return None
    for row in rows[: header.number - 1]:
        if not row.is_blank:
            faults.tell(file, row.number, "above the header: left out")
    folded = tuple(fold(cell) for cell in header.cells)
    kept = []
    for row in rows[header.number :]:
        if tuple(fold(cell) for cell in row.cells) == folded:
            faults.tell(file, row.number, "the header again: left out")
        elif not row.is_blank:
            kept.append(row)
    position = next(index for index, cell in enumerate(header.cells) if is_key(cell))
    return Table(file=file, header=header, key=position, rows=tuple(kept), delimiter=delimiter)


def _find_header(rows: Collection[Row], is_key: Callable[[str], bool], is_known: Callable[[str], bool]) -> Row | None:
    """The first row that holds the key column's name and another known one; else, of those with the key, the one with
    the most texts beside it and no numbers."""
    filled = itertools.islice((row for row in rows if not row.is_blank), LONGEST_PREAMBLE)
    keyed = [row for row in filled if any(is_key(cell) for cell in row.cells)]
    for row in keyed:
        if sum(is_known(cell) for cell in row.cells) > 1:
            return row

    def texts(row: Row) -> int:
        others = [cell for cell in row.cells if cell and not is_key(cell)]
        return 0 if any(_LOOKS_NUMERIC.fullmatch(cell[:100]) for cell in others) else len(others)

    return max(keyed, key=texts, default=None)


def is_totals_word(cell: str) -> bool:
    """Whether a key cell names a row of totals, means and the like instead of an entry."""
    return _TOTALS.fullmatch(fold(cell)) is not None
