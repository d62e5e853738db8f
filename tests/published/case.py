"""What a published case is: a campaign as printed, where it stands, and what is known of its answer.

Each answer is of one of these kinds, and the case says which:

- SEEN: the answer was read in the source and recomputed;
- MEMORY: the answer is from memory, recomputed by two independent solvers;
- WRONG: the printed answer breaks its own limits; the right one is expected, and the printed one is refused;
- COMPUTED: published data (or data made on them), answered by two independent solvers.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

SEEN = "published answer seen"
MEMORY = "published answer from memory"
WRONG = "published answer seen, and it breaks its own limits"
COMPUTED = "computed by two independent solvers"


@dataclass(frozen=True, slots=True, kw_only=True)
class Case:
    """One campaign with one order, and what its answer is known to be.

    ``verdict`` is ``unreachable``, or ``possible`` where some blend in the amount exists.  ``shares`` are of
    ``share_unit`` (1, 100, or the order's amount) and ``cost`` is of ``cost_of``.  ``values`` are those of the
    cheapest recipe, ``ranges`` attainable ranges.  Tolerances are what published rounding allows.
    """

    source: str
    status: str
    assays: str
    targets: str
    settings: str = ""
    verdict: str = "possible"
    shares: Mapping[str, float] = field(default_factory=dict)
    share_unit: float = 1
    shares_within: float = 1e-6
    cost: float | None = None
    cost_of: float = 1
    cost_within: float = 1e-6
    values: Mapping[str, float] = field(default_factory=dict)
    values_within: float = 1e-9
    ranges: Mapping[str, tuple[float, float]] = field(default_factory=dict)
    ranges_within: float = 1e-6

    def files(self) -> dict[str, str]:
        """The campaign's files by name."""
        files = {"assays.csv": self.assays, "targets.csv": self.targets, "campaign.toml": self.settings}
        return {name: text for name, text in files.items() if text}


def groups(*lots: str) -> str:
    """Settings with a group for each lot, so that the attainable range of its share is answered."""
    return "".join(f'[groups."part of {lot}"]\nlots = ["{lot}"]\nshare = ">= 0"\n' for lot in lots)


def with_column(assays: str, header: str, cells: Mapping[str, str]) -> str:
    """The assays with one more column, behind the lots' names."""
    head, *rows = assays.splitlines()
    named = [row.split(",", 1) for row in rows]
    return "\n".join(
        [head.replace("lot,", f"lot,{header},"), *(f"{lot},{cells[lot]},{rest}" for lot, rest in named), ""]
    )
