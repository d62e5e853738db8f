"""Edits in words: "lot K-7's K₂O re-assayed from 12.1 to 10.9 %"."""

from __future__ import annotations

import datetime
from collections.abc import Mapping, Sequence
from fractions import Fraction

from generator import numbers
from generator.history.records import CellChange, Edit, EditKind
from generator.intake.records import Campaign, Limit, Lot, Measured, Number, Order, Reading, ReadNote, Spread

#: What pages call the fields of lots, orders and settings; others are called by their own name.
_WORDS = {
    "location": "place",
    "min_share": "least share",
    "max_share": "greatest share",
    "least_if_used": "least share if used",
    "weigh_step": "weigh step",
    "loi": "LOI",
    "molar_mass": "molar mass",
    "load_order": "load order",
    "materials": "material",
    "available": "date available",
    "sampled": "sampling date",
    "due": "due date",
    "accept": "acceptance",
    "only_lots": "only lots",
    "without_lots": "without lots",
    "blank_is_zero": "meaning of a blank",
    "limit_basis": "basis of limits",
    "bias_sd": "common standard deviation",
    "sd": "standard deviation",
    "rule": "blend rule",
    "max_lots": "most lots",
    "keep_apart": "keep apart",
    "whole": "components of the whole",
    "hidden": "what editions hide",
}
_SHARES = frozenset({"min_share", "max_share", "least_if_used"})
_PRICES = frozenset({"cost", "price"})
_AMOUNTS = frozenset({"stock", "weigh_step"})
#: Longer values are told as edited, without what they were and are.
_LONGEST = 60
_LEFT_OUT = ", left out"


