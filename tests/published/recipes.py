"""Published cases of shares and least costs: alloys, feeds, fertilisers and the like."""

from __future__ import annotations

from collections.abc import Mapping

from tests.published.case import COMPUTED, MEMORY, SEEN, WRONG, Case, with_column

ALLOY5 = """lot,cost,tin,zinc,lead
A1,22,60,10,30
A2,20,25,15,60
A3,25,45,45,10
A4,24,20,50,30
A5,27,50,40,10
"""
ALLOY5_SOURCE = "Hillier, F.S.; Lieberman, G.J., Introduction to Operations Research, ch. 3 problems"

STEEL2 = "lot,cost,Si,Ni,C,strength\n1,190,2,1,3,42000\n2,200,2.5,1.5,4,50000\n"
STEEL2_TARGETS = "order,Si,Ni,C,strength\no,1.8 - 2.5,0.9 - 1.2,3.2 - 3.5,>= 45000\n"
STEEL2_SOURCE = "Winston, W.L., Operations Research: Applications and Algorithms, sec. 3.8 problems"

STEEL7 = """lot,stock,cost,C,Cu,Mn
iron1,400,200,2.5,0,1.3
iron2,300,250,3,0,0.8
iron3,600,150,0,0.3,0
cu1,500,220,0,90,0
cu2,200,240,0,96,4
al1,300,200,0,0.4,1.2
al2,250,165,0,0.6,0
"""
STEEL7_SOURCE = "Gueret, C.; Prins, C.; Sevaux, M. (2002), Applications of Optimization, sec. 6.1"

SCRAP = """lot,stock,cost,C,Ni,Cr,Mo
scrap1,75,16,0.8,18,12,0
scrap2,250,10,0.7,3.2,1.1,0.1
scrap3,unlimited,8,0.85,0,0,0
scrap4,unlimited,9,0.4,0,0,0
nickel,unlimited,48,0,100,0,0
chromium,unlimited,60,0,0,100,0
molybdenum,unlimited,53,0,0,0,100
"""

INGOTS = """lot,stock,cost,C,Mo
ingot1,5,350,5,3
ingot2,3,330,4,3
ingot3,4,310,5,4
ingot4,6,280,3,4
alloy1,unlimited,500,8,6
alloy2,unlimited,450,7,7
alloy3,unlimited,400,6,8
scrap,unlimited,100,3,9
"""

FIVE_STOCKED = """lot,stock,cost,A,B
1,300,6,10,90
2,400,10,15,85
3,200,18,20,80
4,700,24,30,70
5,450,30,40,60
"""
FIVE_STOCKED_SOURCE = (
    "Belegundu, A.D.; Chandrupatla, T.R., Optimization Concepts and Applications in Engineering, ch. 4 problem"
)

FERTILISERS = "lot,N,P2O5,K2O\nurea,46,0,0\nDAP,18,46,0\nKCl,0,0,60\nfiller,0,0,0\n"
FERTILISERS_SOURCE = "question-and-answer page on fertiliser grades (agronomy site)"

FEED4 = """lot,cost,protein,fat
barley,24.55,12.0,2.3
oats,26.75,11.9,5.6
sesame,39.0,41.8,11.1
groundnut,40.5,52.1,1.3
"""

