"""Published cases of blend values and ranges of shares: sieves, moduli, blend rules, bases."""

from __future__ import annotations

from collections.abc import Mapping

from tests.published.case import COMPUTED, MEMORY, SEEN, WRONG, Case, groups, with_column

SIEVES = "12.5 mm,9.5 mm,4.75 mm,2.36 mm,0.6 mm,0.3 mm,0.15 mm,0.075 mm"
AGGREGATES2 = f"lot,{SIEVES}\nA,90,59,16,3,0,0,0,0\nB,100,100,96,82,51,36,21,9\n"
AGGREGATES2_BAND = "70 - 90,50 - 70,35 - 50,18 - 29,13 - 23,8 - 16"
AGGREGATES2_SOURCE = (
    "Mamlouk, M.S.; Zaniewski, J.P., Materials for Civil and Construction Engineers, ch. 5 (aggregates)"
)

AGGREGATES3_SIEVES = "12.5 mm,4.75 mm,2.36 mm,0.3 mm,0.15 mm,0.075 mm"
AGGREGATES3 = f"lot,{AGGREGATES3_SIEVES}\nA,63,19,8,5,3,0\nB,100,100,93,55,36,3\nC,100,100,100,100,97,88\n"
AGGREGATES3_TARGETS = f"order,{AGGREGATES3_SIEVES}\no,75 - 85,40 - 55,30 - 42,20 - 30,12 - 22,5 - 11\n"
AGGREGATES3_SOURCE = "worked exercise sheet on aggregate blending for a bituminous concrete layer"

RAW_MEAL = """lot,SiO2,Al2O3,Fe2O3,CaO
limestone,4.4,2.7,2.5,49.3
clay,32.5,22.5,10.6,21.5
sand,94.4,2.5,1.8,0.5
"""
MODULI = '[derived]\nHM = "CaO/(SiO2 + Al2O3 + Fe2O3)"\nSM = "SiO2/(Al2O3 + Fe2O3)"\n'
RAW_MEAL_SOURCE = "Labahn, O., Cement Engineers' Handbook, three-component raw mix calculation"

COAL_BASIS_SOURCE = (
    "conversion factors of ASTM D3180 and ISO 1170; worked numbers from a testing laboratory's public page"
)
#: Water (a lot must hold some dry matter) brings the coal to the wanted moisture.
COAL_AND_WATER = "lot,moisture,ash\ncoal,2.0,12.0\nwater,99.999,0\n"
MOIST_BASES = 'basis = "as received"\n'

GASOLINE_SOURCE = "Kantor, J.C., CBE30338 course notebooks, 06.08 Gasoline Blending (University of Notre Dame)"

OXIDES = "SiO2,Al2O3,FeO,MgO,CaO,Na2O,TiO2,K2O"
CRUST = f"""lot,{OXIDES}
upper,66.6,15.4,5.04,2.48,3.59,3.27,0.64,2.8
middle,63.5,15.0,6.02,3.59,5.25,3.39,0.69,2.3
lower,53.4,16.9,8.57,7.24,9.59,2.65,0.82,0.61
"""
BULK_CRUST = ",".join(f"{oxide} ± 0.05" for oxide in ("60.6", "15.9", "6.7", "4.7", "6.4", "3.1", "0.7", "1.8"))

