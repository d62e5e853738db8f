"""Derived quantities as exact linear forms."""

from __future__ import annotations

from fractions import Fraction

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from generator.intake.expressions import ExpressionError, Ratio, parse_expression
from generator.intake.records import LinearForm
from tests.intake.make import read, sentences

F = Fraction
NAMES = {"Na2O", "K2O", "CaO", "SiO2", "P2O5 total"}


def parse(text: str) -> Ratio:
    return parse_expression(text, lambda name: name if name in NAMES else None)


@pytest.mark.parametrize(
    "text, terms, constant",
    [
        ("Na2O + 0.658*K2O", {"Na2O": F(1), "K2O": F("0.658")}, F(0)),
        ("0.1*Na2O", {"Na2O": F(1, 10)}, F(0)),
        ("Na2O*2 - K2O/4 + 7", {"Na2O": F(2), "K2O": F(-1, 4)}, F(7)),
        ("-(Na2O - 2*(K2O + 3))", {"Na2O": F(-1), "K2O": F(2)}, F(6)),
        ("+Na2O", {"Na2O": F(1)}, F(0)),
        ("2 * 3 * K2O / 7", {"K2O": F(6, 7)}, F(0)),
        ("'P2O5 total' * 1e-3", {"P2O5 total": F(1, 1000)}, F(0)),
        ('1.5 * "P2O5 total" + CaO', {"P2O5 total": F(3, 2), "CaO": F(1)}, F(0)),
        ("K2O - K2O + CaO", {"CaO": F(1)}, F(0)),
    ],
)
def test_linear(text: str, terms: dict[str, F], constant: F) -> None:
    """Linear forms keep the decimals as typed."""
    assert parse(text) == Ratio(LinearForm(tuple(terms.items()), constant))


def test_linear_over_linear() -> None:
    """One sum over another is taken, scaled or not."""
    ratio = parse("100*CaO / (2.8*SiO2 + 1.18*K2O - 1)")
    assert ratio == Ratio(LinearForm((("CaO", F(100)),)), LinearForm((("SiO2", F("2.8")), ("K2O", F("1.18"))), F(-1)))
    assert parse("-CaO / SiO2 * 2").numerator == LinearForm((("CaO", F(-2)),))
    assert parse("1 / SiO2") == Ratio(LinearForm((), F(1)), LinearForm((("SiO2", F(1)),)))


@pytest.mark.parametrize(
    "text",
    [
        "CaO*SiO2",
        "CaO**2",
        "max(CaO, 1)",
        "CaO/SiO2/K2O",
        "CaO/(SiO2/K2O)",
        "CaO/SiO2 + K2O",
        "CaO % 2",
        "CaO if SiO2 else K2O",
        "CaO > 1",
        "CaO.real",
        "CaO[0]",
        "[CaO]",
        "lambda: CaO",
        "CaO // 2",
        "not CaO",
        "f'{CaO}'",
        "(CaO, SiO2)",
        "(CaO := 1)",
        "CaO*(SiO2 + 1)",
    ],
)
def test_not_linear(text: str) -> None:
    """Everything else is refused as not linear."""
    with pytest.raises(ExpressionError) as caught:
        parse(text)
    assert caught.value.message == "is not linear nor linear over linear"
    assert caught.value.remedy == "write a sum of constants times components, or one such sum over another"


@pytest.mark.parametrize(
    "text, message",
    [
        ("CaO +", "can't be read as an expression"),
        ("", "can't be read as an expression"),
        ("2CaO", "can't be read as an expression"),
        ("CaO = 1", "can't be read as an expression"),
        ("CaO\n+SiO2", "can't be read as an expression"),
        ("CaO\0", "can't be read as an expression"),
        ("(" * 500 + "CaO" + ")" * 500, "can't be read as an expression"),
        ("-" * 1900 + "CaO", "can't be read as an expression"),
        ("CaO + " * 500 + "CaO", "is too long"),
        ("MgO + CaO", "names no component"),
        ("3 + 4", "names no component"),
        ("CaO / 0", "divides by zero"),
        ("CaO / (1 - 1)", "divides by zero"),
        ("0x10 * CaO", "is not a number"),
        ("1e999999 * CaO", "is not a number"),
        ("1j * CaO", "is not a number"),
        ("1_0 * CaO", "is not a number"),
        ("True * CaO", "is not a number"),
        ("b'CaO'", "is not a number"),
        ("...", "is not a number"),
    ],
)
def test_refused(text: str, message: str) -> None:
    """What can't be read is told, and nothing of it is ever run."""
    with pytest.raises(ExpressionError) as caught:
        parse(text)
    assert caught.value.message == message


