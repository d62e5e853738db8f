"""Small campaigns for tests: CSV text in, Campaign and Findings out."""

from __future__ import annotations

from generator.findings.answers import find
from generator.findings.records import Findings, OrderFinding
from generator.intake.campaign import read_campaign
from generator.intake.records import Campaign

ASSAYS = "lot,stock,cost,N,K\nA,100,20,10,20\nB,100,30,30,5\n"
TARGETS = "order,amount,N,K\n1,50,>= 20,>= 10\n"


def make_campaign(assays: str = ASSAYS, targets: str = TARGETS, settings: str = "", **more: str) -> Campaign:
    """A campaign from the texts of its files; ``more`` by name with ``_`` for the dot."""
    files = {"assays.csv": assays, "targets.csv": targets, "campaign.toml": settings}
    files |= {name.replace("_", "."): text for name, text in more.items()}
    return read_campaign({name: text.encode() for name, text in files.items() if text}, slug="trial", folder="trial")


def answers(assays: str = ASSAYS, targets: str = TARGETS, settings: str = "", **more: str) -> Findings:
    """The findings of such a campaign; it must have no problem that stops it."""
    findings = find(make_campaign(assays, targets, settings, **more))
    stops = [problem.sentence() for problem in findings.problems if problem.severity == "stops"]
    assert stops == []
    return findings


def only_order(findings: Findings) -> OrderFinding:
    """The finding of a campaign's one order."""
    (order,) = findings.orders
    return order
