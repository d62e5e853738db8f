"""What every key of campaign.toml and site.toml may hold."""

from __future__ import annotations

import re
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from fractions import Fraction
from typing import get_args

from generator.intake.cells import parse_number
from generator.intake.decoding import ENCODINGS
from generator.intake.faults import Faults, did_you_mean, fold, tidy
from generator.intake.records import Acceptance, Basis, Below, Spread
from generator.intake.toml_files import TomlFile
from generator.intake.units import canonical_unit


class WrongValueError(ValueError):
    """A value that a key can't hold: what is wrong and what to write."""

    def __init__(self, message: str, remedy: str) -> None:
        super().__init__(message)
        self.message, self.remedy = message, remedy


Check = Callable[[object], object]


@dataclass(frozen=True, slots=True)
class Each:
    """A table whose keys the user names, each holding the same."""

    inner: Check | Mapping[str, Check]


# A table within a table within a table is as deep as settings go.
Node = Check | Each | Mapping[str, Check | Mapping[str, Check]]


def text(value: object) -> str:
    """A text that is not blank, surplus space removed."""
    if not isinstance(value, str) or not value.strip():
        raise WrongValueError("is not a text", 'write a text in quotation marks, such as "spring"')
    return tidy(value)


def texts(value: object) -> tuple[str, ...]:
    """A list of texts."""
    if not isinstance(value, list):
        raise WrongValueError("is not a list of texts", 'write a list such as ["A", "B"]')
    return tuple(text(item) for item in value)


def one_of(*choices: str) -> Check:
    """One of a few words, case ignored."""

    def check(value: object) -> str:
        for choice in choices:
            if isinstance(value, str) and fold(value) == fold(choice):
                return choice
        listed = ", ".join(f'"{choice}"' for choice in choices)
        otherwise = f"write one of {listed}"
        raise WrongValueError(
            "is not known", did_you_mean(value, choices, otherwise) if isinstance(value, str) else otherwise
        )

    return check


def exact(value: object) -> Fraction:
    """A number, exactly as typed."""
    if isinstance(value, bool) or not isinstance(value, int | Fraction):
        raise WrongValueError("is not a number", "write a number without quotation marks, such as 0.5")
    return Fraction(value)


def number(
    *, least: str | None = None, above: str | None = None, most: str | None = None, below: str | None = None
) -> Check:
    """A number within bounds: ``least`` and ``most`` inclusive, ``above`` and ``below`` exclusive."""
    limits = [("at least", least), ("above", above), ("at most", most), ("below", below)]
    wanted = " and ".join(f"{word} {bound}" for word, bound in limits if bound is not None)

    def check(value: object) -> Fraction:
        amount = exact(value)
        if (
            (least is not None and amount < Fraction(least))
            or (above is not None and amount <= Fraction(above))
            or (most is not None and amount > Fraction(most))
            or (below is not None and amount >= Fraction(below))
        ):
            raise WrongValueError("is out of range", f"write a number {wanted}")
        return amount

    return check


def count(value: object) -> int:
    """A whole number of at least 1."""
    if isinstance(value, bool) or not isinstance(value, int) or value < 1:
        raise WrongValueError("is not a whole number of at least 1", "write a whole number such as 4")
    return value


def percent(value: object) -> Fraction:
    """A share typed in percent, as a fraction of 1."""
    share = exact(value)
    if not 0 <= share <= 100:
        raise WrongValueError("is not a share in percent", "write a number from 0 to 100")
    return share / 100


def spread(value: object) -> Spread:
    """A standard deviation: a number, or "2 %" of the value."""
    if isinstance(value, str):
        typed = value.strip()
        relative = parse_number(typed.removesuffix("%")) if typed.endswith("%") else None
        if relative is None or relative < 0:
            raise WrongValueError(
                "is not a standard deviation", 'write a number such as 0.15, or "2 %" for a relative one'
            )
        return Spread(relative / 100, relative=True)
    amount = exact(value)
    if amount < 0:
        raise WrongValueError("is a negative standard deviation", f"write {abs(amount)}")
    return Spread(amount)


_POWER = re.compile(r"power\s*:\s*(?P<p>\S{1,40})")
RULES = ("linear", "harmonic", "log", "loglog", "power:p", "flash")


def rule(value: object) -> str:
    """A blend rule's name; ``power:p`` with its exponent as typed."""
    name = fold(value) if isinstance(value, str) else ""
    if name in RULES and name != "power:p":
        return name
    match = _POWER.fullmatch(name)
    exponent = parse_number(match["p"]) if match is not None else None
    if match is not None and exponent:
        return f"power:{match['p'].lstrip('+')}"
    otherwise = "write linear, harmonic, log, loglog, flash, or power:p with a number p such as power:1.25"
    if name.startswith("power"):
        raise WrongValueError("is not a blend rule", otherwise)
    raise WrongValueError("is not a blend rule", did_you_mean(name, RULES, otherwise))


def unit(value: object) -> str:
    """A unit; "" for none."""
    if not isinstance(value, str):
        raise WrongValueError("is not a unit", 'write a text such as "%"')
    return canonical_unit(value)


def share(value: object) -> tuple[str, ...]:
    """The limit on a group's share, as text; a list, so that those of the site and the campaign add up."""
    if isinstance(value, int | Fraction) and not isinstance(value, bool):
        raise WrongValueError("is a bare number", f'write "<= {value}" for at most that share')
    return (text(value),)


