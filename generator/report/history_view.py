"""What history pages show: a revision's edits, changes and causes; the timeline; each order's and lot's own past."""

from __future__ import annotations

from collections.abc import Sequence

from generator import numbers
from generator.history.chronicle import Line
from generator.history.headlines import cause_text, clause_of, part_size, part_words
from generator.history.records import Cause, Change, Comparison, Edit, Outline, Part
from generator.report import words
from generator.report.figures import trends
from generator.report.figures.canvas import finished
from generator.report.parts import Cell, Column, FigureView, Legend, Row, Section, Table, text_cell

#: Rows of one table at most, so that no page grows without end; what is left out is counted.
MOST_ROWS = 150
#: Parts of one changed number at most; smaller ones are told together.
MOST_PARTS = 8
#: What a change is of, where it is not of an order.
_KINDS = {"lot gone": "Lot", "lot new": "Lot", "role": "Lot", "hull": "Hull", "volume": "Hull", "plan": "Plan"}


def revision_address(slug: str, number: int) -> str:
    """Where a revision's page stands."""
    return f"{slug}/history/{number:04d}.html"


def history_index(slug: str) -> str:
    """Where the timeline of a campaign begins."""
    return f"{slug}/history/index.html"


# --- one revision


def revision_sections(line: Line) -> tuple[Section, ...]:
    """The parts of a revision's page: changes with causes, edits, the hull, and what changed since earlier ones."""
    story = line.story
    if story is None:
        return ()
    if not story.comparisons:
        sentence = "This is the first revision: there is none before it to compare with."
        return (Section(anchor="changes", title="Changes and their causes", sentences=(sentence,)),)
    last = story.comparisons[0]
    found = [changes_section(last, "changes", "Changes and their causes"), edits_section(last, "edits", "Edits")]
    if story.outline is not None:
        found.append(Section(anchor="hull", title="Hull before and after", figures=(_hulls(story.outline),)))
    further = [_since(comparison, number) for number, comparison in enumerate(story.comparisons[1:], 1)]
    if further:
        found.append(Section(anchor="since", title="Since earlier revisions", folded=tuple(further)))
    return tuple(found)


def changes_section(comparison: Comparison, anchor: str, title: str) -> Section:
    """Every answer that changed, and why."""
    sentences = [comparison.remark] if comparison.remark else []
    if comparison.by_program:
        sentences.append("The answers before were found by another version of the program.")
    if not comparison.changes:
        sentences.append("No answer changed.")
        return Section(anchor=anchor, title=title, sentences=tuple(sentences))
    shown = comparison.changes[:MOST_ROWS]
    has_cause = any(change.cause is not None for change in shown)
    # A column without an entry would be a header squeezed to the edge.
    columns = (Column(title="Of"), Column(title="What changed"), *([Column(title="Cause")] if has_cause else []))
    rows = tuple(Row(cells=_change_cells(change, comparison.edits)[: len(columns)]) for change in shown)
    note = _left_out(len(comparison.changes) - len(shown), "change")
    table = Table(anchor=f"{anchor}-table", caption=title, columns=columns, rows=rows, note=note, stacks=True)
    return Section(anchor=anchor, title=title, sentences=tuple(sentences), tables=(table,))


def edits_section(comparison: Comparison, anchor: str, title: str) -> Section:
    """Every edit, grouped by lot, order and settings."""
    if not comparison.edits:
        return Section(anchor=anchor, title=title, sentences=("The input means the same as before.",))
    shown = comparison.edits[:MOST_ROWS]
    rows = []
    group = ""
    for edit in shown:
        name = edit.group[:1].upper() + edit.group[1:]
        rows.append(Row(cells=(text_cell("" if edit.group == group else name), text_cell(edit.sentence))))
        group = edit.group
    columns = (Column(title="Of"), Column(title="Edit"))
    note = _left_out(len(comparison.edits) - len(shown), "edit")
    table = Table(anchor=f"{anchor}-table", caption=title, columns=columns, rows=tuple(rows), note=note, stacks=True)
    return Section(anchor=anchor, title=title, tables=(table,))


def _since(comparison: Comparison, number: int) -> Section:
    title = f"Since revision {comparison.number}, {comparison.title}, {words.moment(comparison.recorded)}"
    anchor = f"since-{number}"
    return Section(
        anchor=anchor,
        title=title,
        sentences=(
            f"{words.plural(len(comparison.changes), 'change')}, {words.plural(len(comparison.edits), 'edit')}.",
        ),
        tables=(
            *changes_section(comparison, f"{anchor}-changes", "Changes and their causes").tables,
            *edits_section(comparison, f"{anchor}-edits", "Edits").tables,
        ),
    )


