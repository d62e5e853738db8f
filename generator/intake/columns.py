"""Header cells to columns: known names, components, units and the words behind a name (sd, min, max, aim)."""

from __future__ import annotations

from dataclasses import dataclass

from generator.intake.faults import Faults, fold, tidy
from generator.intake.records import Place
from generator.intake.settings import Options
from generator.intake.tables import Row
from generator.intake.units import split_header

#: Columns of assays.csv and stock.csv that are not components.
LOT_COLUMNS = (
    "lot",
    "stock",
    "cost",
    "material",
    "supplier",
    "place",
    "load order",
    "alias",
    "min share",
    "max share",
    "least if used",
    "weigh step",
    "use",
    "sampled",
    "available",
    "moisture",
    "LOI",
    "density",
    "molar mass",
)
#: Columns of targets.csv that are not limits.
ORDER_COLUMNS = (
    "order",
    "amount",
    "price",
    "priority",
    "due",
    "client",
    "accept",
    "state",
    "only lots",
    "without lots",
)
#: Columns that turn an amount of a lot into what a basis counts; each can itself be limited.
CARRIERS = ("moisture", "LOI", "density", "molar mass")
#: Known columns that hold no numbers: their cells say nothing about the decimal mark.
TEXT_COLUMNS = frozenset(
    {
        "lot",
        "order",
        "material",
        "supplier",
        "place",
        "load order",
        "alias",
        "use",
        "sampled",
        "available",
        "due",
        "client",
        "accept",
        "state",
        "only lots",
        "without lots",
    }
)
#: Known columns that hold dates.
DATE_COLUMNS = frozenset({"sampled", "available", "due"})


@dataclass(frozen=True, slots=True, kw_only=True)
class Kind:
    """What a table's headers may be."""

    key: str
    known: tuple[str, ...]
    suffixes: tuple[str, ...]


LOTS = Kind(key="lot", known=LOT_COLUMNS, suffixes=("sd",))
ORDERS = Kind(key="order", known=ORDER_COLUMNS, suffixes=("min", "max", "aim"))


@dataclass(frozen=True, slots=True, kw_only=True)
class Column:
    """One column: where it stands, its header as typed, what it is.

    ``name`` is the known name, or the component's as typed; ``suffix`` is "" or one of the kind's.
    """

    index: int
    header: str
    name: str
    suffix: str = ""
    unit: str | None = None
    is_known: bool = False

    @property
    def key(self) -> tuple[str, str]:
        """What makes two columns the same."""
        return fold(self.name), self.suffix


def interpret(header: str, index: int, kind: Kind, options: Options) -> Column | None:
    """What a header cell means; None where the settings ignore the column."""
    typed = tidy(header)
    if fold(typed) in options.ignored or fold(split_header(typed)[0]) in options.ignored:
        return None
    text, unit = typed, None
    if fold(typed) in options.columns:
        text = options.columns[fold(typed)]
    elif fold(split_header(typed)[0]) in options.columns:
        base, unit = split_header(typed)
        text = options.columns[fold(base)]
    known = {fold(name): name for name in kind.known}
    own = {fold(name) for section in ("components", "derived", "groups") for name in options.section(section)}
    if fold(text) in own and fold(text) not in known:
        return Column(index=index, header=typed, name=text, unit=unit)
    base, own_unit = split_header(text)
    unit = own_unit if own_unit is not None else unit
    if fold(base) in known:
        return Column(index=index, header=typed, name=known[fold(base)], unit=unit, is_known=True)
    stem, _, last = base.rpartition(" ")
    if stem and fold(last) in kind.suffixes:
        stem, stem_unit = (stem, None) if fold(stem) in own else split_header(stem)
        name = known.get(fold(stem), stem)
        return Column(
            index=index, header=typed, name=name, suffix=fold(last), unit=unit if unit is not None else stem_unit
        )
    return Column(index=index, header=typed, name=base, unit=unit)


def read_columns(file: str, header: Row, kind: Kind, options: Options, faults: Faults) -> tuple[Column, ...]:
    """The columns of a header row; a problem for each one that stands twice."""
    columns: dict[tuple[str, str], Column] = {}
    for index, cell in enumerate(header.cells):
        if not cell:
            continue
        column = interpret(cell, index, kind, options)
        if column is None:
            faults.tell(file, header.number, f"column {tidy(cell)}: ignored")
            continue
        if column.key in columns:
            first = columns[column.key]
            faults.stops(
                Place(file, header.number, column.header),
                f"is a second column for {_full_name(column)}, beside column {first.index + 1} ({first.header})",
                "leave one of them out, or name one under [columns] ignore in campaign.toml",
                found=column.header,
            )
            continue
        columns[column.key] = column
    return tuple(columns.values())


def _full_name(column: Column) -> str:
    return f"{column.name} {column.suffix}".strip()
