"""Edits: how the input of one revision differs from another's, cell by cell and by meaning.

Laws: ``edits(a, a) == ()``; ``apply(a, edits(a, b))`` means the same as ``b`` (its rows may stand in another
order); any subset of the edits can be applied.  A cell that reads as it did and means something else, since
its component was declared anew, belongs to the edit of that component.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Mapping, Sequence

from generator.history.applying import apply
from generator.history.edit_words import Wording
from generator.history.meaning import (
    Cells,
    differing,
    is_telling,
    lot_cells,
    order_cells,
    same_rows,
    setting_cells,
    typed,
)
from generator.history.records import CellChange, Edit, EditKind
from generator.intake.records import Campaign, Lot, Order

__all__ = ["apply", "edits", "renamed"]


def edits(old: Campaign, new: Campaign) -> tuple[Edit, ...]:
    """Every difference of meaning between two campaigns: settings first, then lots and orders in file order."""
    found = _Found(Wording(old, new))
    found.settings(setting_cells(old), setting_cells(new))
    _rows(found, "lot", old.lots, new.lots, lot_cells)
    _rows(found, "order", old.orders, new.orders, order_cells)
    return found.all()


def renamed(found: Iterable[Edit], kind: EditKind) -> dict[str, str]:
    """Older name → newer name of the lots or orders that were renamed."""
    return {edit.renamed_from: edit.name for edit in found if edit.kind == kind and edit.renamed_from}


class _Found:
    """The edits gathered so far; those of components take in the cells that only follow from them."""

    def __init__(self, wording: Wording) -> None:
        self._wording = wording
        self._edits: list[Edit] = []
        self._shared: dict[tuple[str, str], list[CellChange]] = {}
        self._last: list[Edit] = []

    def all(self) -> tuple[Edit, ...]:
        """Shared edits first, each with everything that follows from it; the notes last."""
        together = [self._wording.shared(key, tuple(cells)) for key, cells in self._shared.items()]
        return (*together, *self._edits, *self._last)

    def settings(self, old: Cells, new: Cells) -> None:
        """Note the settings that differ; all that was declared anew of one component is one edit."""
        for path in differing(old, new):
            cell = CellChange(path=path, old=old.get(path), new=new.get(path))
            if path[0] == "component":
                self._shared.setdefault(("component", path[1]), []).append(cell)
            elif path == ("setting", "accept"):
                self._shared.setdefault(path, []).append(cell)
            elif path == ("notes",):
                self._last.append(self._wording.setting(cell))
            else:
                self._edits.append(self._wording.setting(cell))

    def row(self, kind: EditKind, name: str, old: Cells, new: Cells) -> None:
        """Note the cells of one row that differ."""
        for path in differing(old, new):
            cell = CellChange(path=(kind, name, *path), old=old.get(path), new=new.get(path))
            key = self._followed(path, cell)
            if key is not None:
                self._shared[key].append(cell)
            else:
                self._edits.append(self._wording.cell(kind, name, cell))

    def whole(self, kind: EditKind, cell: CellChange) -> None:
        """Note a row that came, went or has another name."""
        self._edits.append(self._wording.row(kind, cell))

    def _followed(self, path: tuple[str, ...], cell: CellChange) -> tuple[str, str] | None:
        """The shared edit that a cell follows from; None where it was edited itself."""
        if path == ("accept",):
            key, accept = ("setting", "accept"), self._shared.get(("setting", "accept"), [])
            return key if accept and (accept[0].old, accept[0].new) == (cell.old, cell.new) else None
        if path[0] not in ("assay", "limit") or ("component", path[1]) not in self._shared:
            return None
        is_column = path[0] == "assay" and self._wording.is_new_or_gone(path[1])
        return ("component", path[1]) if is_column or typed(cell.old) == typed(cell.new) else None


def _rows(
    found: _Found,
    kind: EditKind,
    old: Sequence[Lot] | Sequence[Order],
    new: Sequence[Lot] | Sequence[Order],
    cells_of: Callable[..., Cells],
) -> None:
    before, after = {row.name: row for row in old}, {row.name: row for row in new}
    gone = {name: cells_of(row) for name, row in before.items() if name not in after}
    came = {name: cells_of(row) for name, row in after.items() if name not in before}
    for was, name in _renames(gone, came):
        found.whole(kind, CellChange(path=(kind, was, "name"), old=was, new=name))
        del gone[was], came[name]
    for name in gone:
        found.whole(kind, CellChange(path=(kind, name), old=before[name], new=None))
    for name, row in after.items():
        if name in before:
            found.row(kind, name, cells_of(before[name]), cells_of(row))
        elif name in came:
            found.whole(kind, CellChange(path=(kind, name), old=None, new=row))


def _renames(gone: Mapping[str, Cells], came: Mapping[str, Cells]) -> list[tuple[str, str]]:
    """Pairs of rows that are the same but for the name, each with no other like it."""
    pairs = []
    for was, old in gone.items():
        alike = [name for name, new in came.items() if same_rows(old, new)]
        if len(alike) == 1 and is_telling(old):
            back = [other for other, cells in gone.items() if same_rows(cells, came[alike[0]])]
            if len(back) == 1:
                pairs.append((was, alike[0]))
    return pairs