def _change_cells(change: Change, edits: Sequence[Edit]) -> tuple[Cell, Cell, Cell]:
    verdict = change.new if change.kind in ("verdict", "order new") else None
    of = _KINDS.get(change.kind, "Order")
    said = change.sentence
    for start in (f"Order {change.subject}: ", f"Order {change.subject} ", f"Lot {change.subject} ", "The plan: "):
        said = said.removeprefix(start)
    name = of if of in ("Hull", "Plan") else f"{of} {change.subject}"
    return (
        text_cell(name),
        Cell(
            text=f"{said[:1].upper()}{said[1:]}", mark=str(verdict) if verdict else "", tone="long" if verdict else ""
        ),
        _cause_cell(change, edits),
    )


def _cause_cell(change: Change, edits: Sequence[Edit]) -> Cell:
    cause = change.cause
    if cause is None:
        return text_cell("")
    if cause.parts:
        shown = len(cause.parts) if len(cause.parts) <= MOST_PARTS else MOST_PARTS - 1
        texts = [_part_text(part, change, edits) for part in cause.parts[:shown]]
        if shown < len(cause.parts):
            rest = sum(part.amount for part in cause.parts[shown:])
            texts.append(f"{part_size(change, rest)} from {len(cause.parts) - shown} smaller parts")
        return text_cell("; ".join(texts) + ".", detail=cause.remark)
    why = cause_text(change, edits)
    if not why:
        return text_cell(cause.remark)
    told = [_undone(cause, change, edits), cause.remark]
    return text_cell(f"{why[:1].upper()}{why[1:]}.", detail=" ".join(text for text in told if text))


def _part_text(part: Part, change: Change, edits: Sequence[Edit]) -> str:
    percent = 100 if change.kind == "conformity" else 1
    error = "" if part.error is None else f" (sampled, ± {numbers.significant(part.error * percent, 1)})"
    return f"{part_size(change, part.amount)}{error} from {part_words(part, edits, change.subject)}"


def _undone(cause: Cause, change: Change, edits: Sequence[Edit]) -> str:
    """Whether one edit taken back alone brings the old answer back."""
    if not (cause.suffices or cause.found) or (cause.found and cause.remark):
        return ""
    old = {"verdict": "old verdict", "recipe": "old recipe", "accepted": "old amount"}.get(change.kind, "old answer")
    if not cause.restores:
        return f"Undoing no single one of these brings the {old} back."
    named = [clause_of(edits[position], change.subject) for position in cause.restores[:3]]
    involved = {position for chosen in (*cause.suffices, cause.found) for position in chosen}
    if involved == set(cause.restores):
        return f"Undoing it brings the {old} back." if len(involved) == 1 else "Undoing any one brings it back."
    return f"Undoing one alone brings the {old} back: {words.listed(named, 'or')}."


def _left_out(count: int, what: str) -> str:
    return f"{words.plural(count, f'more {what}')}: see changes.json of this revision." if count > 0 else ""


def _hulls(outline: Outline) -> FigureView:
    across, up = (
        f"{label}, {unit}" if unit else label for label, unit in zip(outline.labels, outline.units, strict=True)
    )
    moved = [lot for lot in outline.new if lot in outline.old and outline.old[lot] != outline.new[lot]]
    came = [lot for lot in outline.new if lot not in outline.old]
    gone = [lot for lot in outline.old if lot not in outline.new]
    told = [
        f"{words.listed(lots)} {verb}." for lots, verb in ((moved, "moved"), (came, "came"), (gone, "went")) if lots
    ]
    caption = f"Dashed: the revision before. {' '.join(told)} {words.SHADOW}"
    legend = (
        Legend(mark="hull", text="hull now"),
        Legend(mark="hull-before", text="hull before"),
        Legend(mark="corner", text="lot"),
        Legend(mark="moved", text="lot that moved or came"),
        Legend(mark="inner", text="where a lot was"),
    )
    svg = finished(trends.hulls(outline.old, outline.new, across, up), "fig-hulls", "Hull before and after", caption)
    return FigureView(anchor="hulls", title="Hull before and after", svg=svg, caption=caption, legend=legend)
