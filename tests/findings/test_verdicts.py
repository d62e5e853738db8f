"""Verdicts, proofs, costs and ranges hold against the exact oracle, in the usual case of ties."""

from __future__ import annotations

import random

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from tests.findings.drawing import draw_campaign
from tests.findings.judging import faults


@settings(max_examples=60, deadline=None, suppress_health_check=[HealthCheck.too_slow, HealthCheck.data_too_large])
@given(st.data())
def test_drawn_campaigns_are_answered_as_the_oracle_answers(data: st.DataObject) -> None:
    """Whatever small campaign hypothesis draws, each order's answers are the oracle's."""
    drawn = draw_campaign(lambda low, high: data.draw(st.integers(low, high)), orders=3, most_lots=4)
    assert faults(drawn) == []


@pytest.mark.parametrize("number", range(40))
def test_random_campaigns_are_answered_as_the_oracle_answers(number: int) -> None:
    """Fixed random campaigns of up to five lots: each order's answers are the oracle's."""
    pick = random.Random(number).randint
    assert faults(draw_campaign(pick)) == []
