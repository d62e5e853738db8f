"""Blend rules: the index that carries a component which doesn't blend linearly.

A rule turns a value into an index that averages linearly on the component's basis.  Indices are
computed with ``decimal`` to 15 significant digits and are exact numbers from then on.
"""

from __future__ import annotations

import decimal
from collections.abc import Callable
from dataclasses import dataclass
from decimal import Decimal
from fractions import Fraction

DIGITS = 15
#: Working precision: 15 digits survive the few operations of each index with room to spare.
_CONTEXT = decimal.Context(prec=40)
_KELVIN = Decimal("273.15")
_WALTHER_SHIFT = Decimal("0.8")


class OutsideDomain(ValueError):  # noqa: N818  (a fact about a value, told as a problem by the caller)
    """The value has no index under the rule; the text says which values have one."""


@dataclass(frozen=True, slots=True)
class Rule:
    """``index`` and its inverse ``value``; ``decreases`` tells that limits change sides.

    ``slope`` is dI/da at a value, for the propagation of standard deviations (JCGM 100, 5.1.2).
    """

    name: str
    index: Callable[[Fraction], Fraction]
    value: Callable[[Fraction], Fraction]
    slope: Callable[[Fraction], float]
    decreases: bool = False


def _decimal(value: Fraction) -> Decimal:
    return _CONTEXT.divide(Decimal(value.numerator), Decimal(value.denominator))


def _rounded(value: Decimal) -> Fraction:
    """To 15 significant digits, exactly as they are printed in proofs."""
    return Fraction(decimal.Context(prec=DIGITS).plus(value))


def _positive(value: Fraction) -> Decimal:
    if value <= 0:
        raise OutsideDomain("must be greater than 0")
    return _decimal(value)


def _linear() -> Rule:
    """The average weighted by the carrier: a mass balance."""
    return Rule("linear", lambda a: a, lambda i: i, lambda _: 1.0)


def _harmonic() -> Rule:
    """I = 1/a: density by mass; Le Chatelier's rule for flammability limits, by mole (Le Chatelier 1891)."""

    def inverse(a: Fraction) -> Fraction:
        return _rounded(_CONTEXT.divide(Decimal(1), _positive(a)))

    return Rule("harmonic", inverse, inverse, lambda a: -1.0 / float(a) ** 2, decreases=True)


def _log() -> Rule:
    """I = ln a: the logarithmic mixing law (Arrhenius 1887)."""
    return Rule(
        "log",
        lambda a: _rounded(_positive(a).ln(_CONTEXT)),
        lambda i: _rounded(_decimal(i).exp(_CONTEXT)),
        lambda a: 1.0 / float(a),
    )


def _loglog() -> Rule:
    """I = ln ln(a + 0.8), kinematic viscosity in mm²/s (Walther's function; ASTM D7152 family)."""

    def index(a: Fraction) -> Fraction:
        inner = _CONTEXT.add(_decimal(a), _WALTHER_SHIFT)
        if inner <= 1:
            raise OutsideDomain("must be greater than 0.2 mm²/s")
        return _rounded(inner.ln(_CONTEXT).ln(_CONTEXT))

    def value(i: Fraction) -> Fraction:
        return _rounded(_CONTEXT.subtract(_decimal(i).exp(_CONTEXT).exp(_CONTEXT), _WALTHER_SHIFT))

    def slope(a: Fraction) -> float:
        inner = float(_CONTEXT.add(_decimal(a), _WALTHER_SHIFT))
        return 1.0 / (inner * float(Decimal(inner).ln()))

    return Rule("loglog", index, value, slope)


def _power(exponent: Fraction) -> Rule:
    """I = a^p: vapour pressure with p = 1.25 (the Chevron index, published 1969)."""
    p = _decimal(exponent)
    one_over_p = _CONTEXT.divide(Decimal(1), p)

    def raised(a: Fraction, by: Decimal) -> Fraction:
        if a == 0 and by > 0:
            return Fraction(0)
        return _rounded(_CONTEXT.power(_positive(a), by))

    def slope(a: Fraction) -> float:
        # At 0 the slope is 0 for p > 1; for p < 1 it has no bound, and no sd can be carried.
        return float(p) * float(a) ** (float(p) - 1.0) if a > 0 or p >= 1 else float("inf")

    return Rule(f"power:{exponent}", lambda a: raised(a, p), lambda i: raised(i, one_over_p), slope, decreases=p < 0)


_FLASH_A, _FLASH_B, _FLASH_C = Decimal("-6.1188"), Decimal("2414"), Decimal("42.6")


def _flash() -> Rule:
    """log10 I = −6.1188 + 2414/(T/K − 42.6), T typed in °C, by volume (Wickey and Chittenden 1963)."""

    def index(a: Fraction) -> Fraction:
        kelvin = _CONTEXT.subtract(_CONTEXT.add(_decimal(a), _KELVIN), _FLASH_C)
        if kelvin <= 0:
            raise OutsideDomain("must be greater than −230.55 °C")
        return _rounded(_CONTEXT.power(Decimal(10), _CONTEXT.add(_FLASH_A, _CONTEXT.divide(_FLASH_B, kelvin))))

    def value(i: Fraction) -> Fraction:
        log = _CONTEXT.subtract(_positive(i).log10(_CONTEXT), _FLASH_A)
        if log <= 0:
            raise OutsideDomain("no temperature has this index")
        kelvin = _CONTEXT.add(_CONTEXT.divide(_FLASH_B, log), _FLASH_C)
        return _rounded(_CONTEXT.subtract(kelvin, _KELVIN))

    def slope(a: Fraction) -> float:
        kelvin = float(a) + float(_KELVIN - _FLASH_C)
        return -float(index(a)) * float(Decimal(10).ln()) * float(_FLASH_B) / kelvin**2

    return Rule("flash", index, value, slope, decreases=True)


_PLAIN: dict[str, Callable[[], Rule]] = {
    "linear": _linear,
    "harmonic": _harmonic,
    "log": _log,
    "loglog": _loglog,
    "flash": _flash,
}


def rule_named(name: str) -> Rule:
    """The rule of a component; ``power:1.25`` carries its exponent.  ValueError for an unknown name."""
    if name in _PLAIN:
        return _PLAIN[name]()
    kind, _, exponent = name.partition(":")
    if kind == "power" and exponent:
        p = Fraction(exponent.strip())
        if p != 0:
            return _power(p)
    raise ValueError(f"no blend rule {name!r}")
