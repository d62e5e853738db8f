"""The nouns of the answers.  A Campaign goes in, Findings come out; pages and history read these.

Numbers are floats, correctly rounded from the exact values; what is published as proof is exact
(``Fraction``).  ``results.to_json`` and ``results.from_json`` carry every field, and
from_json(to_json(f)) == f, so that pages drawn from an archived revision are the same bytes.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from fractions import Fraction
from typing import Literal

from generator.intake.records import ReadNote
from generator.problems import Problem

Verdict = Literal["makeable", "edge", "short", "barred", "unreachable"]
Side = Literal["low", "high", "exact"]
Range = tuple[float | None, float | None]
RECIPE_NAMES = ("cheapest", "roomiest", "closest", "fewest", "assured")


@dataclass(frozen=True, slots=True, kw_only=True)
class Multiplier:
    """A weight on one side of one limit; ``on`` is a quantity's name or "share of LOT".

    ``bound`` is the limit's value on that side; ``terms`` is the row by usable lot:
    how much each lot alone breaks the limit (positive = breaks it).
    """

    on: str
    side: Side
    weight: Fraction
    bound: Fraction
    terms: Mapping[str, Fraction] = field(default_factory=dict)


@dataclass(frozen=True, slots=True, kw_only=True)
class Face:
    """Why shares are stuck: Σ weight·row ≥ 0 for every usable lot, > 0 for the stuck ones, so that
    no blend can use these (with share bounds: move them off the bound ``stuck`` names)."""

    multipliers: tuple[Multiplier, ...]
    scores: Mapping[str, Fraction]
    stuck: Mapping[str, Literal["zero", "min", "max"]]
    on_face: tuple[str, ...]


@dataclass(frozen=True, slots=True, kw_only=True)
class Cap:
    """Why no more can be made: for every lot Σ y·row + w ≥ 1, and Σ w·stock = greatest."""

    multipliers: tuple[Multiplier, ...]
    stock_weights: Mapping[str, Fraction]
    greatest: Fraction


@dataclass(frozen=True, slots=True, kw_only=True)
class RecipeProof:
    """Shares that meet every limit exactly."""

    shares: Mapping[str, Fraction]
    face: Face | None = None
    cap: Cap | None = None
    kind: Literal["recipe"] = "recipe"


@dataclass(frozen=True, slots=True, kw_only=True)
class BlockingProof:
    """Multipliers on limits under which every usable lot's score is positive, so that no blend fits.

    With share bounds ``least`` is the least score over the allowed shares, and is positive.
    """

    multipliers: tuple[Multiplier, ...]
    scores: Mapping[str, Fraction]
    least: Fraction | None = None
    kind: Literal["blocking"] = "blocking"


@dataclass(frozen=True, slots=True, kw_only=True)
class Branch:
    """One branch of the house rules, and the blocking proof that closes it."""

    rules: tuple[str, ...]
    multipliers: tuple[Multiplier, ...]
    scores: Mapping[str, Fraction]
    least: Fraction | None = None


@dataclass(frozen=True, slots=True, kw_only=True)
class BranchProof:
    """The house rules leave no branch open."""

    branches: tuple[Branch, ...]
    kind: Literal["branches"] = "branches"


Proof = RecipeProof | BlockingProof | BranchProof


@dataclass(frozen=True, slots=True, kw_only=True)
class CostBound:
    """Why nothing is cheaper: for every usable lot cost ≥ Σ y·row + ``floor`` (exact, per unit of
    amount), so that every blend within the limits costs at least ``floor``.

    ``multipliers`` hold weights ≥ 0 on the rows: cost_i + Σ weight·row_i ≥ floor.
    """

    multipliers: tuple[Multiplier, ...]
    floor: Fraction


@dataclass(frozen=True, slots=True, kw_only=True)
class Conformity:
    """The probability that a blend's true value is inside: together, and for each limit."""

    all: float | None = None
    each: Mapping[str, float | None] = field(default_factory=dict)


@dataclass(frozen=True, slots=True, kw_only=True)
class Recipe:
    """Shares of 1 by lot (used lots only, input order), and what the blend is.

    ``values`` are in limit units by quantity name, every component and derived quantity that all
    used lots report, limited or not.  ``exact`` are the shares exactly.
    """

    shares: Mapping[str, float]
    exact: Mapping[str, Fraction]
    amounts: Mapping[str, float] | None
    cost: float | None
    values: Mapping[str, float]
    conformity: Conformity = field(default_factory=Conformity)
    bound: CostBound | None = None
    room: float | None = None
    remark: str = ""


