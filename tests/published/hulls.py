"""Published hulls: known polytopes, and a bundled data set whose corners two solvers agree on."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from math import factorial
from pathlib import Path

from tests.published.case import COMPUTED, MEMORY

WINES = Path(__file__).with_name("wine.csv").read_text()


@dataclass(frozen=True, slots=True, kw_only=True)
class HullCase:
    """One campaign whose hull is published: volume and facets, or which lots are its corners."""

    source: str
    status: str
    assays: str
    targets: str
    volume: float | None = None
    facets: int | None = None
    corners: tuple[str, ...] | None = None

    def files(self) -> dict[str, str]:
        """The campaign's files by name."""
        return {"assays.csv": self.assays, "targets.csv": self.targets}


def _polytope(points: list[tuple[int, ...]], volume: float, facets: int) -> HullCase:
    axes = [f"c{axis}" for axis in range(len(points[0]))]
    rows = [f"{number},{','.join(map(str, point))}" for number, point in enumerate(points)]
    return HullCase(
        source="Coxeter, Regular Polytopes; Ziegler (1995), Graduate Texts in Mathematics 152",
        status=MEMORY,
        assays="\n".join([f"lot,{','.join(axes)}", *rows, ""]),
        targets=f"order,{','.join(axes)}\no{',<= 1' * len(axes)}\n",
        volume=volume,
        facets=facets,
    )


def _units(dimension: int) -> list[tuple[int, ...]]:
    return [tuple(int(axis == one) for axis in range(dimension)) for one in range(dimension)]


def _cross_polytope(dimension: int) -> HullCase:
    """The unit points and their opposites, with their centre as an inner lot."""
    units = _units(dimension)
    points = [*units, *(tuple(-c for c in unit) for unit in units), (0,) * dimension]
    return _polytope(points, volume=2**dimension / factorial(dimension), facets=2**dimension)


def _simplex(dimension: int) -> HullCase:
    """The origin and the unit points."""
    points = [(0,) * dimension, *_units(dimension)]
    return _polytope(points, volume=1 / factorial(dimension), facets=dimension + 1)


WINE_SOURCE = "wine data of Forina et al. (UCI; CC BY 4.0), as bundled with scikit-learn; first constituents"

HULLS: Mapping[str, HullCase] = {
    **{f"cross-polytope {dimension}": _cross_polytope(dimension) for dimension in (2, 3, 4)},
    **{f"simplex {dimension}": _simplex(dimension) for dimension in (2, 3, 4)},
    "wines by two": HullCase(
        source=WINE_SOURCE,
        status=COMPUTED,
        assays=WINES,
        targets="order,alcohol,malic acid\no,>= 12,<= 4\n",
        corners=("8", "46", "68", "76", "110", "113", "115", "123", "137", "173"),
    ),
    "wines by three": HullCase(
        source=WINE_SOURCE,
        status=COMPUTED,
        assays=WINES,
        targets="order,alcohol,malic acid,ash\no,>= 12,<= 4,<= 3\n",
        corners=(
            *("8", "13", "16", "25", "30", "39", "46", "59", "68", "76", "84", "110", "113", "115", "121", "123"),
            *("124", "137", "146", "158", "169", "173", "177"),
        ),
    ),
}
