"""campaign.toml over site.toml over the defaults."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from fractions import Fraction
from typing import Any

from generator.intake.cells import DateOrder, Decimal
from generator.intake.faults import Faults, fold
from generator.intake.records import House, Place, Settings
from generator.intake.schema import clean
from generator.intake.tables import Dialect
from generator.intake.toml_files import TomlFile, load_toml

SITE = "site.toml"
CAMPAIGN = "campaign.toml"

#: What the client edition leaves out unless told otherwise.
HIDDEN_FROM_CLIENTS = ("cost", "price", "stock", "supplier", "notes")

#: Keys of the top level that go into the settings as they are.
_PLAIN = (
    "title",
    "quantity_unit",
    "quantity_basis",
    "currency",
    "basis",
    "theme",
    "confidence",
    "below_detection",
    "accept",
    "plan_nodes",
    "plan_seconds",
    "batch_size",
)

#: Sections whose keys are names of the user's: compared with case and space ignored.
_NAMED = ("columns", "components", "derived", "groups")


@dataclass(frozen=True, slots=True, kw_only=True)
class Options:
    """Everything that the two settings files say; what needs the tables is still as typed.

    ``values`` are the cleaned and merged tables of :mod:`generator.intake.schema`; ``columns`` maps folded headers to
    names; ``ignored`` are folded headers.
    """

    settings: Settings
    house: House
    values: Mapping[str, Any]
    columns: Mapping[str, str]
    ignored: frozenset[str]
    dialect: Dialect
    decimal: Decimal | None = None
    dates: DateOrder | None = None
    files: tuple[TomlFile, ...] = field(default=())

    @property
    def declares_basis(self) -> bool:
        """Whether a basis for all components was typed."""
        return "basis" in self.values

    def section(self, name: str) -> Mapping[str, Any]:
        """A table of the settings; empty where there is none."""
        found: Mapping[str, Any] = self.values.get(name, {})
        return found

    def place(self, *path: str) -> Place:
        """Where a key stands: in the campaign's file, else in the site's."""
        holders = [toml for toml in self.files if _holds(toml.values, path)]
        toml = holders[-1] if holders else self.files[-1]
        return toml.place(path)

    def is_of_campaign(self, *path: str) -> bool:
        """Whether the campaign's own file holds the key."""
        return _holds(self.files[-1].values, path)


def read_settings(files: Mapping[str, bytes], folder: str, faults: Faults) -> Options:
    """The settings of a campaign; missing files count as empty."""
    tomls = tuple(
        load_toml(name, files[name], faults) if name in files else TomlFile(name, {}) for name in (SITE, CAMPAIGN)
    )
    site, campaign = (clean(toml, faults) for toml in tomls)
    values: dict[str, Any] = _merge(site, campaign)
    columns = dict(values.get("columns", {}))
    ignore = columns.pop("ignore", ())
    for toml in tomls:
        _check_columns(toml, faults)
    csv: Mapping[str, Any] = values.get("csv", {})
    return Options(
        settings=_settings(values, folder),
        house=House(**values.get("house", {})),
        values=values,
        columns={fold(header): name for header, name in columns.items() if isinstance(name, str)},
        ignored=frozenset(fold(header) for header in ((ignore,) if isinstance(ignore, str) else ignore)),
        dialect=Dialect(delimiter=csv.get("delimiter"), encoding=csv.get("encoding")),
        decimal=csv.get("decimal"),
        dates=csv.get("dates"),
        files=tomls,
    )


def _check_columns(toml: TomlFile, faults: Faults) -> None:
    columns = toml.values.get("columns", {})
    for header, name in columns.items() if isinstance(columns, Mapping) else ():
        if isinstance(name, list) and header != "ignore":
            faults.stops(
                toml.place(("columns", header)), "is a list", f'write "{header}" = "its name here"', found=str(name)
            )


def _settings(values: Mapping[str, Any], folder: str) -> Settings:
    given = {name: values[name] for name in _PLAIN if name in values}
    whole: Mapping[str, Any] = values.get("whole", {})
    editions: Mapping[str, Any] = {"client": {}, **values.get("editions", {})}
    return Settings(
        **{"title": folder, **given},
        whole=whole.get("components", ()),
        whole_total=whole.get("total", Fraction(100)),
        planes=values.get("views", {}).get("planes", ()),
        hidden={name: tuple(edition.get("hide", HIDDEN_FROM_CLIENTS)) for name, edition in editions.items()},
    )


def _merge(site: dict[str, Any], campaign: dict[str, Any]) -> dict[str, Any]:
    """The campaign's values over the site's; house rules and lists only ever grow stricter."""
    merged = _over(site, campaign)
    for section in _NAMED:
        if section in site or section in campaign:
            merged[section] = _over_by_name(site.get(section, {}), campaign.get(section, {}))
    mine, theirs = campaign.get("house", {}), site.get("house", {})
    house = merged.get("house", {})
    if "max_lots" in mine and "max_lots" in theirs:
        house["max_lots"] = min(mine["max_lots"], theirs["max_lots"])
    if "least_if_used" in mine and "least_if_used" in theirs:
        house["least_if_used"] = max(mine["least_if_used"], theirs["least_if_used"])
    if "keep_apart" in mine and "keep_apart" in theirs:
        house["keep_apart"] = tuple(dict.fromkeys((*theirs["keep_apart"], *mine["keep_apart"])))
    return merged


def _over(below: Mapping[str, Any], above: Mapping[str, Any]) -> dict[str, Any]:
    merged = dict(below)
    for key, value in above.items():
        old = merged.get(key)
        merged[key] = _over(old, value) if isinstance(old, dict) and isinstance(value, dict) else value
    return merged


def _over_by_name(below: Mapping[str, Any], above: Mapping[str, Any]) -> dict[str, Any]:
    """Like ``_over`` for keys that the user names; lists of ignored columns and shares of groups add up."""
    merged = dict(below)
    spelled = {fold(name): name for name in merged}
    for name, value in above.items():
        old_name = spelled.get(fold(name))
        old = merged.pop(old_name) if old_name is not None else None
        if isinstance(old, dict) and isinstance(value, dict):
            shares = (*old.get("share", ()), *value.get("share", ()))
            value = {**old, **value, **({"share": shares} if shares else {})}
        elif isinstance(old, tuple) and isinstance(value, tuple):
            value = (*old, *value)
        merged[name] = value
    return merged


def _holds(values: Mapping[str, Any], path: tuple[str, ...]) -> bool:
    here: Any = values
    for part in path:
        if not isinstance(here, Mapping):
            return False
        keys = {fold(key): key for key in here}
        if fold(part) not in keys:
            return False
        here = here[keys[fold(part)]]
    return True
