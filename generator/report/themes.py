"""Themes: folders of colours, a style sheet and templates that lay out what the report has to say.

A theme holds ``theme.toml`` (colours, fonts), ``style.css`` and ``templates/``.  What a reader's own
theme lacks comes from ``plain``; its templates may extend ``!/page.html``, which is always plain's.
"""

from __future__ import annotations

import hashlib
import importlib.resources
import re
import tomllib
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from jinja2 import BaseLoader, ChoiceLoader, FunctionLoader, PrefixLoader, StrictUndefined, TemplateError
from jinja2.sandbox import ImmutableSandboxedEnvironment

from generator.problems import HullbookError

PLAIN = "plain"
_COLOUR = re.compile(r"#[0-9a-fA-F]{6}")
_NAME = re.compile(r"[a-z][a-z-]*")
_FONT = re.compile(r"[\w\s,\"'-]+")


class ThemeError(HullbookError):
    """A theme that can't be used; the text names the file, and the line where it is known."""


@dataclass(frozen=True, slots=True)
class Theme:
    """A theme ready to draw with: ``style`` is its whole style sheet, ``digest`` of all that it is made of."""

    name: str
    environment: ImmutableSandboxedEnvironment
    style: str
    digest: str

    @property
    def style_address(self) -> str:
        """Where the style sheet stands: named by its content, so that it can be kept for ever."""
        return f"assets/{hashlib.sha256(self.style.encode()).hexdigest()[:16]}.css"

    def render(self, template: str, **values: Any) -> str:
        """Lay out ``values`` with a template; ThemeError names the template and line that failed."""
        try:
            return self.environment.get_template(template).render(**values)
        except TemplateError as error:
            line = getattr(error, "lineno", None)
            place = f"templates/{getattr(error, 'name', None) or template}" + (f", line {line}" if line else "")
            raise ThemeError(f"theme {self.name}, {place}: {error.message or type(error).__name__}") from error
        except RecursionError as error:
            raise ThemeError(f"theme {self.name}, templates/{template}: a template extends itself") from error


def load_theme(name: str = PLAIN) -> Theme:
    """The theme of that name, or in the folder of that path; ThemeError if there is none or it is broken."""
    plain = built_in_themes() / PLAIN
    folder = built_in_themes() / name
    if not re.fullmatch(r"[\w-]+", name) or not folder.is_dir():
        folder = Path(name)
    if not folder.is_dir():
        raise ThemeError(f"theme {name}: no such theme, and no folder of that name")
    settings = _settings(plain, PLAIN)
    if folder != plain:
        settings = _merged(settings, _settings(folder, folder.name))
    style = _variables(settings, folder.name) + _read(plain, "style.css")
    if folder != plain and (folder / "style.css").is_file():
        style += "\n" + _read(folder, "style.css")
    digest = hashlib.sha256(style.encode())
    for source in (plain, folder):
        for path in sorted((source / "templates").glob("*.html")):
            digest.update(f"\0{path.name}\0".encode() + path.read_bytes())
    return Theme(folder.name, _environment(folder, plain), style, digest.hexdigest())


def built_in_themes() -> Path:
    """The folder of the program's own themes: inside the installed package, else beside it in a checkout."""
    inside = Path(str(importlib.resources.files("generator") / "themes"))
    beside = Path(__file__).resolve().parents[2] / "themes"
    for folder in (inside, beside):
        if (folder / PLAIN / "theme.toml").is_file():
            return folder
    raise ThemeError("the program's own themes are missing; install it again")


def _environment(folder: Path, plain: Path) -> ImmutableSandboxedEnvironment:
    own = FunctionLoader(_loader(plain))
    loaders: list[BaseLoader] = [own, PrefixLoader({"!": own})]
    if folder != plain:
        loaders.insert(0, FunctionLoader(_loader(folder)))
    return ImmutableSandboxedEnvironment(
        loader=ChoiceLoader(loaders),
        autoescape=True,
        undefined=StrictUndefined,
        trim_blocks=True,
        lstrip_blocks=True,
        auto_reload=False,
    )


def _loader(folder: Path) -> Callable[[str], str | None]:
    """Templates of one folder; a link that leads out of the folder is none."""
    root = (folder / "templates").resolve()

    def load(name: str) -> str | None:
        path = (root / name).resolve()
        return path.read_text("utf-8") if path.is_file() and path.is_relative_to(root) else None

    return load


def _settings(folder: Path, name: str) -> Mapping[str, Any]:
    path = folder / "theme.toml"
    if not path.is_file():
        return {}
    try:
        return tomllib.loads(path.read_text("utf-8"))
    except (tomllib.TOMLDecodeError, UnicodeDecodeError) as error:
        raise ThemeError(f"theme {name}, theme.toml: {error}") from error


def _merged(base: Mapping[str, Any], over: Mapping[str, Any]) -> dict[str, Any]:
    merged = dict(base)
    for key, value in over.items():
        own = merged.get(key)
        merged[key] = {**own, **value} if isinstance(own, dict) and isinstance(value, dict) else value
    return merged


def _variables(settings: Mapping[str, Any], name: str) -> str:
    """The style sheet's variables.  Print takes the light colours, whatever the screen has."""
    light, dark = (_declared(settings.get(scheme, {}), _COLOUR, scheme, name) for scheme in ("light", "dark"))
    fonts = _declared(settings.get("fonts", {}), _FONT, "fonts", name)
    return (
        f":root{{{light}{fonts}color-scheme:light dark}}\n"
        f"@media screen and (prefers-color-scheme:dark){{:root{{{dark}}}}}\n"
    )


def _declared(values: Any, pattern: re.Pattern[str], table: str, name: str) -> str:
    if not isinstance(values, dict):
        raise ThemeError(f"theme {name}, theme.toml: {table} is not a table")
    for key, value in values.items():
        if not _NAME.fullmatch(key) or not isinstance(value, str) or not pattern.fullmatch(value):
            raise ThemeError(f"theme {name}, theme.toml: {table}.{key} = {value!r} is not of the form expected")
    return "".join(f"--{key}:{value};" for key, value in values.items())


def _read(folder: Path, file: str) -> str:
    try:
        return (folder / file).read_text("utf-8")
    except (OSError, UnicodeDecodeError) as error:
        raise ThemeError(f"theme {folder.name}, {file}: {error}") from error
