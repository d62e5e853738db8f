"""A small campaign and its answers, made by hand; a test names only what it changes."""

from __future__ import annotations

from dataclasses import replace
from fractions import Fraction
from typing import Any

from generator.findings.records import (
    BlockingProof,
    Branch,
    BranchProof,
    Cap,
    Conformity,
    CostBound,
    CurvePoint,
    Face,
    Findings,
    HalfPlane,
    HullFinding,
    LimitFinding,
    LotFinding,
    Multiplier,
    Nearest,
    OrderFinding,
    Plan,
    PlannedOrder,
    Recipe,
    RecipeProof,
    WantedLot,
)
from generator.intake.records import (
    Campaign,
    Component,
    Limit,
    Lot,
    Measured,
    Number,
    Order,
    Place,
    Reading,
    ReadNote,
    Settings,
)
from generator.problems import Problem
from generator.report.pages import assets, draw_campaign, draw_index, draw_method
from generator.report.themes import Theme
from generator.report.views import CampaignPages, RevisionLine, index_entry

F = Fraction

#: Text that does harm wherever it is not shown as text.
HOSTILE = """<b onclick="x()">&"'</script><script>alert(1)</script>{{ 7*7 }}]]>--> $x$ #fe0101 id="main" url(#a)"""


def make_lot(name: str, n: str, k: str, *, stock: str | None = "100", cost: str | None = "50", **more: Any) -> Lot:
    """A lot with two components and the texts as typed."""
    return Lot(
        name=name,
        place=Place("assays.csv", 2, "lot"),
        assay={
            "N": Measured((Reading(F(n), n),)),
            "K": Measured((Reading(F(k.lstrip("<")), k, below=k.startswith("<")),)),
        },
        stock=Number(F(stock), stock) if stock else None,
        cost=Number(F(cost), cost) if cost else None,
        **more,
    )


def make_limit(low: str | None, high: str | None = None) -> Limit:
    """A limit from texts."""
    return Limit(low=F(low) if low else None, high=F(high) if high else None, text=f"{low} - {high}")


def make_order(name: str, **limits: Limit) -> Order:
    """An order of 40 with limits by component."""
    return Order(
        name=name,
        place=Place("targets.csv", 2, "order"),
        limits=limits,
        amount=make_limit("40", "40"),
        client="Quill & Co",
    )


def make_campaign(**changes: Any) -> Campaign:
    """Lots A (N 10, K 20), B (N 30, K 5) and C between them; one order midway, one beyond the hull."""
    campaign = Campaign(
        slug="spring",
        folder="spring",
        settings=Settings(title="Spring blends"),
        components=tuple(
            Component(name=name, label=label, unit="%", basis="as received", limit_basis="as received")
            for name, label in (("N", "N"), ("K", "K₂O"))
        ),
        lots=(
            make_lot("A", "10.0", "20", cost="40"),
            make_lot("B", "30.25", "<5", cost="60", moisture=Number(F(4), "4.0")),
            make_lot("C", "20", "12.5", stock=None, is_unlimited=True, cost=None),
        ),
        orders=(
            make_order("midway", N=make_limit("15", "25")),
            make_order("beyond", N=make_limit("20"), K=make_limit("16")),
        ),
        notes="# Heading\n\nSome *notes*.",
        read=(ReadNote("assays.csv", 9, "totals row left out"),),
    )
    return replace(campaign, **changes)


def make_recipe(**changes: Any) -> Recipe:
    """Half A, half B."""
    recipe = Recipe(
        shares={"A": 0.5, "B": 0.5},
        exact={"A": F(1, 2), "B": F(1, 2)},
        amounts={"A": 20.0, "B": 20.0},
        cost=50.0,
        values={"N": 20.125, "K": 11.25},
    )
    return replace(recipe, **changes)


def low_n(weight: str = "3") -> Multiplier:
    """At least 20 of N, with what each lot lacks."""
    return Multiplier(
        on="N", side="low", weight=F(weight), bound=F(20), terms={"A": F(10), "B": F("-10.25"), "C": F(0)}
    )


def low_k(weight: str = "4") -> Multiplier:
    """At least 16 of K, with what each lot lacks."""
    return Multiplier(
        on="K", side="low", weight=F(weight), bound=F(16), terms={"A": F(-4), "B": F("13.5"), "C": F("3.5")}
    )


SCORES = {"A": F(14), "B": F("23.25"), "C": F(14)}


def make_midway(**changes: Any) -> OrderFinding:
    """A makeable order."""
    finding = OrderFinding(
        order="midway",
        sentence="Makeable: cheapest 50.00 EUR/t from 2 lots.",
        verdict="makeable",
        amount=40.0,
        amount_low=40.0,
        amount_high=40.0,
        recipes={"cheapest": make_recipe()},
        limits=(LimitFinding(on="N", low=15.0, high=25.0, attainable=(10.0, 30.25), lots_range=(10.0, 30.25)),),
        proof=RecipeProof(shares={"A": F(1, 2), "B": F(1, 2)}),
    )
    return replace(finding, **changes)


def make_beyond(**changes: Any) -> OrderFinding:
    """An unreachable order, with its ways out."""
    finding = OrderFinding(
        order="beyond",
        sentence="Not makeable from these lots: 3 N + 4 K₂O must be at least 124, and no lot has more than 110.",
        verdict="unreachable",
        amount=40.0,
        amount_low=40.0,
        amount_high=40.0,
        limits=(
            LimitFinding(on="N", low=20.0, high=None, attainable=(10.0, 15.4), lots_range=(10.0, 30.25)),
            LimitFinding(on="K", low=16.0, high=None, attainable=None, lots_range=(2.5, 20.0)),
        ),
        nearest=Nearest(shares={"A": 0.4, "C": 0.6}, values={"N": 16.0, "K": 15.5}, excess={"N": 4.0, "K": 0.5}),
        wanted_lot=(WantedLot(share=0.05, values=None), WantedLot(share=0.2, values={"N": 31.0, "K": 22.0})),
        proof=BlockingProof(multipliers=(low_n(), low_k()), scores=SCORES),
        left_out={"B": "stock is 0"},
    )
    return replace(finding, **changes)


