"""campaign.toml over site.toml."""

from __future__ import annotations

from fractions import Fraction

import pytest

from generator.intake.records import House, Settings, Spread
from tests.intake.make import ASSAYS, read, sentences, told

F = Fraction


def test_defaults() -> None:
    """Without settings files everything has its default, the title being the folder's name."""
    campaign = read()
    assert sentences(campaign) == []
    assert campaign.settings == Settings(
        title="Spring", hidden={"client": ("cost", "price", "stock", "supplier", "notes")}
    )
    assert campaign.house == House()


def test_every_key() -> None:
    """Every key of the top level is read, floats exactly."""
    campaign = read(
        "lot,clay,sand,lime\nA,10,20,70\nB,30,5,65\n",
        "order,clay\none,<= 20\n",
        """
        title = "Spring bulk blends"
        quantity_unit = "kt"
        quantity_basis = "dry"
        currency = "USD"
        basis = "dry"
        theme = "letter"
        confidence = 0.9
        below_detection = "limit"
        accept = "part"
        plan_nodes = 7
        plan_seconds = 1.1
        batch_size = 25
        [house]
        max_lots = 4
        least_if_used = 5
        weigh_step = 0.1
        keep_apart = [["a*", "B"]]
        [whole]
        components = ["Clay", "sand", "lime"]
        total = 100
        [views]
        planes = [["clay", "SAND"]]
        [editions.client]
        hide = ["Cost", "sand"]
        """,
    )
    assert sentences(campaign) == []
    assert campaign.settings == Settings(
        title="Spring bulk blends",
        quantity_unit="kt",
        quantity_basis="dry",
        currency="USD",
        basis="dry",
        theme="letter",
        confidence=F(9, 10),
        below_detection="limit",
        accept="part",
        plan_nodes=7,
        plan_seconds=F(11, 10),
        batch_size=F(25),
        whole=("clay", "sand", "lime"),
        whole_total=F(100),
        planes=(("clay", "sand"),),
        hidden={"client": ("cost", "sand")},
    )
    assert campaign.house == House(max_lots=4, least_if_used=F(1, 20), weigh_step=F(1, 10), keep_apart=(("a*", "B"),))
    assert campaign.orders[0].accept == "part"


def test_component_keys() -> None:
    """A component takes its settings by name, case ignored, and keeps the name as declared."""
    campaign = read(
        "lot,k2o,N\nA,20,10\n",
        "order,K2O\none,13\n",
        """
        [components.K2O]
        label = "K₂O"
        unit = "%"
        basis = "dry"
        limit_basis = "dry"
        rule = "power:1.25"
        sd = 0.15
        bias_sd = "2 %"
        tolerance = 0.5
        blank = "zero"
        """,
    )
    component = campaign.components[0]
    assert (component.name, component.label, component.unit) == ("K2O", "K₂O", "%")
    assert (component.basis, component.limit_basis, component.rule) == ("dry", "dry", "power:1.25")
    assert (component.sd, component.bias_sd) == (Spread(F(3, 20)), Spread(F(1, 50), relative=True))
    assert (component.tolerance, component.blank_is_zero) == (F(1, 2), True)
    limit = campaign.orders[0].limits["K2O"] if campaign.orders else None
    assert limit is not None
    assert (limit.low, limit.high, limit.aim) == (F("12.5"), F("13.5"), F(13))


def test_house_rules_only_grow() -> None:
    """A campaign may tighten the site's house rules, never loosen or remove one."""
    site = (
        '[house]\nmax_lots = 3\nleast_if_used = 10\nkeep_apart = [["A", "B"]]\n[groups.g]\n'
        'lots = ["A"]\nshare = "<= 20"'
    )
    looser = (
        '[house]\nmax_lots = 5\nleast_if_used = 5\nkeep_apart = [["B", "A*"]]\n[groups.G]\n'
        'lots = ["A"]\nshare = "5..30"'
    )
    campaign = read(campaign=looser, site=site)
    assert sentences(campaign) == []
    assert campaign.house == House(max_lots=3, least_if_used=F(1, 10), keep_apart=(("A", "B"), ("B", "A*")))
    assert campaign.groups[0].share is not None
    assert (campaign.groups[0].share.low, campaign.groups[0].share.high) == (5, 20)
    tighter = read(campaign="[house]\nmax_lots = 2\nleast_if_used = 20", site=site)
    assert (tighter.house.max_lots, tighter.house.least_if_used) == (2, F(1, 5))
    assert read(site=site).house.max_lots == 3


