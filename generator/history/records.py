"""The nouns of a history: edits of the input, changes of the answers, and the causes that join them.

A :class:`Story` is what ``changes.json`` keeps of one revision: everything that its page and the trends
show, so that no later build asks again.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Literal, get_args

EditKind = Literal["lot", "order", "setting"]
ChangeKind = Literal[
    "verdict",
    "order gone",
    "order new",
    "accepted",
    "plan",
    "amount",
    "cost",
    "room",
    "conformity",
    "recipe",
    "lot gone",
    "lot new",
    "role",
    "hull",
    "volume",
]
Value = str | float | None

#: Gravest first: the order in which changes are listed, and from which the headline is taken.
GRAVITY: tuple[ChangeKind, ...] = get_args(ChangeKind)

#: The paths of a campaign's meaning and the values there: ("lot", name, "assay", component), …
Path = tuple[str, ...]
#: A place in a plane: across, up.
Pair = tuple[float, float]


@dataclass(frozen=True, slots=True, kw_only=True)
class CellChange:
    """One cell that means something else; ``old`` or ``new`` None: not there."""

    path: Path
    old: object
    new: object


@dataclass(frozen=True, slots=True, kw_only=True)
class Edit:
    """One difference between two inputs: of which lot, order or setting, in words, and how to apply it.

    ``name`` is that of the lot or order ("" for a setting), in the newer input; ``clause`` reads
    "lot K-7's K₂O re-assayed from 12.1 to 10.9 %".  ``cells`` are empty in an edit read back from a file.
    """

    kind: EditKind
    name: str
    field: str
    old: str
    new: str
    clause: str
    renamed_from: str = ""
    cells: tuple[CellChange, ...] = ()

    @property
    def group(self) -> str:
        """What it is an edit of, for grouping: "lot K-7", "order 1042", "settings"."""
        return f"{self.kind} {self.name}" if self.kind != "setting" else "settings"

    @property
    def sentence(self) -> str:
        """The clause as a sentence."""
        return f"{self.clause[:1].upper()}{self.clause[1:]}."


@dataclass(frozen=True, slots=True, kw_only=True)
class Part:
    """What one group of edits (or the program version) adds to a change of a number.

    ``edits`` are positions in the story's edits; ``error`` is the standard error of a sampled part.
    """

    group: str
    edits: tuple[int, ...]
    amount: float
    error: float | None = None


@dataclass(frozen=True, slots=True, kw_only=True)
class Cause:
    """Why one answer changed.

    ``suffices``: every smallest set of edits (positions in the story's edits) that alone gives the new
    answer; ``at_least``: no set of fewer edits does; ``found``: a set that does, from which no edit can
    be spared, where the smallest could not be searched for; ``restores``: edits whose undoing alone
    brings the old answer back.  ``parts`` divide a change of a number.  ``by_program``: the program's
    version changed this answer, with the old input already.  ``remark`` says what could not be told, or
    how far what is told holds.
    """

    suffices: tuple[tuple[int, ...], ...] = ()
    at_least: int = 0
    found: tuple[int, ...] = ()
    restores: tuple[int, ...] = ()
    parts: tuple[Part, ...] = ()
    by_program: bool = False
    remark: str = ""

    @property
    def is_told(self) -> bool:
        """Whether it names anything at all."""
        return bool(self.suffices or self.found or self.parts or self.by_program)


@dataclass(frozen=True, slots=True, kw_only=True)
class Change:
    """One answer that differs: of which order, lot or hull, what it was, what it is, and why.

    ``unit`` and ``places`` are those in which the sentence gives its numbers (None: to a few significant
    digits); those of a probability are percent.
    """

    kind: ChangeKind
    subject: str
    old: Value
    new: Value
    sentence: str
    cause: Cause | None = None
    unit: str = ""
    places: int | None = None


@dataclass(frozen=True, slots=True, kw_only=True)
class OrderPoint:
    """One order in one revision, as trends draw it; ``verdict`` "none": no answer; ``room`` in sd."""

    verdict: str
    cost: float | None = None
    room: float | None = None
    accepted: float | None = None


@dataclass(frozen=True, slots=True, kw_only=True)
class LotPoint:
    """One lot in one revision; ``assay`` maps components to (value, standard uncertainty or None)."""

    stock: float | None = None
    cost: float | None = None
    assay: Mapping[str, tuple[float, float | None]] = field(default_factory=dict)


@dataclass(frozen=True, slots=True, kw_only=True)
class Summary:
    """One revision's answers and inputs in brief, by name, for the trends."""

    orders: Mapping[str, OrderPoint] = field(default_factory=dict)
    lots: Mapping[str, LotPoint] = field(default_factory=dict)


@dataclass(frozen=True, slots=True, kw_only=True)
class Outline:
    """The lots of two revisions in one plane: (across, up) by lot, on the limits' bases."""

    labels: tuple[str, str]
    units: tuple[str, str]
    old: Mapping[str, Pair]
    new: Mapping[str, Pair]


@dataclass(frozen=True, slots=True, kw_only=True)
class Comparison:
    """What changed since an earlier revision: the one before, the first, one a week before.

    ``number`` and ``recorded`` are the earlier revision's; ``title`` says which one it is.  ``changes``
    hold their causes; ``by_program``: another version of the program gave the earlier answers.
    ``remark`` says why something is missing, if it is.
    """

    number: int
    recorded: str
    title: str
    edits: tuple[Edit, ...] = ()
    changes: tuple[Change, ...] = ()
    by_program: bool = False
    remark: str = ""


@dataclass(frozen=True, slots=True, kw_only=True)
class Story:
    """What ``changes.json`` keeps of one revision.

    ``comparisons``: with the revision before (always the first of them, unless this is the first
    revision), and with useful earlier ones.
    """

    headline: str
    comparisons: tuple[Comparison, ...] = ()
    summary: Summary = field(default_factory=Summary)
    outline: Outline | None = None

    @property
    def edits(self) -> tuple[Edit, ...]:
        """The edits since the revision before."""
        return self.comparisons[0].edits if self.comparisons else ()

    @property
    def changes(self) -> tuple[Change, ...]:
        """The changes since the revision before."""
        return self.comparisons[0].changes if self.comparisons else ()