class Wording:
    """Words for the edits between two campaigns: labels, units and reasons are looked up in both."""

    def __init__(self, old: Campaign, new: Campaign) -> None:
        self._old = old
        self._new = new
        self._quantities = {**old.quantities(), **new.quantities()}
        self._columns = {c.name for c in old.components} ^ {c.name for c in new.components}

    def is_new_or_gone(self, component: str) -> bool:
        """Whether only one of the campaigns has this component."""
        return component in self._columns

    def shared(self, key: tuple[str, str], cells: tuple[CellChange, ...]) -> Edit:
        """The edit of one component's declaration (or of what all orders accept), with all that follows."""
        if key[0] == "setting":
            return _edit("setting", "", key[1], *self._texts("accept", cells[0]), "setting accept", cells)
        name = key[1]
        own = [cell for cell in cells if cell.path[:2] == key]
        is_here = any(component.name == name for component in self._new.components)
        label = self.label(name)
        if self.is_new_or_gone(name):
            lots = len({cell.path[1] for cell in cells if cell.path[0] == "lot"})
            reported = f" (measured in {lots} lot{'' if lots == 1 else 's'})" if lots else ""
            clause = f"component {label} is {'new' if is_here else 'no longer there'}{reported}"
            return Edit(kind="setting", name="", field=f"component {name}", old="", new="", clause=clause, cells=cells)
        said = [(_word(cell.path[2]), *self._texts(cell.path[2], cell)) for cell in own]
        clause = f"component {label}: " + ", ".join(f"{word} {_moved(old, new)}" for word, old, new in said)
        old, new = ("; ".join(item[side] for item in said) for side in (1, 2))
        return Edit(kind="setting", name="", field=f"component {name}", old=old, new=new, clause=clause, cells=cells)

    def setting(self, cell: CellChange) -> Edit:
        """The edit of one setting, house rule, derived quantity or group, or of the notes."""
        room = cell.path[0]
        if room == "notes":
            return Edit(
                kind="setting", name="", field="notes", old="", new="", clause="the notes were edited", cells=(cell,)
            )
        what = (
            {
                "setting": f"setting {_word(cell.path[1])}",
                "house": f"house rule {_word(cell.path[1])}",
                "derived": f"derived quantity {cell.path[1]}",
                "group": f"group {cell.path[1]}",
            }[room]
            if len(cell.path) > 1
            else room
        )
        return _edit("setting", "", what, *self._texts(cell.path[-1], cell), what, (cell,))

    def row(self, kind: EditKind, cell: CellChange) -> Edit:
        """The edit by which a lot or order came, went or got another name."""
        name = cell.path[1]
        if cell.path[2:] == ("name",):
            clause = f"{kind} {cell.old} is now called {cell.new}"
            return Edit(
                kind=kind,
                name=str(cell.new),
                field="name",
                old=str(cell.old),
                new=str(cell.new),
                clause=clause,
                renamed_from=str(cell.old),
                cells=(cell,),
            )
        if cell.new is None:
            why = _reason(self._new.read, kind, name)
            clause = f"{kind} {name} is left out ({why})" if why else f"{kind} {name} is no longer there"
        else:
            why = _reason(self._old.read, kind, name)
            clause = f"{kind} {name} is used again" if why else f"{kind} {name} is new"
        old, new = ("there", "") if cell.new is None else ("", "there")
        return Edit(kind=kind, name=name, field="", old=old, new=new, clause=clause, cells=(cell,))

    def cell(self, kind: EditKind, name: str, cell: CellChange) -> Edit:
        """The edit of one cell of a lot or an order."""
        item, *key = cell.path[2:]
        owner = f"{kind} {name}'s"
        if item == "assay":
            return self._assay(name, key[0], cell)
        if item == "limit":
            return self._limit(name, key[0], cell)
        if item == "amount":
            old, new = (_window(value) if isinstance(value, Limit) else "" for value in (cell.old, cell.new))
            clause = f"{owner} amount {_moved(old, new, self._new.settings.quantity_unit)}"
            return Edit(kind=kind, name=name, field="amount", old=old, new=new, clause=clause, cells=(cell,))
        word = key[0] if item == "remark" else _word(item)
        old, new = self._texts(item, cell)
        unit = self._unit(item)
        verb = _moved(old, new, unit)
        if isinstance(cell.old, Number) and isinstance(cell.new, Number):
            verb = f"{'rose' if cell.new.value > cell.old.value else 'fell'} from {old} to {_with(new, unit)}"
        return Edit(kind=kind, name=name, field=word, old=old, new=new, clause=f"{owner} {word} {verb}", cells=(cell,))

    def label(self, name: str) -> str:
        """What pages call a quantity."""
        quantity = self._quantities.get(name)
        return quantity.label or name if quantity else name

    def _assay(self, lot: str, component: str, cell: CellChange) -> Edit:
        unit = self._quantities[component].unit if component in self._quantities else ""
        old, new = (assay_text(value) if isinstance(value, Measured) else "" for value in (cell.old, cell.new))
        label, field = self.label(component), component
        if isinstance(cell.old, Measured) and isinstance(cell.new, Measured):
            if old == new:
                field = f"{component} sd"
                verb = "standard deviation or replicates edited"
            else:
                verb = f"re-assayed from {old} to {_with(new, unit)}"
        else:
            verb = f"now measured: {_with(new, unit)}" if new else f"no longer measured (it was {_with(old, unit)})"
        clause = f"lot {lot}'s {label} {verb}"
        return Edit(kind="lot", name=lot, field=field, old=old, new=new, clause=clause, cells=(cell,))

    def _limit(self, order: str, quantity: str, cell: CellChange) -> Edit:
        unit = self._quantities[quantity].unit if quantity in self._quantities else ""
        old, new = (_window(value) if isinstance(value, Limit) else "" for value in (cell.old, cell.new))
        what = f"order {order}'s limit on {self.label(quantity)}"
        if isinstance(cell.old, Limit) and isinstance(cell.new, Limit):
            clause = f"{what} {_direction(cell.old, cell.new)} from {old} to {_with(new, unit)}"
            if old == new:
                clause = f"{what} has another aim"
        else:
            clause = f"{what} added: {_with(new, unit)}" if new else f"{what} dropped (it was {_with(old, unit)})"
        return Edit(
            kind="order", name=order, field=f"limit on {quantity}", old=old, new=new, clause=clause, cells=(cell,)
        )

    def _texts(self, item: str, cell: CellChange) -> tuple[str, str]:
        return _text(cell.old, item), _text(cell.new, item)

    def _unit(self, item: str) -> str:
        settings = self._new.settings
        if item in _PRICES:
            return f"{settings.currency} per {settings.quantity_unit}"
        if item in _SHARES or item in ("moisture", "loi"):
            return "%"
        return settings.quantity_unit if item in _AMOUNTS else ""