@dataclass(frozen=True, slots=True, kw_only=True)
class LimitFinding:
    """One limit of one order: its bounds, what the lots can attain, what loosening it is worth."""

    on: str
    low: float | None
    high: float | None
    attainable: Range | None = None
    lots_range: Range | None = None
    worth: float | None = None
    worth_holds: Range | None = None


@dataclass(frozen=True, slots=True, kw_only=True)
class Nearest:
    """The blend that breaks the limits least, with the true excess of each broken limit."""

    shares: Mapping[str, float]
    values: Mapping[str, float]
    excess: Mapping[str, float]


@dataclass(frozen=True, slots=True, kw_only=True)
class WantedLot:
    """The composition that one further lot would need at a share (of 1); None if none would do."""

    share: float
    values: Mapping[str, float] | None


@dataclass(frozen=True, slots=True, kw_only=True)
class CurvePoint:
    """One corner of the cost–room curve."""

    room: float
    cost: float
    shares: Mapping[str, float]


@dataclass(frozen=True, slots=True, kw_only=True)
class OrderFinding:
    """Everything that is known of one order, taken alone; ``verdict`` None: a problem, no answer."""

    order: str
    sentence: str
    verdict: Verdict | None
    amount: float | None = None
    amount_low: float | None = None
    amount_high: float | None = None
    barred_by: tuple[str, ...] = ()
    lifted: Mapping[str, tuple[Verdict | None, float | None]] = field(default_factory=dict)
    room: float | None = None
    room_unit: Literal["sd", "scale"] | None = None
    greatest_amount: float | None = None
    greatest_recipe: Mapping[str, float] | None = None
    runs_out: tuple[str, ...] = ()
    recipes: Mapping[str, Recipe] = field(default_factory=dict)
    limits: tuple[LimitFinding, ...] = ()
    nearest: Nearest | None = None
    wanted_lot: tuple[WantedLot, ...] = ()
    without_lot: Mapping[str, tuple[Verdict | None, float | None]] = field(default_factory=dict)
    enters_at: Mapping[str, float | None] = field(default_factory=dict)
    stays_up_to: Mapping[str, float | None] = field(default_factory=dict)
    curve: tuple[CurvePoint, ...] = ()
    left_out: Mapping[str, str] = field(default_factory=dict)
    proof: Proof | None = None


@dataclass(frozen=True, slots=True, kw_only=True)
class LotFinding:
    """One lot: its role in the hull, where it is used, what it is worth."""

    lot: str
    role: Literal["corner", "inner"] | None
    stock: float | Literal["unlimited"] | None
    cost: float | None
    assay: Mapping[str, float]
    imitated_by: Mapping[str, float] | None = None
    stock_worth: float | None = None
    needed_by: tuple[str, ...] = ()
    used_by: tuple[str, ...] = ()


@dataclass(frozen=True, slots=True, kw_only=True)
class HalfPlane:
    """Σ coefficient·component ≤ at_most, by component name."""

    coefficients: Mapping[str, float]
    at_most: float


@dataclass(frozen=True, slots=True, kw_only=True)
class HullFinding:
    """All compositions that the lots can make, over the limited components of one basis.

    ``facets`` and ``volume`` are None above 4 components; in a flat hull ``facets`` holds the
    equations of its span as two half-planes each.
    """

    basis: str
    over: tuple[str, ...]
    dimension: int
    corners: tuple[str, ...]
    volume: float | None = None
    facets: tuple[HalfPlane, ...] | None = None


@dataclass(frozen=True, slots=True, kw_only=True)
class ComponentFinding:
    """A component as results.json lists it."""

    name: str
    label: str
    unit: str
    rule: str
    basis: str
    limit_basis: str
    sd: float | str | None


@dataclass(frozen=True, slots=True, kw_only=True)
class PlannedOrder:
    """What the plan gives one order; ``exact`` are the amounts exactly.

    ``asked`` is the amount at which it counts as served in full (None: any amount).  ``income`` is price
    × accepted and ``cost`` that of the lots used (None where a price or a lot's cost is unknown).
    """

    accepted: float
    amounts: Mapping[str, float]
    exact: Mapping[str, Fraction] = field(default_factory=dict)
    asked: float | None = None
    priority: int = 1
    income: float | None = None
    cost: float | None = None
    values: Mapping[str, float] = field(default_factory=dict)

    @property
    def state(self) -> Literal["full", "part", "none"]:
        """Whether the order gets all that it asks, some of it, or nothing."""
        if self.accepted <= 0:
            return "none"
        return "part" if self.asked is not None and self.accepted < self.asked else "full"