@settings(deadline=None)
@given(st.text(alphabet="CaO SiO2+-*/()'\"0123456789.e\\#:=,[]{}\n\t", max_size=60))
def test_any_text_is_read_or_refused(text: str) -> None:
    """No text whatever ends in anything but a form or an ExpressionError."""
    try:
        outcome: object = parse(text)
    except ExpressionError as error:
        outcome = error.message
    assert isinstance(outcome, Ratio | str)


@settings(deadline=None)
@given(st.fractions(min_value=-100, max_value=100).map(lambda f: F(round(f * 10**6), 10**6)), st.integers(-5, 5))
def test_coefficients_are_exact(coefficient: F, constant: int) -> None:
    """A decimal coefficient is that decimal, not the nearest binary number."""
    text = f"{coefficient.numerator / coefficient.denominator:.6f}"
    form = parse(f"{text}*CaO + ({constant}) + SiO2").numerator
    assert dict(form.terms).get("CaO", F(0)) == F(text)
    assert form.constant == constant


def test_derived_in_a_campaign() -> None:
    """Components of one expression convert into the unit of the first."""
    campaign = read(
        "lot,Na2O [%],K2O [ppm]\nA,1,2000\n",
        "order,NaEq,ratio\none,<= 2,<= 50\n",
        '[derived]\nNaEq = "na2o + 0.658*K2O"\nratio = "Na2O / K2O"\n',
    )
    assert sentences(campaign) == []
    equivalent, ratio = campaign.derived
    assert equivalent.numerator == LinearForm((("Na2O", F(1)), ("K2O", F("0.0000658"))))
    assert equivalent.unit == "%"
    assert ratio.denominator == LinearForm((("K2O", F(1, 10000)),))
    assert ratio.unit == ""
    assert set(campaign.orders[0].limits) == {"NaEq", "ratio"}


def test_ratio_of_two_units() -> None:
    """A ratio of quantities of different kinds keeps both units."""
    campaign = read("lot,CV [MJ/kg],S [%]\nA,20,2\n", "order,q\none,>= 5\n", '[derived]\nq = "CV/S"')
    assert sentences(campaign) == []
    assert campaign.derived[0].unit == "MJ/kg/%"


@pytest.mark.parametrize(
    "assays, campaign, sentence",
    [
        (
            "lot,Na2O,K2O\nA,1,2\n",
            '[derived]\nE = "Na20 + K2O"',
            "stops: campaign.toml, row 2, column derived.E: found 'Na20': names no component; did you mean \"Na2O\"?",
        ),
        (
            "lot,Na2O [%],CV [MJ/kg]\nA,1,2\n",
            '[derived]\nE = "Na2O + CV"',
            "stops: campaign.toml, row 2, column derived.E: found 'Na2O + CV': mixes units that don't convert "
            "(Na2O in %, CV in MJ/kg); declare units of one kind in [components]",
        ),
        (
            "lot,Na2O,K2O\nA,1,2\n",
            '[components.K2O]\nlimit_basis = "ignited"\nbasis="as received"\n[derived]\nE = "Na2O + K2O"',
            "stops: campaign.toml, row 5, column derived.E: found 'Na2O + K2O': mixes bases: "
            "Na2O (as received), K2O (ignited); declare one limit_basis for them in [components]",
        ),
        (
            "lot,Na2O,K2O\nA,1,2\n",
            '[components.K2O]\nrule = "log"\n[derived]\nE = "Na2O + K2O"',
            "stops: campaign.toml, row 4, column derived.E: found 'Na2O + K2O': holds K2O, which blends by the rule "
            "log; write it in components that blend linearly",
        ),
        (
            "lot,Na2O,K2O\nA,1,2\n",
            '[derived]\nk2o = "Na2O + K2O"',
            "stops: campaign.toml, row 2, column derived.k2o: found 'k2o': is already the name "
            "of a column; choose another name",
        ),
    ],
)
def test_derived_problems(assays: str, campaign: str, sentence: str) -> None:
    """What makes no sense as a derived quantity stops the campaign and says why."""
    assert sentence in sentences(read(assays, "order,Na2O\none,<= 2\n", campaign))
