"""Published cases of several orders from one stock, and of house rules, each as a campaign of its own."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

from tests.published.case import COMPUTED, MEMORY, SEEN
from tests.published.recipes import STEEL7, STEEL7_SOURCE

TWO_PRODUCTS = (
    "Winston, W.L., Operations Research: Applications and Algorithms (two products from nitrogen and silicon)"
)
GASOLINE = "Kantor, J.C., CBE30338 course notebooks, 06.08 Gasoline Blending; vapour pressure blends as RVP^1.25"
ALLOY_STOCK = """lot,stock,cost,A,B
1,300,6,10,90
2,400,10,15,85
3,200,18,20,80
4,700,24,30,70
5,450,30,40,60
"""
STREAMS = """lot,stock,cost,octane,RVP,benzene
Butane,30000,0.85,92.5,54.0,0.0
LSR,35000,2.05,77.0,11.2,0.73
Isomerate,0,2.20,82.05,13.5,0.0
Reformate,60000,2.80,94.1,3.2,1.85
ReformateLB,0,2.75,88.85,2.8,0.12
FCC,70000,2.60,84.6,1.4,1.06
Alkylate,40000,2.75,96.6,4.6,0.0
"""
#: Octane and benzene average by volume, and so does the vapour pressure's index: amounts are volumes.
RVP = '[components.RVP]\nrule = "power:1.25"\n'


@dataclass(frozen=True, slots=True, kw_only=True)
class PlanCase:
    """A campaign and what its plan is known to be.

    ``value`` is prices less costs; ``cost`` what the lots cost; ``amounts`` by order and lot; ``used`` in
    all by lot; ``accepted`` by order.  ``within`` is what the published rounding allows.
    """

    source: str
    status: str
    assays: str
    targets: str
    settings: str = ""
    value: float | None = None
    cost: float | None = None
    accepted: Mapping[str, float] = field(default_factory=dict)
    amounts: Mapping[str, Mapping[str, float]] = field(default_factory=dict)
    used: Mapping[str, float] = field(default_factory=dict)
    within: float = 1e-6
    amounts_within: float = 1e-4


PLANS: Mapping[str, PlanCase] = {
    "two products, most profit": PlanCase(
        source=TWO_PRODUCTS,
        status=MEMORY,
        assays="lot,stock,cost,N,Si\nN,80,15,100,0\nSi,100,10,0,100\n",
        targets="order,price,accept,N,Si\nf1,70,part,>= 40,\nf2,40,part,,>= 70\n",
        value=10400,
        amounts={"f1": {"N": 80, "Si": 100}, "f2": {}},
    ),
    "two products, other prices": PlanCase(
        source="two fertilisers from 800 kg N at 10 and 1000 kg Si at 8, sold at 20 and 18",
        status=COMPUTED,
        assays="lot,stock,cost,N,Si\nN,800,10,100,0\nSi,1000,8,0,100\n",
        targets="order,price,accept,N,Si\nf1,20,part,>= 40,\nf2,18,part,,>= 70\n",
        value=20000,
    ),
    "two fixed orders need all the stock": PlanCase(
        source=TWO_PRODUCTS + "; both orders fixed",
        status=COMPUTED,
        assays="lot,stock,cost,N,Si\nN,80,15,100,0\nSi,100,10,0,100\n",
        targets="order,amount,N,Si\nf1,100,>= 40,\nf2,80,,>= 70\n",
        cost=2200,
        accepted={"f1": 100, "f2": 80},
        used={"N": 80, "Si": 100},
    ),
    # Three crudes into three gasolines: each barrel costs 4 to make, which is taken off the price here;
    # what is made beyond the first demand costs 0.1 a barrel more: an order of its own, 0.1 cheaper.
    # The first demands have to be met: they are made so dear (1000 a barrel more) that none is refused.
    # The capacity of 14 000 does not bind (13 500 are made).
    "three gasolines": PlanCase(
        source="Winston, W.L., Operations Research: Applications and Algorithms, sec. 3.8, example 14",
        status=COMPUTED,
        assays="lot,stock,cost,octane,S\nc1,5000,45,12,0.5\nc2,5000,35,6,2.0\nc3,5000,25,8,3.0\n",
        targets=(
            "order,amount,price,accept,octane,S\n"
            "g1,3000,1066,whole,>= 10,<= 1\ng2,2000,1056,whole,>= 8,<= 2\ng3,1000,1046,whole,>= 6,<= 1\n"
            "g1 more,<= 15000,65.9,part,>= 10,<= 1\ng2 more,<= 15000,55.9,part,>= 8,<= 2\n"
            "g3 more,<= 15000,45.9,part,>= 6,<= 1\n"
        ),
        value=287750 + 1000 * 6000,
        accepted={"g1": 3000, "g2": 2000, "g3": 1000},
        used={"c1": 5000, "c2": 5000, "c3": 3500},
        within=0.01,
    ),
    "seven streams, two gasolines": PlanCase(
        source=GASOLINE,
        status=SEEN,
        assays=STREAMS,
        targets=(
            "order,price,accept,octane,RVP,benzene\n"
            "Regular,2.75,part,>= 87,<= 15,<= 1.1\nPremium,2.85,part,>= 91,<= 15,<= 1.1\n"
        ),
        settings=RVP,
        value=100425,
        used={"Butane": 30000, "LSR": 35000, "Reformate": 60000, "FCC": 70000, "Alkylate": 40000},
        within=0.5,
    ),
    "seven streams, three gasolines": PlanCase(
        source=GASOLINE,
        status=SEEN,
        assays=STREAMS,
        targets=(
            "order,price,accept,octane,RVP,benzene\n"
            "Regular,2.75,part,>= 87,<= 15,<= 1.1\nMidgrade,2.82,part,>= 89,<= 15,<= 1.1\n"
            "Premium,2.85,part,>= 91,<= 15,<= 1.1\n"
        ),
        settings=RVP,
        value=104995,
        accepted={"Regular": 6500, "Midgrade": 228500, "Premium": 0},
        within=0.5,
        amounts_within=0.5,
    ),
    "1000 kg of alloy from at most two lots": PlanCase(
        source="Belegundu, A.D.; Chandrupatla, T.R., Optimization Concepts and Applications in Engineering, ch. 4",
        status=COMPUTED,
        assays=ALLOY_STOCK,
        targets="order,amount,A,B\no,1000,25,75\n",
        settings="[house]\nmax_lots = 2\n",
        cost=19333.3333333,
        amounts={"o": {"2": 333.333333, "4": 666.666667}},
        within=1e-4,
    ),
    "500 t of steel from at most three lots": PlanCase(
        source=STEEL7_SOURCE + "; at most three lots",
        status=COMPUTED,
        assays=STEEL7,
        targets="order,amount,C,Cu,Mn\no,500,2 - 3,0.4 - 0.6,1.2 - 1.65\n",
        settings="[house]\nmax_lots = 3\n",
        cost=100035.7142857,
        amounts={"o": {"iron1": 400, "cu1": 1.785714, "al1": 98.214286}},
        within=1e-3,
    ),
    # Sixty tons of any oil that is used: 13.333… % of the 450 t that the plan makes.
    "one month of oils, at least 60 t of each used": PlanCase(
        source="Williams, H.P., Model Building in Mathematical Programming, sec. 1.2 and 12.1; minimum 60 t",
        status=COMPUTED,
        assays=(
            "lot,stock,cost,hardness\nVEG1,unlimited,110,8.8\nVEG2,unlimited,120,6.1\nOIL1,unlimited,130,2\n"
            "OIL2,unlimited,110,4.2\nOIL3,unlimited,115,5\n"
        ),
        targets="order,amount,price,hardness,vegetable,other\no,450,150,3 - 6,<= 44.4444444444,<= 55.5555555556\n",
        settings=(
            "[house]\nleast_if_used = 13.3333333333\n"
            '[groups.vegetable]\nlots = ["VEG*"]\n[groups.other]\nlots = ["OIL*"]\n'
        ),
        value=17400,
        amounts={"o": {"VEG1": 140, "VEG2": 60, "OIL2": 250}},
        within=1e-4,
    ),
    "15-15-15 with pairs kept apart": PlanCase(
        source="Pair rules: International Plant Nutrition Institute, Fertilizer compatibility (2013); costs invented",
        status=COMPUTED,
        assays=(
            "lot,stock,cost,N,P2O5,K2O\nurea,unlimited,0.4,46,0,0\nCAN,unlimited,0.35,27,0,0\n"
            "DAP,unlimited,0.6,18,46,0\nTSP,unlimited,0.5,0,46,0\nKCl,unlimited,0.35,0,0,60\n"
            "SOP,unlimited,0.7,0,0,50\nfiller,unlimited,0.02,0,0,0\n"
        ),
        targets="order,amount,N,P2O5,K2O\no,1,15,15,15\n",
        settings=(
            '[house]\nkeep_apart = [["urea", "CAN"], ["urea", "KCl"], ["urea", "TSP"], ["DAP", "CAN"], '
            '["TSP", "CAN"]]\n'
        ),
        cost=0.4885557656,
        amounts={"o": {"urea": 0.198487713, "DAP": 0.326086957, "SOP": 0.3, "filler": 0.175425331}},
        within=1e-8,
        amounts_within=1e-6,
    ),
}
