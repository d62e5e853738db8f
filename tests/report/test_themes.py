"""Themes: plain's contrast, a reader's own theme over it, and what a broken one says."""

from __future__ import annotations

import tomllib
from dataclasses import replace
from pathlib import Path

import pytest

from generator.report.editions import edited
from generator.report.pack import packed
from generator.report.pages import assets, draw_index
from generator.report.themes import ThemeError, built_in_themes, load_theme
from tests.report.fixtures import make_book
from tests.sample import make_job, pages_of, put_campaign, run, text_of


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


@pytest.mark.parametrize("scheme", ["light", "dark"])
def test_letter_can_be_read_in_both_schemes(scheme: str) -> None:
    """Its colours, laid over plain's, have the contrast that plain's have."""
    found = [
        tomllib.loads((built_in_themes() / name / "theme.toml").read_text("utf-8")) for name in ("plain", "letter")
    ]
    colours = {**found[0][scheme], **found[1][scheme]}
    for ground in ("paper", "sheet", "tint"):
        for text in ("ink", "muted", "accent", "bad", "makeable", "edge", "short", "barred", "unreachable", "blend"):
            assert contrast(colours[text], colours[ground]) >= 4.5, (text, ground)
    for ground in ("paper", "hull"):
        for mark in ("lot", "inner", "window", "blend", "bad"):
            assert contrast(colours[mark], colours[ground]) >= 3, (mark, ground)


@pytest.mark.parametrize(
    ("files", "file", "line"),
    [
        ({"theme_toml": '[light]\nink = "red}"\n'}, "theme.toml", 2),
        ({"theme_toml": '[light]\nink = "#000000"\nmood = "#123456"\n'}, "theme.toml", 3),
        ({"templates__index_html": "a\n\n{% if %}"}, "templates/index.html", 3),
        ({"templates__index_html": "a\n{{ page.nothing }}"}, "templates/index.html", 2),
        ({"templates__index_html": "{{ 1 / 0 }}"}, "templates/index.html", 1),
        ({"templates__index_html": '\n{{ "a" + 1 }}'}, "templates/index.html", 2),
        ({"templates__index_html": '{% extends "index.html" %}'}, "templates/index.html", None),
    ],
)
def test_a_broken_theme_names_file_and_line(tmp_path: Path, files: dict[str, str], file: str, line: int | None) -> None:
    """Syntax, unknown names, plain errors of Python, colours of one scheme alone: each leads to its place."""
    with pytest.raises(ThemeError) as caught:
        draw_index([], load_theme(theme_folder(tmp_path / "mine", **files)))
    assert (caught.value.file, caught.value.line) == (f"themes/mine/{file}", line)


def test_a_broken_theme_leaves_the_last_good_report(tmp_path: Path) -> None:
    """Its fault is a problem of each campaign, and the published pages stay byte for byte; mended, it is used."""
    put_campaign(tmp_path / "campaigns")
    theme = theme_folder(tmp_path / "mine", theme_toml='[light]\nink = "#000001"\n')
    job = make_job(tmp_path, theme=theme)
    run(job)
    before = {name: data for name, data in pages_of(tmp_path / "output").items() if name.startswith("spring/")}
    broken = theme_folder(tmp_path / "mine", templates__order_html="\n{{ page.nothing }}")
    put_campaign(tmp_path / "campaigns", targets_csv="order,N\n9,>= 1\n")
    outcome = run(replace(job, theme=broken))
    after = {name: data for name, data in pages_of(tmp_path / "output").items() if name.startswith("spring/")}
    assert after == before
    assert not outcome.is_well
    assert [(problem.file, problem.row) for problem in outcome.problems["spring"]] == [
        ("themes/mine/templates/order.html", 2)
    ]
    (tmp_path / "mine" / "templates" / "order.html").unlink()
    assert run(job).is_well
    assert "spring/orders/9.html" in pages_of(tmp_path / "output")


def test_a_first_build_with_a_broken_theme_is_plain(tmp_path: Path) -> None:
    """Where nothing is published yet the plain theme shows the answers, and the problem."""
    put_campaign(tmp_path / "campaigns")
    outcome = run(make_job(tmp_path, theme=theme_folder(tmp_path / "mine", templates__lot_html="{{ 1 / 0 }}")))
    assert not outcome.is_well
    assert "templates/lot.html" in text_of(tmp_path / "output", "spring/index.html")


def test_a_logo_stands_on_every_page_and_in_packs(tmp_path: Path) -> None:
    """It is an asset named by its content, a picture within a pack, and has words."""
    name = theme_folder(tmp_path / "mine", theme_toml='[logo]\nwords = "Quill & Co"\n')
    (tmp_path / "mine" / "logo.svg").write_text('<svg xmlns="http://www.w3.org/2000/svg"/>', "utf-8")
    theme = load_theme(name)
    page = draw_index([], theme).decode()
    assert theme.logo_address in assets(theme)
    assert f'<img class="logo" src="{theme.logo_address}" alt="Quill &amp; Co">' in page
    assert 'src="data:image/svg+xml;base64,' in packed(edited(make_book()), theme).decode()