@dataclass(frozen=True, slots=True, kw_only=True)
class PlanStage:
    """One objective of the plan, in its turn: ``best`` is what was reached.

    ``gap``: by how much of itself it could still be better (0: proven best; None: not searched).
    """

    aim: Literal["value", "amount", "unknown cost", "cost", "lots"]
    priority: int | None
    best: float
    gap: float | None


@dataclass(frozen=True, slots=True, kw_only=True)
class Loser:
    """An order that the plan does not serve in full, and why.

    ``reason``: "alone" (its verdict is no better taken alone), "price" (it would cost more than it
    brings), "stock" (others take what it needs), "left out" (it takes no part in the plan; ``remark``
    says why).  ``short`` are lots of which more, all others kept, would serve it in full: each alone,
    or only together (``is_together``); ``instead`` are accepted orders that could be cut by so much
    (by all of it: dropped) for it.  ``remark`` is a word on the search.
    """

    order: str
    alone: Verdict | None
    reason: Literal["alone", "price", "stock", "left out"]
    short: tuple[str, ...] = ()
    is_together: bool = False
    instead: Mapping[str, float] = field(default_factory=dict)
    remark: str = ""


@dataclass(frozen=True, slots=True, kw_only=True)
class Plan:
    """All orders served together from the stock.

    ``value`` is Σ price·accepted − Σ cost·used where prices are given (``measure`` "value"), else the
    amount accepted.  ``status``: "proven", "within gap" (searched to the end of the effort; ``gap`` is
    relative) or "out of time" (the last guard stopped it).  ``one_more`` is what one unit more of a lot
    that runs out would add to ``value``, the accepted orders and their lots kept.  ``leftover`` is what the stock
    left could still make of each order, as far as known.  ``unchecked`` are lots whose stock was not given.
    """

    value: float | None
    orders: Mapping[str, PlannedOrder]
    left: Mapping[str, float]
    runs_out: tuple[str, ...]
    status: str
    gap: float | None
    measure: Literal["value", "amount"] = "value"
    stages: tuple[PlanStage, ...] = ()
    nodes: int = 0
    losers: tuple[Loser, ...] = ()
    one_more: Mapping[str, float] = field(default_factory=dict)
    never_used: tuple[str, ...] = ()
    leftover: Mapping[str, float] = field(default_factory=dict)
    unchecked: tuple[str, ...] = ()
    unpriced: tuple[str, ...] = ()
    uncosted: tuple[str, ...] = ()


@dataclass(frozen=True, slots=True, kw_only=True)
class Batch:
    """One weighing of one order.

    It stands for ``times`` equal ones, ``batch`` the first of them, ``of`` all of the order.  ``exact`` are
    the amounts as weighed, exactly; ``steps`` the weigh step of each lot (absent: none is
    given, amounts to sensible digits).  ``breaks`` names what the amounts break, with the blend's
    excess in words, where ``holds`` is False; ``remark`` says so of a total that can't be weighed.
    """

    order: str
    batch: int
    amounts: Mapping[str, float]
    values: Mapping[str, float]
    holds: bool
    of: int = 1
    times: int = 1
    exact: Mapping[str, Fraction] = field(default_factory=dict)
    steps: Mapping[str, float] = field(default_factory=dict)
    breaks: tuple[str, ...] = ()
    remark: str = ""


@dataclass(frozen=True, slots=True, kw_only=True)
class RevisionMark:
    """Which revision these answers belong to."""

    number: int
    recorded: str
    digest: str


@dataclass(frozen=True, slots=True, kw_only=True)
class Findings:
    """All answers of one campaign at one moment."""

    slug: str
    title: str
    quantity_unit: str
    currency: str
    components: tuple[ComponentFinding, ...] = ()
    hulls: tuple[HullFinding, ...] = ()
    lots: tuple[LotFinding, ...] = ()
    orders: tuple[OrderFinding, ...] = ()
    plan: Plan | None = None
    batches: tuple[Batch, ...] = ()
    read: tuple[ReadNote, ...] = ()
    problems: tuple[Problem, ...] = ()
    revision: RevisionMark | None = None
