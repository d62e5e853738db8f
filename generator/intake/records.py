"""The nouns of a campaign: frozen records that the readers fill and every other room reads.

All numbers are exact (``Fraction``) beside the text as typed.  Shares typed in percent are stored as
fractions of 1.  Component values are stored in the component's own unit, whatever unit the file used.
"""

from __future__ import annotations

import datetime
from collections.abc import Mapping
from dataclasses import dataclass, field
from fractions import Fraction
from typing import Literal

from generator.problems import Problem, stopping

Basis = Literal["as received", "dry", "ignited", "volume", "mole"]
Below = Literal["half", "limit", "zero"]
Acceptance = Literal["whole", "part"]


@dataclass(frozen=True, slots=True)
class Place:
    """Where a cell stands: file, spreadsheet row (from 1) and column header (or toml key)."""

    file: str
    row: int | None
    column: str | None


@dataclass(frozen=True, slots=True)
class Number:
    """An exact number, the text it was typed as, and where."""

    value: Fraction
    text: str
    place: Place | None = None


@dataclass(frozen=True, slots=True)
class Reading:
    """One determination of one component: ``below`` means "less than ``value``"."""

    value: Fraction
    text: str
    place: Place | None = None
    below: bool = False


@dataclass(frozen=True, slots=True)
class Measured:
    """One component of one lot: every replicate's reading, and the row's standard deviations.

    ``readings`` is never empty; ``sds`` holds the typed standard deviation cells of the rows, if any.
    A ``blank = "zero"`` component has one reading of 0 with text "".
    """

    readings: tuple[Reading, ...]
    sds: tuple[Number, ...] = ()


@dataclass(frozen=True, slots=True)
class Spread:
    """A standard deviation: in the component's unit, or relative (a fraction of the value)."""

    value: Fraction
    relative: bool = False


@dataclass(frozen=True, slots=True, kw_only=True)
class Limit:
    """A low and/or high bound as typed; ``aim`` serves the recipe ``closest``.

    A bare number without tolerance is exact: ``low == high``.
    """

    low: Fraction | None
    high: Fraction | None
    aim: Fraction | None = None
    text: str = ""
    place: Place | None = None

    @property
    def is_exact(self) -> bool:
        """Whether low equals high."""
        return self.low is not None and self.low == self.high


@dataclass(frozen=True, slots=True, kw_only=True)
class Component:
    """A measured property that blends."""

    name: str
    label: str
    unit: str
    basis: Basis
    limit_basis: Basis
    rule: str = "linear"
    sd: Spread | None = None
    bias_sd: Spread | None = None
    tolerance: Fraction | None = None
    blank_is_zero: bool = False


@dataclass(frozen=True, slots=True)
class LinearForm:
    """Σ coefficient · component + constant, with component values in their own units."""

    terms: tuple[tuple[str, Fraction], ...]
    constant: Fraction = Fraction(0)


@dataclass(frozen=True, slots=True, kw_only=True)
class Derived:
    """A quantity computed from components: linear, or linear over linear."""

    name: str
    label: str
    unit: str
    text: str
    numerator: LinearForm
    denominator: LinearForm | None = None


@dataclass(frozen=True, slots=True, kw_only=True)
class Group:
    """A component that is 100 % for its lots and 0 for others, by amount.

    ``lots`` are the names of the member lots, in input order; ``share`` holds for every order.
    """

    name: str
    label: str
    lots: tuple[str, ...]
    patterns: tuple[str, ...]
    share: Limit | None = None
    unit: str = "%"


Quantity = Component | Derived | Group


