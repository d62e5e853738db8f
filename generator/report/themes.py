"""Themes: folders of colours, a style sheet and templates that lay out what the report has to say.

A theme holds ``theme.toml`` (colours, fonts), ``style.css`` and ``templates/``.  What a reader's own
theme lacks comes from ``plain``; its templates may extend ``!/page.html``, which is always plain's.
"""

from __future__ import annotations

import base64
import hashlib
import re
import tomllib
import traceback
from collections.abc import Callable, Mapping
from dataclasses import dataclass, field
from pathlib import Path
from types import BuiltinMethodType, MethodType
from typing import Any

from jinja2 import (
    BaseLoader,
    ChoiceLoader,
    FunctionLoader,
    PrefixLoader,
    StrictUndefined,
    TemplateNotFound,
    TemplateSyntaxError,
)
from jinja2.sandbox import ImmutableSandboxedEnvironment

from generator.problems import HullbookError
from generator.report.theme_folders import PLAIN, own_themes

_COLOUR = re.compile(r"#[0-9a-fA-F]{6}")
_NAME = re.compile(r"[a-z][a-z-]*")
_FONT = re.compile(r"[\w\s,\"'-]+")
_LOGO_KINDS = {"svg": "image/svg+xml", "png": "image/png"}
_LARGEST_LOGO = 200_000
#: What the file names of templates begin with in tracebacks.
_SHOWN_AS = "theme:"


class ThemeError(HullbookError):
    """A theme that can't be used: ``what`` is wrong in ``file`` (below the theme's folder) at ``line``, if known."""

    def __init__(self, theme: str, file: str, line: int | None, what: str) -> None:
        place = f"theme {theme}, {file}" if file else f"theme {theme}"
        super().__init__(f"{place}, line {line}: {what}" if line else f"{place}: {what}")
        self.file = f"themes/{theme}/{file}" if file else f"themes/{theme}"
        self.line = line
        self.what = what


@dataclass(frozen=True, slots=True)
class Theme:
    """A theme ready to draw with: ``style`` is its whole style sheet, ``digest`` of all that it is made of.

    ``scripts`` are the comfort scripts by name; ``logo`` is a picture with its file ending, or None.
    """

    name: str
    environment: ImmutableSandboxedEnvironment
    style: str
    digest: str
    scripts: Mapping[str, str] = field(default_factory=dict)
    logo: Logo | None = None

    @property
    def style_address(self) -> str:
        """Where the style sheet stands: named by its content, so that it can be kept for ever."""
        return _address(self.style.encode(), "css")

    def script_address(self, name: str) -> str:
        """Where a script stands, named by its content too."""
        return _address(self.scripts[name].encode(), "js")

    @property
    def logo_address(self) -> str:
        """Where the logo stands; "" without one."""
        return _address(self.logo.data, self.logo.ending) if self.logo is not None else ""

    def render(self, template: str, **values: Any) -> str:
        """Lay out ``values`` with a template; ThemeError names the template and line that failed."""
        try:
            return self.environment.get_template(template).render(**values)
        except ThemeError:
            raise
        except RecursionError as error:
            raise ThemeError(self.name, f"templates/{template}", None, "a template extends itself") from error
        except Exception as error:  # a template is a program: whatever it raises is the theme's fault
            file, line = _place_of(error, template)
            what = getattr(error, "message", None) or str(error) or type(error).__name__
            raise ThemeError(self.name, file, line, what) from error


@dataclass(frozen=True, slots=True)
class Logo:
    """A theme's picture: its bytes, the ending that tells its kind, and the words that stand for it."""

    data: bytes
    ending: str
    words: str

    @property
    def inline(self) -> str:
        """The picture as an address that holds it."""
        return f"data:{_LOGO_KINDS[self.ending]};base64,{base64.b64encode(self.data).decode()}"


def _address(data: bytes, ending: str) -> str:
    return f"assets/{hashlib.sha256(data).hexdigest()[:16]}.{ending}"


