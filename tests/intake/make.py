"""Small campaigns: a test names only what it changes."""

from __future__ import annotations

from fractions import Fraction

from generator.intake.campaign import read_campaign
from generator.intake.records import Campaign, Measured

ASSAYS = "lot,N,K2O\nA,10,20\nB,30,5\n"
TARGETS = "order,amount,N,K2O\none,10,>= 20,>= 4\n"


def read(
    assays: str | bytes = ASSAYS,
    targets: str | bytes = TARGETS,
    campaign: str | bytes = "",
    **others: str | bytes,
) -> Campaign:
    """A campaign from texts; ``others`` are stock, site and notes."""
    named = {"assays.csv": assays, "targets.csv": targets, "campaign.toml": campaign}
    endings = {"stock": "stock.csv", "site": "site.toml", "notes": "notes.md"}
    named |= {endings[key]: value for key, value in others.items()}
    files = {name: value.encode() if isinstance(value, str) else value for name, value in named.items()}
    return read_campaign(files, slug="spring", folder="Spring")


def values(campaign: Campaign) -> dict[str, dict[str, Fraction]]:
    """The first reading of every component by lot."""
    return {lot.name: {name: first(measured) for name, measured in lot.assay.items()} for lot in campaign.lots}


def first(measured: Measured) -> Fraction:
    return measured.readings[0].value


def sentences(campaign: Campaign) -> list[str]:
    """Every problem with its severity."""
    return [f"{problem.severity}: {problem.sentence()}" for problem in campaign.problems]


def told(campaign: Campaign) -> list[str]:
    """Every line of "what was read"."""
    return [f"{note.file} {note.row}: {note.what}" for note in campaign.read]