def lists_apart(value: object) -> tuple[tuple[str, ...], ...]:
    """Lists of patterns, every two of a list kept apart."""
    remedy = 'write lists of two or more, such as [["urea*", "ammonium nitrate*"]]'
    if not isinstance(value, list) or not all(isinstance(item, list) for item in value):
        raise WrongValueError("is not a list of lists", remedy)
    apart = tuple(texts(item) for item in value)
    if any(len(item) < 2 for item in apart):
        raise WrongValueError("has a list of fewer than two", remedy)
    return apart


def planes(value: object) -> tuple[tuple[str, str], ...]:
    """Pairs of component names."""
    remedy = 'write pairs such as [["K2O", "N"]]'
    if not isinstance(value, list) or not all(isinstance(item, list) and len(item) == 2 for item in value):
        raise WrongValueError("is not a list of pairs", remedy)
    return tuple((text(item[0]), text(item[1])) for item in value)


def components(value: object) -> tuple[str, ...]:
    """Two or more component names, none twice."""
    names = texts(value)
    if len(names) < 2 or len({fold(name) for name in names}) < len(names):
        raise WrongValueError(
            "is not a list of different components", 'write two or more, such as ["clay", "sand", "lime"]'
        )
    return names


def header(value: object) -> object:
    """An entry of [columns]: a column's name here, or the list ``ignore``."""
    return texts(value) if isinstance(value, list) else text(value)


_MARKS = {"comma": ",", "semicolon": ";", "tab": "\t", "bar": "|"}


def delimiter(value: object) -> str:
    """A delimiter, itself or by name."""
    if isinstance(value, str):
        mark = _MARKS.get(fold(value), value)
        if mark in _MARKS.values():
            return mark
    raise WrongValueError("is not a delimiter", 'write ",", ";", "tab" or "|"')


def dates(value: object) -> str:
    """The order of day, month and year: from "DMY", "dd.mm.yyyy" and the like."""
    order = "".join(dict.fromkeys(char for char in fold(value) if char in "dmy")) if isinstance(value, str) else ""
    if order not in ("dmy", "mdy", "ymd"):
        raise WrongValueError("is not an order of day, month and year", 'write "DMY", "MDY" or "YMD"')
    return order


_BASES: tuple[str, ...] = get_args(Basis)

COMPONENT: Mapping[str, Check] = {
    "label": text,
    "unit": unit,
    "basis": one_of(*_BASES),
    "limit_basis": one_of(*_BASES),
    "rule": rule,
    "sd": spread,
    "bias_sd": spread,
    "tolerance": number(least="0"),
    "blank": one_of("unknown", "zero"),
}

SCHEMA: Mapping[str, Node] = {
    "title": text,
    "quantity_unit": text,
    "quantity_basis": one_of("as received", "dry"),
    "currency": text,
    "basis": one_of(*_BASES),
    "theme": text,
    "confidence": number(least="0.5", below="1"),
    "below_detection": one_of(*get_args(Below)),
    "accept": one_of(*get_args(Acceptance)),
    "plan_nodes": count,
    "plan_seconds": number(above="0"),
    "batch_size": number(above="0"),
    "columns": Each(header),
    "components": Each(COMPONENT),
    "derived": Each(text),
    "groups": Each({"lots": texts, "share": share}),
    "house": {
        "max_lots": count,
        "least_if_used": percent,
        "weigh_step": number(above="0"),
        "keep_apart": lists_apart,
    },
    "whole": {"components": components, "total": number(above="0")},
    "views": {"planes": planes},
    "editions": Each({"hide": texts}),
    "csv": {
        "decimal": one_of(".", ","),
        "delimiter": delimiter,
        "encoding": one_of(*ENCODINGS),
        "dates": dates,
    },
}


def clean(toml: TomlFile, faults: Faults) -> dict[str, object]:
    """The values of a settings file that its keys can hold; a problem for each of the others."""
    return _table(toml, SCHEMA, toml.values, (), faults)


def _table(
    toml: TomlFile, schema: Mapping[str, Node], values: Mapping[str, object], path: tuple[str, ...], faults: Faults
) -> dict[str, object]:
    cleaned = {}
    for key, value in values.items():
        if key not in schema:
            known = ", ".join(schema)
            faults.stops(
                toml.place((*path, key)), "is no setting", did_you_mean(key, schema, f"write one of {known}"), found=key
            )
            continue
        kept = _node(toml, schema[key], value, (*path, key), faults)
        if kept is not None:
            cleaned[key] = kept
    return cleaned


def _node(toml: TomlFile, node: Node, value: object, path: tuple[str, ...], faults: Faults) -> object:
    """The cleaned value, or None where a problem was told."""
    if isinstance(node, Each | Mapping):
        if not isinstance(value, dict):
            faults.stops(
                toml.place(path), "is not a table", f"write [{'.'.join(path)}] and its keys below", found=_shown(value)
            )
            return None
        if isinstance(node, Mapping):
            return _table(toml, node, value, path, faults)
        _check_unique(toml, value, path, faults)
        inner = ((key, _node(toml, node.inner, item, (*path, key), faults)) for key, item in value.items())
        return {tidy(key): item for key, item in inner if item is not None}
    try:
        return node(value)
    except WrongValueError as wrong:
        faults.stops(toml.place(path), wrong.message, wrong.remedy, found=_shown(value))
        return None


def _check_unique(toml: TomlFile, table: Mapping[str, object], path: tuple[str, ...], faults: Faults) -> None:
    first: dict[str, str] = {}
    for key in table:
        if first.setdefault(fold(key), key) != key:
            message = f'is "{first[fold(key)]}" again, written differently'
            faults.stops(toml.place((*path, key)), message, "leave one of them out", found=key)


def _shown(value: object) -> str:
    if isinstance(value, Fraction):
        return str(float(value)) if abs(value) < 10**15 else str(value)
    if isinstance(value, bool):
        return str(value).lower()
    return str(value)