def _place_of(error: Exception, template: str) -> tuple[str, int | None]:
    """The template and line that an error came from: as it says itself, else from where it was raised."""
    if isinstance(error, TemplateSyntaxError):
        return f"templates/{error.name or template}", error.lineno
    frames = [frame for frame in traceback.extract_tb(error.__traceback__) if frame.filename.startswith(_SHOWN_AS)]
    if isinstance(error, TemplateNotFound) and not frames:
        return f"templates/{template}", None
    return (
        (frames[-1].filename.removeprefix(_SHOWN_AS), frames[-1].lineno) if frames else (f"templates/{template}", None)
    )


def load_theme(name: str = PLAIN) -> Theme:
    """The theme of that name, or in the folder of that path; ThemeError if there is none or it is broken."""
    plain = built_in_themes() / PLAIN
    folder = built_in_themes() / name
    if not re.fullmatch(r"[\w-]+", name) or not folder.is_dir():
        folder = Path(name)
    if not folder.is_dir():
        raise ThemeError(_shown_name(name), "", None, "no such theme, and no folder of that name")
    settings = _settings(plain, PLAIN)
    if folder != plain:
        settings = _merged(settings, _settings(folder, folder.name))
    style = _variables(settings, folder) + _read(plain, "style.css")
    if folder != plain and (folder / "style.css").is_file():
        style += "\n" + _read(folder, "style.css")
    scripts = {path.stem: path.read_text("utf-8") for path in sorted(plain.glob("*.js"))}
    logo = _logo(folder, settings)
    digest = hashlib.sha256(style.encode())
    for source in (plain, folder):
        for path in sorted((source / "templates").glob("*.html")):
            digest.update(f"\0{path.name}\0".encode() + path.read_bytes())
    digest.update(repr((scripts, logo)).encode())
    return Theme(folder.name, _environment(folder, plain), style, digest.hexdigest(), scripts, logo)


def built_in_themes() -> Path:
    """The folder of the program's own themes: inside the installed package, else beside it in a checkout."""
    folder = own_themes()
    if folder is None:
        raise ThemeError(PLAIN, "", None, "the program's own themes are missing; install it again")
    return folder


#: What the sandbox wraps before a template may call it.
_METHODS = (MethodType, BuiltinMethodType)


class _Sandbox(ImmutableSandboxedEnvironment):
    """The sandbox, but an attribute of a type is judged once: pages ask for hundreds of thousands.

    What is judged safe depends on nothing but the type and the attribute's name.
    """

    def __init__(self, **options: Any) -> None:
        super().__init__(**options)
        self._judged: dict[tuple[type, str], bool] = {}

    def getattr(self, obj: Any, attribute: str) -> Any:
        """As the sandbox does it, but without asking anew for what was judged safe and is no method."""
        if self._judged.get((type(obj), attribute)):
            value = getattr(obj, attribute, _METHODS)
            if not isinstance(value, _METHODS) and value is not _METHODS:
                return value
        return super().getattr(obj, attribute)

    def is_safe_attribute(self, obj: Any, attr: str, value: Any) -> bool:
        """Whether a template may see this attribute."""
        key = (type(obj), attr)
        judged = self._judged.get(key)
        if judged is None:
            judged = self._judged[key] = super().is_safe_attribute(obj, attr, value)
        return judged


def _environment(folder: Path, plain: Path) -> ImmutableSandboxedEnvironment:
    own = FunctionLoader(_loader(plain))
    loaders: list[BaseLoader] = [own, PrefixLoader({"!": own})]
    if folder != plain:
        loaders.insert(0, FunctionLoader(_loader(folder)))
    return _Sandbox(
        loader=ChoiceLoader(loaders),
        autoescape=True,
        undefined=StrictUndefined,
        trim_blocks=True,
        lstrip_blocks=True,
        auto_reload=False,
    )