def test_campaign_over_site() -> None:
    """Other keys of the campaign win over the site's, key by key."""
    campaign = read(
        campaign='currency = "CHF"\n[components.N]\nunit = "%"\n[columns]\nignore = ["Job"]',
        site=(
            'currency = "USD"\nquantity_unit = "kg"\n[components.n]\nsd = 0.1\nunit = "ppm"\n[columns]\nignore = ["By"]'
        ),
        assays="lot,N,K2O,By,Job\nA,10,20,7,8\n",
    )
    assert (campaign.settings.currency, campaign.settings.quantity_unit) == ("CHF", "kg")
    assert (campaign.components[0].unit, campaign.components[0].sd) == ("%", Spread(F(1, 10)))
    assert [component.name for component in campaign.components] == ["N", "K2O"]


@pytest.mark.parametrize(
    "toml, sentence",
    [
        (
            "confidense = 0.9",
            "row 1, column confidense: found 'confidense': is no setting; did you mean \"confidence\"?",
        ),
        (
            "[house]\nmax_lot = 3",
            "row 2, column house.max_lot: found 'max_lot': is no setting; did you mean \"max_lots\"?",
        ),
        (
            "[house]\nzzz = 3",
            "row 2, column house.zzz: found 'zzz': is no setting; "
            "write one of max_lots, least_if_used, weigh_step, keep_apart",
        ),
        (
            "[components.N]\nunits = '%'",
            "row 2, column components.N.units: found 'units': is no setting; did you mean \"unit\"?",
        ),
        (
            "[editions.internal]\nhide = []",
            "row 1, column editions.internal: found 'internal': shows everything and hides nothing; write",
        ),
        (
            "confidence = 0.4",
            "row 1, column confidence: found '0.4': is out of range; write a number at least 0.5 and below 1",
        ),
        (
            "confidence = 95",
            "row 1, column confidence: found '95': is out of range; write a number at least 0.5 and below 1",
        ),
        (
            'confidence = "0.9"',
            "row 1, column confidence: found '0.9': is not a number; write a number without quotation "
            "marks, such as 0.5",
        ),
        (
            "confidence = nan",
            "row 1, column confidence: found 'nan': is not a number; write a number without quotation "
            "marks, such as 0.5",
        ),
        (
            "plan_seconds = 1e999999999",
            "row 1, column plan_seconds: found '1e999999999': is not a number; "
            "write a number without quotation marks, such as 0.5",
        ),
        (
            "plan_nodes = 0",
            "row 1, column plan_nodes: found '0': is not a whole number of at least 1; write a whole number such as 4",
        ),
        (
            "title = true",
            "row 1, column title: found 'true': is not a text; write a text in quotation marks, such as \"spring\"",
        ),
        ('basis = "wett"', "row 1, column basis: found 'wett': is not known; "),
        ('quantity_basis = "volume"', "row 1, column quantity_basis: found 'volume': is not known; "),
        ("[house]\nleast_if_used = 101", "row 2, column house.least_if_used: found '101': is not a share in percent; "),
        (
            '[house]\nkeep_apart = ["A", "B"]',
            "row 2, column house.keep_apart: found \"['A', 'B']\": is not a list of lists; ",
        ),
        (
            '[house]\nkeep_apart = [["A"]]',
            "row 2, column house.keep_apart: found \"[['A']]\": has a list of fewer than two; ",
        ),
        ("house = 3", "row 1, column house: found '3': is not a table; write [house] and its keys below"),
        (
            "[components.N]\nsd = -0.1",
            "row 2, column components.N.sd: found '-0.1': is a negative standard deviation; ",
        ),
        ('[components.N]\nsd = "some"', "row 2, column components.N.sd: found 'some': is not a standard deviation; "),
        (
            '[components.N]\nrule = "cubic"',
            "row 2, column components.N.rule: found 'cubic': is not a blend rule; write linear, ",
        ),
        ('[components.N]\nrule = "power:0"', "row 2, column components.N.rule: found 'power:0': is not a blend rule; "),
        (
            '[components.N]\nrule = "linea"',
            "row 2, column components.N.rule: found 'linea': is not a blend rule; did you mean ",
        ),
        ("[components.N]\ntolerance = -1", "row 2, column components.N.tolerance: found '-1': is out of range; "),
        (
            "[components.M]\nsd = 1\n[components.K20]\nsd = 2",
            "row 3, column components.K20: found 'K20': is no column of assays.csv; ",
        ),
        (
            "[components.stock]\nsd = 1",
            "row 1, column components.stock: found 'stock': is the name of a column that is no component; ",
        ),
        ('[csv]\ndelimiter = "x"', "row 2, column csv.delimiter: found 'x': is not a delimiter; "),
        ('[csv]\ndates = "now"', "row 2, column csv.dates: found 'now': is not an order of day, month and year; "),
        ('[csv]\nencoding = "rot13"', "row 2, column csv.encoding: found 'rot13': is not known; "),
        ('[columns]\n"By" = ["x"]', "row 2, column columns.By: found \"['x']\": is a list; "),
        ('[groups.g]\nlots = ["A"]\nshare = 30', "row 3, column groups.g.share: found '30': is a bare number; "),
        (
            '[groups.g]\nlots = ["A"]\nshare = "<= 130"',
            "row 3, column groups.g.share: found '<= 130': is a share outside 0 to 100 ",
        ),
        ('[groups.g]\nlots = ["Z*"]', "row 2, column groups.g.lots: found 'Z*': matches no lot and no material; "),
        (
            "[components.N]\n[components.n]",
            "row 2, column components.n: found 'n': is \"N\" again, written differently; leave one of them out",
        ),
        ("[groups.g]\nlots = 3", "row 2, column groups.g.lots: found '3': is not a list of texts; "),
        ('[groups.g]\nlots = ["A"]\nshare = "some"', "row 3, column groups.g.share: found 'some': is not a limit; "),
        ("[components.N]\nunit = 3", "row 2, column components.N.unit: found '3': is not a unit; "),
        ("[views]\nplanes = [['N']]", "row 2, column views.planes: found \"[['N']]\": is not a list of pairs; "),
        (
            '[whole]\ncomponents = ["N", "n"]',
            "row 2, column whole.components: found \"['N', 'n']\": is not a list of different components; ",
        ),
        (
            '[components.moisture]\nbasis = "dry"',
            "row 2, column components.moisture.basis: found 'dry': can't be set: for moisture it is \"as received\"; ",
        ),
        ("[groups.g]", "row 1, column groups.g: found 'g': names no lots; "),
        ('[groups.N]\nlots = ["A"]', "row 1, column groups.N: found 'N': is already the name of a component, "),
        (
            '[whole]\ncomponents = ["N", "Kay"]',
            "row 2, column whole.components: found 'Kay': is not known here; write one of N, K2O",
        ),
        (
            '[views]\nplanes = [["N", "K20"]]',
            "row 2, column views.planes: found 'K20': is not known here; did you mean \"K2O\"?",
        ),
        (
            '[editions.client]\nhide = ["costs"]',
            "row 2, column editions.client.hide: found 'costs': is not known here; did you mean \"cost\"?",
        ),
        (
            '[house]\nkeep_apart = [["A", "C*"]]',
            "row 2, column house.keep_apart: found 'C*': matches no lot and no material; ",
        ),
        ("a = 1\n\nb == 2", "row 3: found 'b == 2': is not TOML (invalid value); write name = value, and texts in "),
    ],
)
def test_what_a_key_cannot_hold(toml: str, sentence: str) -> None:
    """A setting that can't be obeyed stops the campaign, at its row, with what to write."""
    found = [text for text in sentences(read(campaign=toml)) if text.startswith("stops: campaign.toml")]
    assert any(text.startswith(f"stops: campaign.toml, {sentence}") for text in found), found