def make_full() -> OrderFinding:
    """An order with every field filled that a page can show."""
    conformity = Conformity(all=0.912, each={"N": 0.95})
    bound = CostBound(multipliers=(low_n("1/7"),), floor=F("41.5"))
    face = Face(
        multipliers=(low_n("1"),), scores={"A": F(0), "B": F(1, 3), "C": F(0)}, stuck={"B": "zero"}, on_face=("A", "C")
    )
    cap = Cap(multipliers=(low_n("1/20"),), stock_weights={"A": F(1, 2)}, greatest=F(50))
    return make_midway(
        room=1.25,
        room_unit="sd",
        verdict="short",
        greatest_amount=37.5,
        greatest_recipe={"A": 0.6, "B": 0.4},
        runs_out=("A",),
        recipes={
            name: make_recipe(conformity=conformity, bound=bound, remark="Found with care.")
            for name in ("cheapest", "assured", "roomiest", "closest", "fewest")
        },
        limits=(
            LimitFinding(
                on="N",
                low=15.0,
                high=25.0,
                attainable=(None, 30.25),
                lots_range=(10.0, 30.25),
                worth=0.375,
                worth_holds=(14.0, 15.5),
            ),
        ),
        without_lot={"A": ("unreachable", None), "B": ("makeable", 52.5)},
        enters_at={"C": 44.0},
        stays_up_to={"A": 61.0, "B": None},
        curve=(
            CurvePoint(room=0.0, cost=50.0, shares={"A": 0.5, "B": 0.5}),
            CurvePoint(room=1.25, cost=54.0, shares={"A": 0.4, "B": 0.6}),
        ),
        proof=RecipeProof(shares={"A": F(1, 3), "B": F(2, 3)}, face=face, cap=cap),
        left_out={"C": "K not reported"},
    )


def make_branches() -> OrderFinding:
    """A barred order."""
    branch = Branch(rules=("A and B are kept apart",), multipliers=(low_n(),), scores={"A": F(30)}, least=None)
    return make_midway(
        order="barred",
        verdict="barred",
        barred_by=("keep_apart",),
        recipes={},
        proof=BranchProof(branches=(branch, branch)),
    )


def make_findings(**changes: Any) -> Findings:
    """The answers to :func:`make_campaign`."""
    findings = Findings(
        slug="spring",
        title="Spring blends",
        quantity_unit="t",
        currency="EUR",
        hulls=(
            HullFinding(
                basis="as received",
                over=("N", "K"),
                dimension=2,
                corners=("A", "B"),
                volume=11.5,
                facets=(HalfPlane(coefficients={"N": 3.0, "K": -4.0}, at_most=110.0),),
            ),
        ),
        lots=(
            LotFinding(
                lot="A", role="corner", stock=100.0, cost=40.0, assay={"N": 10.0, "K": 20.0}, needed_by=("midway",)
            ),
            LotFinding(lot="B", role="corner", stock=100.0, cost=60.0, assay={"N": 30.25, "K": 2.5}, stock_worth=1.5),
            LotFinding(
                lot="C",
                role="inner",
                stock="unlimited",
                cost=None,
                assay={"N": 20.0, "K": 12.5},
                imitated_by={"A": 0.5, "B": 0.5},
            ),
        ),
        orders=(make_midway(), make_beyond()),
    )
    return replace(findings, **changes)


def make_plan() -> Plan:
    """The midway order in full, from A and B."""
    return Plan(
        value=2000.0,
        orders={"midway": PlannedOrder(accepted=40.0, amounts={"A": 20.0, "B": 20.0})},
        left={"A": 80.0},
        runs_out=("B",),
        status="optimal",
        gap=0.0,
    )


def make_problem(**changes: Any) -> Problem:
    """A problem that stops a campaign."""
    problem = Problem(
        file="assays.csv",
        row=14,
        column="K",
        found="12,5o",
        message="this is no number",
        remedy="write 12.5",
        severity="stops",
    )
    return replace(problem, **changes)


def make_book(**changes: Any) -> CampaignPages:
    """A campaign's pages with two revisions."""
    line = RevisionLine(
        number=1, recorded="2026-03-02T09:12:00Z", digest="3fa1c2" * 10, program="0.1.0", headline="First revision."
    )
    book = CampaignPages(
        campaign=make_campaign(),
        findings=make_findings(),
        revisions=(line, replace(line, number=2, headline="One answer changed.")),
        changes=("Order midway was unreachable and is makeable.",),
        version="0.1.0",
    )
    return replace(book, **changes)


def full_book(**changes: object) -> CampaignPages:
    """A campaign in which every section of the pages occurs."""
    orders = (make_order("midway"), make_order("beyond"), make_order("barred"))
    findings = make_findings(orders=(make_full(), make_beyond(), make_branches()), plan=make_plan())
    campaign = make_campaign(orders=orders, problems=(make_problem(severity="note"),))
    return make_book(campaign=campaign, findings=findings, **changes)


def output(book: CampaignPages, theme: Theme) -> dict[str, bytes]:
    """All files of an output that holds one campaign."""
    return {
        **assets(theme),
        **draw_campaign(book, theme),
        "index.html": draw_index([index_entry(book)], theme),
        "method.html": draw_method(theme),
        f"{book.campaign.slug}/results.json": b"{}",
    }