def _loader(folder: Path) -> Callable[[str], tuple[str, str, None] | None]:
    """Templates of one folder; a link that leads out of the folder is none."""
    root = (folder / "templates").resolve()

    def load(name: str) -> tuple[str, str, None] | None:
        path = (root / name).resolve()
        if not path.is_file() or not path.is_relative_to(root):
            return None
        return _read(folder, f"templates/{name}"), f"{_SHOWN_AS}templates/{name}", None

    return load


def _settings(folder: Path, name: str) -> Mapping[str, Any]:
    path = folder / "theme.toml"
    if not path.is_file():
        return {}
    try:
        return tomllib.loads(path.read_text("utf-8"))
    except (tomllib.TOMLDecodeError, UnicodeDecodeError) as error:
        line = re.search(r"at line (\d+)", str(error))
        raise ThemeError(name, "theme.toml", int(line.group(1)) if line else None, str(error)) from error


def _merged(base: Mapping[str, Any], over: Mapping[str, Any]) -> dict[str, Any]:
    merged = dict(base)
    for key, value in over.items():
        own = merged.get(key)
        merged[key] = {**own, **value} if isinstance(own, dict) and isinstance(value, dict) else value
    return merged


def _variables(settings: Mapping[str, Any], folder: Path) -> str:
    """The style sheet's variables.  Print takes the light colours, whatever the screen has."""
    light, dark = (_declared(settings.get(scheme, {}), _COLOUR, scheme, folder) for scheme in ("light", "dark"))
    for scheme, other in (("light", "dark"), ("dark", "light")):
        missing = [key for key in settings[scheme] if key not in settings[other]]
        if missing:
            what = f"{other}.{missing[0]} is missing: {scheme} has this colour"
            raise ThemeError(folder.name, "theme.toml", _line_of(folder, missing[0]), what)
    fonts = _declared(settings.get("fonts", {}), _FONT, "fonts", folder)
    return (
        f":root{{{light}{fonts}color-scheme:light dark}}\n"
        f"@media screen and (prefers-color-scheme:dark){{:root{{{dark}}}}}\n"
    )


def _line_of(folder: Path, key: str) -> int | None:
    """The line of theme.toml that sets a key, to lead the reader to it."""
    lines = _read(folder, "theme.toml").splitlines()
    return next((number for number, line in enumerate(lines, 1) if re.match(rf"\s*{key}\s*=", line)), None)


def _declared(values: Any, pattern: re.Pattern[str], table: str, folder: Path) -> str:
    if not isinstance(values, dict):
        raise ThemeError(folder.name, "theme.toml", _line_of(folder, table), f"{table} is not a table")
    for key, value in values.items():
        if not _NAME.fullmatch(key) or not isinstance(value, str) or not pattern.fullmatch(value):
            what = f"{table}.{key} = {value!r} is not of the form expected"
            raise ThemeError(folder.name, "theme.toml", _line_of(folder, re.escape(key)), what)
    return "".join(f"--{key}:{value};" for key, value in values.items())


def _read(folder: Path, file: str) -> str:
    try:
        return (folder / file).read_text("utf-8")
    except (OSError, UnicodeDecodeError) as error:
        raise ThemeError(folder.name, file, None, getattr(error, "strerror", None) or str(error)) from error


def _logo(folder: Path, settings: Mapping[str, Any]) -> Logo | None:
    """The theme's ``logo.svg`` or ``logo.png``, with the words that ``[logo] words`` gives for it."""
    table = settings.get("logo", {})
    words = table.get("words", folder.name) if isinstance(table, dict) else folder.name
    for ending in _LOGO_KINDS:
        path = folder / f"logo.{ending}"
        if not path.is_file():
            continue
        data = path.read_bytes()
        if len(data) > _LARGEST_LOGO:
            raise ThemeError(folder.name, path.name, None, f"the logo has more than {_LARGEST_LOGO // 1000} kB")
        return Logo(data, ending, str(words))
    return None


def _shown_name(name: str) -> str:
    """A theme's name without the folders that lead to it: those are no business of a page's reader."""
    return Path(name).name or "?"