def assay_text(measured: Measured) -> str:
    """What was measured, as typed; of replicates the mean, with one decimal more."""
    if len(measured.readings) == 1:
        return _reading(measured.readings[0])
    if any(reading.below for reading in measured.readings):
        return " and ".join(_reading(reading) for reading in measured.readings)
    places = max(numbers.typed_decimals(reading.value, reading.text) for reading in measured.readings) + 1
    mean = sum((reading.value for reading in measured.readings), Fraction(0)) / len(measured.readings)
    exact = numbers.exact_places(mean)
    return numbers.text(mean, min(places, numbers.MOST_PLACES) if exact is None else min(exact, places))


def _reading(reading: Reading) -> str:
    places = numbers.typed_decimals(reading.value, reading.text)
    return ("<" if reading.below else "") + numbers.text(reading.value, places)


def _word(item: str) -> str:
    return _WORDS.get(item, item.replace("_", " "))


def _edit(kind: EditKind, name: str, field: str, old: str, new: str, what: str, cells: tuple[CellChange, ...]) -> Edit:
    return Edit(kind=kind, name=name, field=field, old=old, new=new, clause=f"{what} {_moved(old, new)}", cells=cells)


def _moved(old: str, new: str, unit: str = "") -> str:
    """Words such as "changed from 3 to 4 t"; only "edited" where a value is too long to read."""
    if max(len(old), len(new)) > _LONGEST:
        return "edited"
    if not old or not new:
        gone = f"no longer given (it was {_with(old, unit)})" if old else "edited"
        return f"set to {_with(new, unit)}" if new else gone
    return "edited" if old == new else f"changed from {old} to {_with(new, unit)}"


def _with(text: str, unit: str) -> str:
    return f"{text}\N{NO-BREAK SPACE}{unit}" if unit and text != "unlimited" else text


def _text(value: object, item: str) -> str:
    """A value in words; shares in percent, as they are typed."""
    if isinstance(value, Number):
        shown = value.value * 100 if item in _SHARES else value.value
        return numbers.text(shown, numbers.typed_decimals(shown, value.text))
    if isinstance(value, Fraction):
        return numbers.exact(value)
    if isinstance(value, Spread):
        return f"{numbers.exact(value.value * 100)} %" if value.relative else numbers.exact(value.value)
    if isinstance(value, datetime.date):
        return value.isoformat()
    if isinstance(value, bool):
        return "yes" if value else "no"
    if isinstance(value, Mapping):
        return "; ".join(f"{key}: {_text(inner, '')}" for key, inner in value.items())
    if isinstance(value, Sequence) and not isinstance(value, str):
        return ", ".join(_text(inner, "") for inner in value)
    if value is None or isinstance(value, Lot | Order):
        return ""
    text = getattr(value, "text", None)
    return str(value) if text is None and isinstance(value, str | int) else str(text or "")


def _window(limit: Limit) -> str:
    """A limit in words: "12.5 to 13.5", "at most 0.3"."""
    low = None if limit.low is None else numbers.exact(limit.low)
    high = None if limit.high is None else numbers.exact(limit.high)
    if low is not None and high is not None:
        return f"exactly {low}" if limit.is_exact else f"{low} to {high}"
    if high is not None:
        return f"at most {high}"
    return f"at least {low}" if low is not None else "no limit"


def _direction(old: Limit, new: Limit) -> str:
    low = _compared(old.low, new.low)
    high = -_compared(old.high, new.high, missing=1)
    if low >= 0 and high >= 0:
        return "tightened"
    return "loosened" if low <= 0 and high <= 0 else "moved"


def _compared(old: Fraction | None, new: Fraction | None, missing: int = -1) -> int:
    """−1, 0 or 1 as the bound fell, stayed or rose; no bound is infinitely far (``missing`` says where)."""
    if old is None or new is None:
        return 0 if old is new else missing * (1 if new is None else -1)
    return (new > old) - (new < old)


def _reason(read: Sequence[ReadNote], kind: EditKind, name: str) -> str:
    """Why a row was left out, as "what was read" says; empty where it was not."""
    for note in read:
        if note.what.startswith(f"{kind} {name}: ") and note.what.endswith(_LEFT_OUT):
            return note.what.removeprefix(f"{kind} {name}: ").removesuffix(_LEFT_OUT)
    return ""
