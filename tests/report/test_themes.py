"""Themes: plain's contrast, a reader's own theme over it, and what a broken one says."""

from __future__ import annotations

import tomllib
from pathlib import Path

import pytest

from generator.report.pages import assets, draw_index
from generator.report.themes import ThemeError, built_in_themes, load_theme


def luminance(colour: str) -> float:
    """Relative luminance of #rrggbb (WCAG 2.2)."""
    channels = [int(colour[place : place + 2], 16) / 255 for place in (1, 3, 5)]
    linear = [c / 12.92 if c <= 0.04045 else ((c + 0.055) / 1.055) ** 2.4 for c in channels]
    return 0.2126 * linear[0] + 0.7152 * linear[1] + 0.0722 * linear[2]


def contrast(one: str, other: str) -> float:
    """Contrast ratio of two colours (WCAG 2.2)."""
    light, dark = sorted((luminance(one), luminance(other)), reverse=True)
    return (light + 0.05) / (dark + 0.05)


@pytest.mark.parametrize("scheme", ["light", "dark"])
def test_plain_can_be_read_in_both_schemes(scheme: str) -> None:
    """Text has a contrast of 4.5 and marks of 3 against every ground they stand on."""
    colours = tomllib.loads((built_in_themes() / "plain" / "theme.toml").read_text("utf-8"))[scheme]
    for ground in ("paper", "sheet", "tint"):
        for text in ("ink", "muted", "accent", "bad", "makeable", "edge", "short", "barred", "unreachable", "blend"):
            assert contrast(colours[text], colours[ground]) >= 4.5, (text, ground)
    for ground in ("paper", "hull"):
        for mark in ("lot", "inner", "window", "blend", "bad"):
            assert contrast(colours[mark], colours[ground]) >= 3, (mark, ground)


def theme_folder(folder: Path, **files: str) -> str:
    """A theme in ``folder`` with these files ("__" is a slash, "_" before the ending a dot)."""
    for name, text in files.items():
        path = folder / name.replace("__", "/").replace("_html", ".html").replace("_toml", ".toml").replace(
            "_css", ".css"
        )
        path.parent.mkdir(parents=True, exist_ok=True)
        path.write_text(text, "utf-8")
    return str(folder)


def test_a_readers_theme_overrides_what_it_has(tmp_path: Path) -> None:
    """Colours, single templates and style come from it, everything else from plain."""
    name = theme_folder(
        tmp_path / "mine",
        theme_toml='[light]\naccent = "#123456"\n',
        style_css="h1 { color: red }",
        templates__index_html='{% extends "!/page.html" %}{% block body %}<p>mine</p>{% endblock %}',
    )
    theme = load_theme(name)
    assert "--accent:#123456" in theme.style
    assert "--ink:#1c2427" in theme.style
    assert theme.style.endswith("h1 { color: red }")
    assert b"<p>mine</p>" in draw_index([], theme)
    assert theme.digest != load_theme().digest


def test_the_style_sheet_is_named_by_its_content(tmp_path: Path) -> None:
    """Another colour is another address, so that an old page never meets a new sheet."""
    other = load_theme(theme_folder(tmp_path / "mine", theme_toml='[dark]\nink = "#ffffff"\n'))
    assert set(assets(other)) != set(assets(load_theme()))


@pytest.mark.parametrize(
    ("files", "message"),
    [
        ({"theme_toml": "[light"}, "theme.toml"),
        ({"theme_toml": '[light]\nink = "red}"\n'}, "light.ink"),
        ({"theme_toml": "light = 3\n"}, "light is not a table"),
        ({"templates__index_html": "a\n{% if %}"}, "templates/index.html, line 2"),
        ({"templates__index_html": "{{ page.nothing }}"}, "nothing"),
        ({"templates__index_html": '{% extends "index.html" %}'}, "extends itself"),
        ({"templates__index_html": '{% include "../theme.toml" %}'}, "../theme.toml"),
        ({"templates__index_html": "{{ ''.__class__.__mro__ }}"}, "__class__"),
    ],
)
def test_a_broken_theme_says_where(tmp_path: Path, files: dict[str, str], message: str) -> None:
    """The error names the file and what is wrong in it."""
    with pytest.raises(ThemeError) as caught:
        draw_index([], load_theme(theme_folder(tmp_path / "mine", **files)))
    assert message in str(caught.value)


def test_a_theme_that_is_not_there_is_an_error() -> None:
    """Neither a built-in name nor a folder."""
    with pytest.raises(ThemeError, match="no such theme"):
        load_theme("nowhere-to-be-found")


def test_a_template_outside_the_theme_is_not_followed(tmp_path: Path) -> None:
    """A link that leads out of the theme's folder is no template."""
    secret = tmp_path / "secret.html"
    secret.write_text("secret", "utf-8")
    name = theme_folder(tmp_path / "mine", templates__index_html='{% include "out.html" %}')
    (tmp_path / "mine" / "templates" / "out.html").symlink_to(secret)
    with pytest.raises(ThemeError, match=r"out\.html"):
        draw_index([], load_theme(name))