def test_all_problems_at_once() -> None:
    """Problems of every file come together, by file and row."""
    campaign = read(
        "lot,N,K2O\nA,x,20\nB,30,y\nC,1,1\n",
        "order,N,K2O\none,8-Oct,??\n",
        "confidense = 1\nbasis = 3",
        site="titel = 1",
    )
    assert [(problem.file, problem.row, problem.column) for problem in campaign.problems] == [
        ("assays.csv", 2, "N"),
        ("assays.csv", 3, "K2O"),
        ("campaign.toml", 1, "confidense"),
        ("campaign.toml", 2, "basis"),
        ("site.toml", 1, "titel"),
        ("targets.csv", 2, "K2O"),
        ("targets.csv", 2, "N"),
    ]


def test_settings_in_another_encoding() -> None:
    """A settings file with a mark or in Windows-1252 is read, and the latter said."""
    assert read(campaign=b'\xef\xbb\xbftitle = "x"').settings.title == "x"
    old = read(campaign=b'title = "M\xfcller"\r\n')
    assert old.settings.title == "Müller"
    assert "campaign.toml None: read as Windows-1252" in told(old)


def test_columns_are_renamed_and_ignored() -> None:
    """[columns] renames headers with or without their unit, and leaves columns out."""
    campaign = read(
        "Sample No,Nitrogen [g/kg],K2O,Analyst,Job [no]\nA,100,20,Jo,7\n",
        "Order No,N\none,>= 5\n",
        '[columns]\n"Sample No" = "lot"\n"Order No" = "order"\nNitrogen = "N"\nignore = ["analyst", "Job"]',
    )
    assert sentences(campaign) == []
    assert [(c.name, c.unit) for c in campaign.components] == [("N", "g/kg"), ("K2O", "")]
    assert campaign.lots[0].remarks == {}
    assert "assays.csv 1: column Analyst: ignored" in told(campaign)