VALUES: Mapping[str, Case] = {
    "three aggregates": Case(
        source=AGGREGATES3_SOURCE,
        status=COMPUTED,
        assays=AGGREGATES3,
        targets=AGGREGATES3_TARGETS,
        settings=groups("A", "B", "C"),
        ranges={
            "part of A": (60.36923931, 67.56756757),
            "part of B": (20.63593005, 35.14714048),
            "part of C": (4.48362021, 11.79650238),
        },
        ranges_within=1e-4,
    ),
    "three aggregates as printed": Case(
        source=AGGREGATES3_SOURCE,
        status=SEEN,
        assays=with_column(AGGREGATES3, "min share", {"A": "66", "B": "28", "C": "6"}),
        targets=AGGREGATES3_TARGETS,
        values={
            "12.5 mm": 75.58,
            "4.75 mm": 46.54,
            "2.36 mm": 37.32,
            "0.3 mm": 24.7,
            "0.15 mm": 17.88,
            "0.075 mm": 6.12,
        },
    ),
    "two aggregates misprinted": Case(
        source=f"{AGGREGATES2_SOURCE}, as retyped on a homework-help page",
        status=WRONG,
        assays=AGGREGATES2,
        targets=f"order,{SIEVES}\no,80 - 90,{AGGREGATES2_BAND},7 - 10\n",
        verdict="unreachable",
    ),
    "two aggregates": Case(
        source=AGGREGATES2_SOURCE,
        status=MEMORY,
        assays=AGGREGATES2,
        targets=f"order,{SIEVES}\no,80 - 100,{AGGREGATES2_BAND},4 - 10\n",
        settings=groups("B"),
        ranges={"part of B": (44.44444444, 56.8627451)},
        ranges_within=1e-7,
    ),
    "raw meal": Case(
        source=RAW_MEAL_SOURCE,
        status=SEEN,
        assays=RAW_MEAL,
        targets="order,amount,HM,SM\no,100,2,1.6\n",
        settings=MODULI,
        # The printed 82.5, 11.1, 6.4 are rounded by hand; the exact solution was recomputed.
        shares={"limestone": 82.4139, "clay": 11.262, "sand": 6.3241},
        share_unit=100,
        shares_within=0.001,
    ),
    "raw meal as printed": Case(
        source=RAW_MEAL_SOURCE,
        status=SEEN,
        assays=with_column(RAW_MEAL, "min share", {"limestone": "82.5", "clay": "11.1", "sand": "6.4"}),
        targets="order,amount,HM,SM\no,100,2.00 ± 0.005,1.60 ± 0.02\n",
        settings=MODULI,
        values={"HM": 2.0025187746, "SM": 1.6116781765},
    ),
    "viscosity": Case(
        source="index of Maples, R.E. (2000), Petroleum Refinery Process Economics, 2nd ed., by mass",
        status=COMPUTED,
        assays="lot,min share,v [mm²/s]\nthin,60,5\nthick,40,20\n",
        targets="order,amount,v\no,1,<= 20\n",
        settings='[components.v]\nrule = "loglog"\n',
        values={"v": 8.1085492901},
        values_within=1e-9,
    ),
    "lower flammability limit": Case(
        source="Crowl, D.A.; Louvar, J.F., Chemical Process Safety, worked example on mixture limits",
        status=SEEN,
        assays="lot,min share,LFL,UFL\nhexane,24,0.012,0.075\nmethane,61,0.053,0.15\nethylene,15,0.031,0.32\n",
        targets="order,amount,LFL,UFL\no,1,>= 0.02,<= 0.2\n",
        settings='[components.LFL]\nrule = "harmonic"\n[components.UFL]\nrule = "harmonic"\n',
        values={"LFL": 0.0275117214, "UFL": 0.1292755184},
        values_within=5e-11,
    ),
    "density of an alloy": Case(
        source="Callister, W.D.; Rethwisch, D.G., Materials Science and Engineering, 9th ed., problem 4.24",
        status=SEEN,
        assays="lot,min share,rho\nTi,90,4.51\nAl,6,2.71\nV,4,6.10\n",
        targets="order,amount,rho\no,1,<= 4.4656\n",
        settings='[components.rho]\nrule = "harmonic"\n',
        values={"rho": 4.38},
        values_within=0.005,
    ),
    "density window": Case(
        source="reciprocal rule of Callister, W.D.; Rethwisch, D.G., 9th ed., eq. 4.10a",
        status=COMPUTED,
        assays="lot,rho\nheavy,4.25\nlight,2.65\n",
        targets="order,rho\no,3.0 - 3.2\n",
        settings='[components.rho]\nrule = "harmonic"\n' + groups("heavy"),
        ranges={"part of heavy": (30.98958333, 45.65429688)},
        ranges_within=1e-7,
    ),
    "ash at 3 % moisture": Case(
        source=COAL_BASIS_SOURCE,
        status=SEEN,
        assays=COAL_AND_WATER,
        targets="order,moisture\no,3\n",
        settings=MOIST_BASES,
        values={"ash": 11.9},
        values_within=0.05,
    ),
    "ash at 10 % moisture": Case(
        source=COAL_BASIS_SOURCE,
        status=SEEN,
        assays=COAL_AND_WATER,
        targets="order,moisture\no,10\n",
        settings=MOIST_BASES,
        values={"ash": 11.0},
        values_within=0.05,
    ),
    "ash and volatiles by basis": Case(
        source=COAL_BASIS_SOURCE,
        status=COMPUTED,
        # The ash twice: once to be restated per dry coal, once as it stands in the expression.
        assays="lot,moisture,ash [%],A [%],VM [%]\ncoal,2.0,12.0,12.0,30.0\n",
        targets="order,ash,VM daf,moisture\no,<= 20,<= 50,<= 5\n",
        settings=(
            f'{MOIST_BASES}[components.ash]\nlimit_basis = "dry"\n'
            '[derived]\n"VM daf" = "100*VM / (100 - moisture - A)"\n'
        ),
        values={"ash": 12.2448979592, "VM daf": 34.8837209302},
    ),
    "vapour pressure of regular": Case(
        source=GASOLINE_SOURCE,
        status=SEEN,
        # All of each stock goes in: the printed volumes.
        assays="lot,stock,RVP\nButane,17924.9,54.0\nLSR,35000,11.2\nReformate,43599.3,3.2\nFCC,24225.8,1.4\n",
        targets="order,amount\no,120750\n",
        settings='[components.RVP]\nrule = "power:1.25"\n',
        values={"RVP": 15.0},
        values_within=0.05,
    ),
    "vapour pressure of premium": Case(
        source=GASOLINE_SOURCE,
        status=SEEN,
        assays="lot,stock,RVP\nButane,12075.1,54.0\nReformate,16400.7,3.2\nFCC,45774.2,1.4\nAlkylate,40000,4.6\n",
        targets="order,amount\no,114250\n",
        settings='[components.RVP]\nrule = "power:1.25"\n',
        values={"RVP": 10.6},
        values_within=0.05,
    ),
    "continental crust": Case(
        source="Rudnick, R.L.; Gao, S. (2014), Treatise on Geochemistry 2nd ed., 4.1: bulk crust of its three layers",
        status=COMPUTED,
        assays=CRUST,
        targets=f"order,{OXIDES}\no,{BULK_CRUST}\n",
        settings=groups("upper", "middle", "lower"),
        ranges={
            "part of upper": (30.01007049, 36.2553597),
            "part of middle": (23.67794188, 31.57099698),
            "part of lower": (38.31605492, 40.15972618),
        },
        ranges_within=1e-4,
    ),
    "continental crust as printed": Case(
        source="Rudnick, R.L.; Gao, S. (2014), Treatise on Geochemistry 2nd ed., 4.1: layers as 0.317 : 0.296 : 0.388",
        status=SEEN,
        assays=with_column(CRUST, "stock", {"upper": "317", "middle": "296", "lower": "388"}),
        targets=f"order,amount,{OXIDES}\no,1001,{BULK_CRUST}\n",
        shares={"upper": 317, "middle": 296, "lower": 388},
        share_unit=1001,
    ),
}