@dataclass(frozen=True, slots=True, kw_only=True)
class Lot:
    """An identified quantity of material with an assay.

    ``stock`` None: unlimited if ``is_unlimited``, else not checked (no stock column).
    ``moisture`` and ``loi`` are in percent as typed; ``density`` and ``molar_mass`` as typed.
    ``assay`` maps component names to what was measured; a component not measured is absent.
    """

    name: str
    place: Place
    assay: Mapping[str, Measured]
    stock: Number | None = None
    is_unlimited: bool = False
    cost: Number | None = None
    materials: tuple[str, ...] = ()
    supplier: str = ""
    location: str = ""
    load_order: str = ""
    alias: str = ""
    min_share: Number | None = None
    max_share: Number | None = None
    least_if_used: Number | None = None
    weigh_step: Number | None = None
    sampled: datetime.date | None = None
    available: datetime.date | None = None
    moisture: Number | None = None
    loi: Number | None = None
    density: Number | None = None
    molar_mass: Number | None = None
    remarks: Mapping[str, str] = field(default_factory=dict)


@dataclass(frozen=True, slots=True, kw_only=True)
class Order:
    """What must be blended: an amount and limits on quantities, by name, in file order."""

    name: str
    place: Place
    limits: Mapping[str, Limit]
    amount: Limit | None = None
    price: Number | None = None
    priority: int = 1
    due: datetime.date | None = None
    client: str = ""
    accept: Acceptance = "whole"
    only_lots: tuple[str, ...] = ()
    without_lots: tuple[str, ...] = ()
    remarks: Mapping[str, str] = field(default_factory=dict)


@dataclass(frozen=True, slots=True, kw_only=True)
class House:
    """The site's rules; shares as fractions of 1."""

    max_lots: int | None = None
    least_if_used: Fraction | None = None
    weigh_step: Fraction | None = None
    keep_apart: tuple[tuple[str, ...], ...] = ()


@dataclass(frozen=True, slots=True, kw_only=True)
class Settings:
    """campaign.toml over site.toml over the defaults."""

    title: str
    quantity_unit: str = "t"
    quantity_basis: Basis = "as received"
    currency: str = "EUR"
    basis: Basis = "as received"
    theme: str = "plain"
    confidence: Fraction = Fraction(95, 100)
    below_detection: Below = "half"
    accept: Acceptance = "whole"
    plan_nodes: int = 20000
    plan_seconds: Fraction = Fraction(60)
    batch_size: Fraction | None = None
    whole: tuple[str, ...] = ()
    whole_total: Fraction = Fraction(100)
    planes: tuple[tuple[str, str], ...] = ()
    hidden: Mapping[str, tuple[str, ...]] = field(default_factory=dict)


@dataclass(frozen=True, slots=True)
class ReadNote:
    """A line of "what was read": a row left out, or a file or cell read in a special way."""

    file: str
    row: int | None
    what: str


@dataclass(frozen=True, slots=True, kw_only=True)
class Campaign:
    """One folder, read: everything that could be understood, and every problem at once."""

    slug: str
    folder: str
    settings: Settings
    components: tuple[Component, ...] = ()
    derived: tuple[Derived, ...] = ()
    groups: tuple[Group, ...] = ()
    house: House = field(default_factory=House)
    lots: tuple[Lot, ...] = ()
    orders: tuple[Order, ...] = ()
    notes: str = ""
    read: tuple[ReadNote, ...] = ()
    problems: tuple[Problem, ...] = ()

    @property
    def has_stock(self) -> bool:
        """Whether stock was given at all; without it answers say "stock not checked"."""
        return any(lot.stock is not None or lot.is_unlimited for lot in self.lots)

    @property
    def is_stopped(self) -> bool:
        """Whether a problem leaves this campaign without answers."""
        return bool(stopping(self.problems))

    def quantities(self) -> dict[str, Quantity]:
        """Components, derived quantities and groups by name."""
        every: tuple[Quantity, ...] = (*self.components, *self.derived, *self.groups)
        return {quantity.name: quantity for quantity in every}

    def lot(self, name: str) -> Lot:
        """The lot of that name; KeyError if there is none."""
        for lot in self.lots:
            if lot.name == name:
                return lot
        raise KeyError(name)

    def order(self, name: str) -> Order:
        """The order of that name; KeyError if there is none."""
        for order in self.orders:
            if order.name == name:
                return order
        raise KeyError(name)