RECIPES: Mapping[str, Case] = {
    "five alloys": Case(
        source=ALLOY5_SOURCE,
        status=MEMORY,
        assays=ALLOY5,
        targets="order,amount,tin,zinc,lead\no,1,40,35,25\n",
        shares={"A1": 0.0435, "A2": 0.2826, "A3": 0.6739, "A4": 0, "A5": 0},
        shares_within=5e-5,
        cost=23.46,
        cost_within=0.005,
    ),
    "five alloys outside": Case(
        source=f"made on the data of {ALLOY5_SOURCE}",
        status=COMPUTED,
        assays=ALLOY5,
        targets="order,amount,tin,zinc,lead\no,1,55,35,10\n",
        verdict="unreachable",
    ),
    "five alloys other costs": Case(
        source="university course page, mathematics department (course 407, model m12)",
        status=COMPUTED,
        assays="lot,cost,tin,zinc,lead\nA1,19,60,10,30\nA2,17,25,15,60\nA3,23,45,45,10\nA4,21,20,50,30\nA5,25,50,40,10\n",
        targets="order,amount,tin,zinc,lead\no,1,40,35,25\n",
        shares={"A1": 0.34375, "A2": 0, "A3": 0.25, "A4": 0.40625, "A5": 0},
        cost=20.8125,
    ),
    "two steels": Case(
        source=STEEL2_SOURCE,
        status=WRONG,
        assays=STEEL2,
        targets=STEEL2_TARGETS,
        shares={"1": 0.625, "2": 0.375},
        shares_within=1e-9,
        cost=193.75,
    ),
    "two steels as printed": Case(
        source=STEEL2_SOURCE,
        status=WRONG,
        assays=with_column(STEEL2, "min share", {"1": "80", "2": "20"}),
        targets=STEEL2_TARGETS,
        verdict="unreachable",
    ),
    "seven metals 500 t": Case(
        source=STEEL7_SOURCE,
        status=MEMORY,
        assays=STEEL7,
        targets="order,amount,C,Cu,Mn\no,500,2 - 3,0.4 - 0.6,1.2 - 1.65\n",
        shares={"iron1": 400, "iron3": 39.776, "cu2": 2.761, "al1": 57.462},
        share_unit=500,
        shares_within=0.0006,
        cost=98121.6,
        cost_of=500,
        cost_within=0.05,
    ),
    "seven metals 600 t": Case(
        source=f"made on the data of {STEEL7_SOURCE}",
        status=COMPUTED,
        assays=STEEL7,
        targets="order,amount,C,Cu,Mn\no,600,2 - 3,0.4 - 0.6,1.2 - 1.65\n",
        cost=122530.3506932,
        cost_of=600,
        cost_within=0.001,
    ),
    "scrap charge": Case(
        source="Rardin, R.L., Optimization in Operations Research, sec. 4.2, after Interfaces 7(2), 1977, 39-43",
        status=MEMORY,
        assays=SCRAP,
        targets="order,amount,C,Ni,Cr,Mo\no,1000,0.65 - 0.75,3 - 3.5,1 - 1.2,1.1 - 1.3\n",
        shares={
            "scrap1": 75,
            "scrap2": 90.91,
            "scrap3": 672.28,
            "scrap4": 137.31,
            "nickel": 13.59,
            "chromium": 0,
            "molybdenum": 10.91,
        },
        share_unit=1000,
        shares_within=0.005,
        cost=9953.67,
        cost_of=1000,
        cost_within=0.005,
    ),
    "ingots cut": Case(
        source="Westerberg, C.-H.; Bjorklund, B.; Hultman, E. (1977), Interfaces 7(2), 39-43, ingots cut",
        status=COMPUTED,
        assays=INGOTS,
        targets="order,amount,C,Mo\no,25,5,5\n",
        cost=8125.6,
        cost_of=25,
    ),
    "feed with filler": Case(
        source="Beasley, J.E., OR-Notes, linear programming formulation: blending problem",
        status=MEMORY,
        assays=(
            "lot,cost,A [g/kg],B [g/kg],C [g/kg],D [g/kg]\nI1,40,100,80,40,10\nI2,60,200,150,20,0\nfiller,0,0,0,0,0\n"
        ),
        targets="order,amount,A,B,C,D\no,1,>= 90,>= 50,>= 20,>= 2\n",
        shares={"I1": 0.3667, "I2": 0.2667, "filler": 0.3667},
        shares_within=5e-5,
        cost=30.667,
        cost_within=0.0005,
    ),
    "corn and soy": Case(
        source="Taha, H.A., Operations Research: An Introduction, example 2.2-2",
        status=MEMORY,
        assays="lot,cost,protein,fibre\ncorn,0.3,0.09,0.02\nsoy,0.9,0.6,0.06\n",
        targets="order,amount,protein,fibre\no,800,>= 0.3,<= 0.05\n",
        shares={"corn": 470.6, "soy": 329.4},
        share_unit=800,
        shares_within=0.05,
        cost=437.64,
        cost_of=800,
        cost_within=0.01,
    ),
    "stocked alloys 1000 kg": Case(
        source=FIVE_STOCKED_SOURCE,
        status=COMPUTED,
        assays=FIVE_STOCKED,
        targets="order,amount,A,B\no,1000,25,75\n",
        cost=18000,
        cost_of=1000,
    ),
    "stocked alloys 1500 kg": Case(
        source=FIVE_STOCKED_SOURCE,
        status=COMPUTED,
        assays=FIVE_STOCKED,
        targets="order,amount,A,B\no,1500,25,75\n",
        shares={"1": 300, "2": 400, "3": 0, "4": 350, "5": 450},
        share_unit=1500,
        cost=27700,
        cost_of=1500,
    ),
    "three coals": Case(
        source="textbook exercise quoted in a forum thread (coal blending)",
        status=COMPUTED,
        assays="lot,cost,P,ash\na,80,0.03,3\nb,60,0.05,14\nc,90,0.08,8\n",
        targets="order,amount,P,ash\no,1,<= 0.04,<= 5\n",
        shares={"a": 0.8181818, "b": 0.1818182, "c": 0},
        cost=76.3636364,
    ),
    "hay and silage": Case(
        source="Montana State University Extension, beef cattle article, example 1",
        status=SEEN,
        assays="lot,CP\nhay,12.25\nsilage,10.8\n",
        targets="order,CP\no,11\n",
        shares={"hay": 0.138, "silage": 0.862},
        shares_within=0.0005,
    ),
    "four feeds in fixed ratios": Case(
        source="Montana State University Extension, beef cattle article, example 3",
        status=COMPUTED,
        # Each premix's ratio is an exact limit of 0 on a balance of indicator columns.
        assays="lot,CP,S,G,C,H\nsbm,54,1,0,0,0\ncgf,24,0,1,0,0\ncorn,10,0,0,1,0\nsoyhulls,12,0,0,0,1\n",
        targets="order,CP,supplement,grain\no,15,0,0\n",
        settings='[derived]\nsupplement = "S - G"\ngrain = "40*C - 60*H"\n',
        shares={"sbm": 0.074468085, "cgf": 0.074468085, "corn": 0.510638298, "soyhulls": 0.340425532},
    ),
    "barley and corn": Case(
        source="Wagner, J.; Stanton, T.L., fact sheet 1.618, Colorado State University Extension (2012)",
        status=SEEN,
        assays="lot,CP\nbarley,12\ncorn,10\n",
        targets="order,CP\no,14\n",
        verdict="unreachable",
        ranges={"CP": (10, 12)},
    ),
    "wine six gallons": Case(
        source="a home-winemaking web article",
        status=COMPUTED,
        assays="lot,alcohol\nw15,15\nw10,10\n",
        targets="order,amount,alcohol\no,6,13.5\n",
        shares={"w15": 4.2, "w10": 1.8},
        share_unit=6,
    ),
    "wine one to three": Case(
        source="two home-winemaking web articles",
        status=SEEN,
        assays="lot,alcohol\nw15,15\nw11,11\n",
        targets="order,alcohol\no,12\n",
        shares={"w15": 0.25, "w11": 0.75},
        shares_within=1e-9,
    ),
    "barley and distillers grains": Case(
        source="a farm newspaper column",
        status=SEEN,
        assays="lot,CP\nbarley,10\nddg,32\n",
        targets="order,CP\no,16\n",
        shares={"barley": 16 / 22, "ddg": 6 / 22},
        shares_within=1e-9,
    ),
    "vapour pressure of an added lot": Case(
        source="US Environmental Protection Agency, reformulated-gasoline questions and answers, 1 July 1994",
        status=SEEN,
        assays="lot,value\nbase,7.6\nadded,1.3\n",
        targets="order,amount,value\no,105000,7.3\n",
        shares={"base": 100000, "added": 5000},
        share_unit=105000,
    ),
    "19-19-19": Case(
        source=FERTILISERS_SOURCE,
        status=SEEN,
        assays=FERTILISERS,
        targets="order,amount,N,P2O5,K2O\no,100,19,19,19\n",
        shares={"urea": 25.2, "DAP": 41.3, "KCl": 31.7, "filler": 1.8},
        share_unit=100,
        shares_within=0.1,
    ),
    "19-19-19 without filler": Case(
        source=FERTILISERS_SOURCE,
        status=SEEN,
        assays="lot,min share,N,P2O5,K2O\nurea,25.5,46,0,0\nDAP,42,18,46,0\nKCl,32.5,0,0,60\n",
        targets="order,amount\no,100\n",
        values={"N": 19.3, "P2O5": 19.3, "K2O": 19.5},
        values_within=0.05,
    ),
    "20-20-20": Case(
        source=f"made on the data of {FERTILISERS_SOURCE}",
        status=COMPUTED,
        assays=FERTILISERS,
        targets="order,amount,N,P2O5,K2O\no,100,20,20,20\n",
        verdict="unreachable",
    ),
    "feed of four": Case(
        source="Bracken, J.; McCormick, G.P., Selected Applications of Nonlinear Programming, ch. 9, means alone",
        status=COMPUTED,
        assays=FEED4,
        targets="order,amount,protein,fat\no,1,>= 21,>= 5\n",
        shares={"barley": 0.6852449103, "oats": 0.0126990526, "sesame": 0.3020560371, "groundnut": 0},
        cost=28.9426476517,
        cost_within=1e-7,
    ),
}