def test_hide_may_name_components_and_remarks() -> None:
    """What clients don't see may be a column, a component or a remark."""
    campaign = read(
        ASSAYS.replace("K2O", "K2O,Bin").replace("\nA,10,20", "\nA,10,20,east"),
        campaign='[editions.client]\nhide = ["N", "bin"]',
    )
    assert sentences(campaign) == []


def test_unreadable_settings() -> None:
    """A settings file beyond all measure is a problem, not an error."""
    for toml in (b"a = " + b"[" * 5000, b"a = " + b"9" * 5000, b"\xff\xfe\x00", b"a = 1\x00"):
        assert any(text.startswith("stops: campaign.toml") for text in sentences(read(campaign=toml))), toml[:10]


def test_shares_of_site_and_campaign_must_meet() -> None:
    """Share limits of the site and the campaign hold both; where they can't, that is told."""
    (sentence,) = sentences(
        read(campaign='[groups.g]\nlots = ["A"]\nshare = ">= 40"', site='[groups.g]\nlots = ["A"]\nshare = "<= 30"')
    )
    assert sentence == (
        "stops: campaign.toml, row 3, column groups.g.share: found '<= 30; >= 40': "
        "has its low bound above its high bound; "
        "make room between them"
    )


def test_delimiter_can_be_set() -> None:
    """A delimiter set by name or itself is obeyed."""
    for mark in ("tab", "\\t"):
        campaign = read("lot\tN\tK2O\nA\t1\t2\n", "order\tN\none\t<= 2\n", f'[csv]\ndelimiter = "{mark}"')
        assert sentences(campaign) == []
        assert len(campaign.lots) == 1
