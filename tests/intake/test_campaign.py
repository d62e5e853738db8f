"""Lots, orders and what only the whole campaign shows."""

from __future__ import annotations

import datetime
from fractions import Fraction

import pytest

from generator.intake.campaign import INPUT_NAMES, input_name, read_campaign
from generator.intake.patterns import matches
from generator.intake.records import Lot, Place, Reading
from tests.intake.make import ASSAYS, TARGETS, read, sentences, told, values

F = Fraction


def test_a_plain_campaign() -> None:
    """Lots and orders come out with exact values, texts and places."""
    campaign = read("lot,N,stock\nA,0.1,unlimited\nB,30,0\n", "order,amount,N\none,10..20,<= 0.3\n")
    assert sentences(campaign) == []
    a, b = campaign.lots
    assert a.assay["N"].readings == (Reading(F(1, 10), "0.1", Place("assays.csv", 2, "N")),)
    assert (a.is_unlimited, a.stock) == (True, None)
    assert b.stock is not None
    assert (b.is_unlimited, b.stock.value, b.stock.text) == (False, F(0), "0")
    (order,) = campaign.orders
    assert order.amount is not None
    assert (order.amount.low, order.amount.high, order.amount.text) == (F(10), F(20), "10..20")
    assert (order.limits["N"].high, order.limits["N"].text) == (F(3, 10), "<= 0.3")
    assert order.limits["N"].place == Place("targets.csv", 2, "N")
    assert (campaign.slug, campaign.folder, campaign.settings.title) == ("spring", "Spring", "Spring")


def test_every_lot_column() -> None:
    """Every known column of lots is read."""
    campaign = read(
        "lot,N,cost,material,supplier,place,load order,alias,min share,max share,least if used,weigh step,"
        "sampled,available,"
        "moisture,LOI,density,molar mass,Remark\n"
        "A,1,-3.5,urea; prilled,Acme,Bay 3,2,Lot one,5,60 %,10,0.5,2024-01-02,2024-03-04,2.5,40,1.6,60.06,dusty\n",
        "order,N\none,<= 2\n",
        'basis = "dry"',
    )
    assert sentences(campaign) == []
    (lot,) = campaign.lots
    texts = (lot.supplier, lot.location, lot.load_order, lot.alias, lot.materials, lot.remarks)
    assert texts == ("Acme", "Bay 3", "2", "Lot one", ("urea", "prilled"), {"Remark": "dusty"})
    numbers = (lot.cost, lot.min_share, lot.max_share, lot.least_if_used, lot.weigh_step)
    assert [number and number.value for number in numbers] == [F("-3.5"), F("0.05"), F("0.6"), F("0.1"), F("0.5")]
    carriers = (lot.moisture, lot.loi, lot.density, lot.molar_mass)
    assert [number and number.value for number in carriers] == [F("2.5"), F(40), F("1.6"), F("60.06")]
    assert (lot.sampled, lot.available) == (datetime.date(2024, 1, 2), datetime.date(2024, 3, 4))


def test_every_order_column() -> None:
    """Every known column of orders is read."""
    campaign = read(
        targets="order,amount,price,priority,due,client,accept,only lots,without lots,N min,N max,N aim,Remark\n"
        "one,<= 500,12.5,2,2024-05-06,Acme,part,a*; B,b,5,15,11,urgent\n"
        "two,,,,,,,,,,,,\n"
    )
    assert sentences(campaign) == []
    one, two = campaign.orders
    assert one.amount is not None
    assert (one.amount.low, one.amount.high) == (None, F(500))
    assert one.price is not None
    assert (one.price.value, one.priority, one.due) == (F("12.5"), 2, datetime.date(2024, 5, 6))
    assert (one.client, one.accept, one.only_lots, one.without_lots) == ("Acme", "part", ("a*", "B"), ("b",))
    limit = one.limits["N"]
    assert (limit.low, limit.high, limit.aim, limit.text) == (F(5), F(15), F(11), "min 5, max 15, aim 11")
    assert one.remarks == {"Remark": "urgent"}
    assert (two.amount, two.priority, two.accept, two.limits) == (None, 1, "whole", {})


def test_missing_files_stop() -> None:
    """Without assays or targets there is nothing to answer."""
    campaign = read_campaign({}, slug="s", folder="S")
    assert sentences(campaign) == [
        "stops: assays.csv: is missing; add assays.csv to the campaign's folder",
        "stops: targets.csv: is missing; add targets.csv to the campaign's folder",
    ]
    assert campaign.is_stopped


def test_input_names() -> None:
    """Names are matched with case ignored; lock and temporary files are no input."""
    assert [input_name(name.upper()) for name in INPUT_NAMES] == list(INPUT_NAMES)
    for name in (
        "~$assays.csv",
        ".~lock.assays.csv#",
        "assays.csv~",
        "assays.csv.tmp",
        "Assays (1).csv",
        "history",
        "",
    ):
        assert input_name(name) is None


def test_units_convert_between_files() -> None:
    """Units of one kind convert exactly between headers, files, cells and settings."""
    campaign = read(
        "lot,S [ppm],S sd,N\nA,1500,20,1\nB,0.2 %,30,1\n",
        "order,S [g/kg]\none,<= 1.7\ntwo,max 0.18 %\n",
        '[components.S]\nunit = "%"',
    )
    assert sentences(campaign) == []
    assert values(campaign) == {"A": {"S": F("0.15"), "N": F(1)}, "B": {"S": F("0.2"), "N": F(1)}}
    assert [sd.value for sd in campaign.lots[0].assay["S"].sds] == [F("0.002")]
    assert [order.limits["S"].high for order in campaign.orders] == [F("0.17"), F("0.18")]
    assert "assays.csv 1: column S [ppm]: converted from ppm to %" in told(campaign)


def test_row_of_units() -> None:
    """A row of units gives the columns their units."""
    campaign = read("lot,N,S,stock,cost,place\nUnits,%,g/t,t,€/t,\nA,10,1500,5,7,bay\n", "order,S\n,[%]\none,<= 0.2\n")
    assert sentences(campaign) == []
    assert [(c.name, c.unit) for c in campaign.components] == [("N", "%"), ("S", "g/t")]
    assert campaign.orders[0].limits["S"].high == F(2000)
    (clash,) = sentences(read("lot,N [%],K2O\n,ppm,%\nA,1,2\n"))
    assert clash == (
        "stops: assays.csv, row 2, column N [%]: found 'ppm': differs from the unit % in the header; "
        "write %, or leave one of them out"
    )


@pytest.mark.parametrize(
    "assays, targets, campaign, sentence",
    [
        (
            "lot,S [MJ/kg]\nA,1\n",
            "order,S [%]\none,<= 2\n",
            "",
            "stops: targets.csv, row 2, column S [%]: found '%': is in %, and S is in MJ/kg; "
            "write the limits in one unit with the values, or declare the unit of S in campaign.toml",
        ),
        (
            "lot,S [MJ/kg]\nA,1\n",
            "order,S\none,<= 2\n",
            '[components.S]\nunit = "%"',
            "stops: assays.csv, row 2, column S [MJ/kg]: found 'MJ/kg': is in MJ/kg, and S is in %; "
            'write the values in one unit, or declare unit under [components."S"] in campaign.toml',
        ),
        (
            "lot,S,stock [kg]\nA,1,5\n",
            "order,S\none,<= 2\n",
            "",
            "stops: assays.csv, row 2, column stock [kg]: found 'kg': is in kg, and t is wanted; "
            "write the values in t, or change quantity_unit or currency in campaign.toml",
        ),
        (
            "lot,S,cost [USD/t]\nA,1,5\n",
            "order,S\none,<= 2\n",
            "",
            "stops: assays.csv, row 2, column cost [USD/t]: found 'USD/t': is in USD/t, and EUR/t is wanted; "
            "write the values in EUR/t, or change quantity_unit or currency in campaign.toml",
        ),
        (
            "lot,S\nA,1\n",
            "order,S,amount [kg]\none,<= 2,5\n",
            "",
            "stops: targets.csv, row 2, column amount [kg]: found 'kg': is in kg, and quantity_unit is t; "
            "write the amounts in t, or change quantity_unit in campaign.toml",
        ),
    ],
)
def test_unit_mismatches_stop(assays: str, targets: str, campaign: str, sentence: str) -> None:
    """Units that don't convert are a problem, never taken as they are."""
    assert sentence in sentences(read(assays, targets, campaign))


def test_stock_is_joined_by_lot() -> None:
    """stock.csv adds its columns to the lots of assays.csv; what is in one file only is told."""
    campaign = read(
        "lot,N\nA,1\nB,2\nC,3\nD,4\n",
        "order,N\none,<= 5\n",
        stock="lot,stock,cost,place,Silo\nA,10,5,bay,7\nb2,3,,,\nC,0,,,\nD,,,,\n",
    )
    assert [(lot.name, lot.stock and lot.stock.value) for lot in campaign.lots] == [("A", F(10)), ("C", F(0))]
    assert (campaign.lots[0].location, campaign.lots[0].remarks) == ("bay", {"Silo": "7"})
    assert sentences(campaign) == [
        'drops: stock.csv, column stock: lot B: has no row with a stock; write the amount, 0 for none, or "unlimited"',
        "note: stock.csv, row 3: found 'b2': has no row in assays.csv: left out; did you mean \"B\"?",
        "drops: stock.csv, row 5, column stock: found '': lot D: the stock is blank; "
        'write the amount, 0 for none, or "unlimited"',
    ]


def test_stock_without_amounts() -> None:
    """A stock.csv that gives only places leaves stock unchecked, and a lot that it lacks is told; "no" holds a lot."""
    campaign = read("lot,N\nA,1\nB,2\nC,3\n", "order,N\none,<= 5\n", stock="lot,place,use\nA,bay,\nC,quay,no\n")
    assert sentences(campaign) == ["note: stock.csv, column lot: found 'B': has no row in stock.csv; add its row"]
    assert not campaign.has_stock
    assert [lot.name for lot in campaign.lots] == ["A", "B"]


def test_replicates_of_a_limited_carrier() -> None:
    """Moisture that is limited keeps every reading and its standard deviations; a bad cell is told once."""
    campaign = read(
        "lot,N,moisture,moisture sd\nA,1,5,0.1\nA,2,6,0.2\nB,1,120,\n", "order,moisture\none,<= 5.5\n", 'basis = "dry"'
    )
    measured = campaign.lots[0].assay["moisture"]
    assert [reading.value for reading in measured.readings] == [F(5), F(6)]
    assert [sd.value for sd in measured.sds] == [F("0.1"), F("0.2")]
    assert sentences(campaign) == [
        "drops: assays.csv, row 4, column moisture: found '120': is out of range; "
        "write a number at least 0 and below 100"
    ]


def test_files_must_agree() -> None:
    """The same column in both files may not differ; equal numbers typed otherwise agree."""
    campaign = read("lot,N,cost,K2O\nA,1,5.0,3\nB,2,6,4\n", TARGETS, stock="lot,cost,K2O,stock\nA,5,3,1\nB,7,5,1\n")
    assert sentences(campaign) == [
        "drops: stock.csv, row 3, column K2O: found '5': differs from \"4\" in assays.csv, row 3; "
        "write the same in both",
        "drops: stock.csv, row 3, column cost: found '7': differs from \"6\" in assays.csv, row 3; "
        "write the same in both",
    ]
    assert [len(lot.assay["K2O"].readings) for lot in campaign.lots] == [1]


def test_replicates_are_gathered() -> None:
    """Rows of one lot are readings of its components; other columns must agree, blanks aside."""
    campaign = read(
        "lot,N,N sd,K2O,cost,moisture,Run\nA,10,0.1,20,5,4,r1\nA,10.5,0.2,<1,,5,r2\nA,,,21,5,,\n"
        "B,1,,2,7,1,\nB,1,,2,8,1,\n",
        campaign='basis = "dry"',
    )
    a = campaign.lots[0].assay
    assert [reading.value for reading in a["N"].readings] == [F(10), F("10.5")]
    assert [(reading.value, reading.below) for reading in a["K2O"].readings] == [(20, False), (1, True), (21, False)]
    assert [sd.value for sd in a["N"].sds] == [F("0.1"), F("0.2")]
    assert campaign.lots[0].moisture is not None
    assert (campaign.lots[0].moisture.value, campaign.lots[0].moisture.text) == (F("4.5"), "4; 5")
    assert campaign.lots[0].remarks == {"Run": "r1; r2"}
    assert sentences(campaign) == [
        "drops: assays.csv, row 6, column cost: found '8': differs from \"7\" in assays.csv, row 5; "
        "write the same in both"
    ]
    assert "assays.csv 2: lot A: 3 rows, values averaged" in told(campaign)


def test_held_rows_and_done_orders_are_listed() -> None:
    """Rows with use "no" and orders that are done are left out and told."""
    campaign = read(
        "lot,N,use\nA,10,no\nA,11,yes\nB,30,NO\nC,5,\nD,6,maybe\n",
        "order,N,state\none,<= 9,done\ntwo,<= 9,Open\nthree,<= 9,shut\n",
    )
    assert values(campaign) == {"A": {"N": F(11)}, "C": {"N": F(5)}}
    assert [order.name for order in campaign.orders] == ["two"]
    assert "assays.csv 2: lot A: use is no, left out" in told(campaign)
    assert "assays.csv 4: lot B: use is no, left out" in told(campaign)
    assert "targets.csv 2: order one: state is done, left out" in told(campaign)
    assert sentences(campaign) == [
        "drops: assays.csv, row 6, column use: found 'maybe': is neither yes nor no; "
        'write "no" to leave the row out, else "yes" or nothing',
        "drops: targets.csv, row 4, column state: found 'shut': is not known; write open or done",
    ]


def test_not_measured_is_never_zero_unless_said() -> None:
    """A blank leaves the component out of the lot's assay, or is 0 where the component says so."""
    assays = "lot,N,K2O\nA,10,\nB,30,n/a\nC,3,-\nD,,4\n"
    assert [list(lot.assay) for lot in read(assays).lots] == [["N"], ["N"], ["N"], ["K2O"]]
    zero = read(assays, campaign='[components.K2O]\nblank = "zero"')
    assert [list(lot.assay) for lot in zero.lots] == [["N", "K2O"], ["N", "K2O"], ["N", "K2O"], ["K2O"]]
    assert zero.lots[0].assay["K2O"].readings == (Reading(F(0), ""),)
    assert "assays.csv 1: column K2O: a blank counts as 0 (1 lot)" in told(zero)


def test_spreads_without_their_column_are_told() -> None:
    """A column of standard deviations of nothing is told."""
    assert sentences(read("lot,N,K2O,P sd\nA,10,20,1\n")) == [
        "note: assays.csv, row 1, column P sd: there is no column P beside it; add it, or leave this one out"
    ]


def test_a_declared_component_without_a_column_is_told() -> None:
    """Settings of a component that is not measured are a note; those of a lookalike stop."""
    campaign = read(campaign="[components.P]\nsd = 1\n[components.K20]\nsd = 2", site="[components.Zn]\nsd = 1")
    assert sentences(campaign) == [
        "note: campaign.toml, row 1, column components.P: found 'P': is no column of assays.csv; "
        "add the column, or leave this table out",
        "stops: campaign.toml, row 3, column components.K20: found 'K20': is no column of assays.csv; "
        'did you mean "K2O"?',
    ]


def test_columns_of_text_are_remarks() -> None:
    """A column that is not numbers and that nothing names is kept as a remark, and told."""
    campaign = read("lot,N,K2O,Colour\nA,10,20,grey\nB,30,5,7\n")
    assert [lot.remarks for lot in campaign.lots] == [{"Colour": "grey"}, {"Colour": "7"}]
    assert "assays.csv 1: column Colour: not numbers, kept as a remark" in told(campaign)


def test_a_slip_in_a_limited_column_is_a_problem() -> None:
    """A cell that is no number does not turn a limited column into a remark."""
    campaign = read("lot,N,K2O\nA,10,12.5o\nB,30,5\n")
    assert sentences(campaign) == ["drops: assays.csv, row 2, column K2O: found '12.5o': is not a number; write 12.5"]


@pytest.mark.parametrize(
    "assays, sentence",
    [
        ("lot,N,K2O\nA,1,ND\n", 'found \'ND\': may mean "not detected" or "not determined"; write "<0.01" with the '),
        ("lot,N,K2O\nA,1,>5\n", "found '>5': says only that the value is greater; write the measured value, or "),
        ("lot,N,K2O\nA,1,#REF!\n", "found '#REF!': is an error of a spreadsheet; mend its formula, or "),
        (
            "lot,N,K2O\nA,1,<0\n",
            "found '<0': is below a detection limit that is not above 0; write the detection limit",
        ),
        ("lot,N,K2O [%]\nA,1,101\n", "found '101': is outside 0 to 100 percent; write the measured value"),
        ("lot,N,K2O [ppm]\nA,1,-1\n", "found '-1': is outside 0 to 100 percent; write the measured value"),
        ("lot,N,K2O,stock\nA,1,1,-1\n", "found '-1': is out of range; write a number at least 0"),
        ("lot,N,K2O,stock\nA,1,1,much\n", "found 'much': is not a number; write a number"),
        (
            "lot,N,K2O,stock\nA,1,1,\n",
            "found '': lot A: the stock is blank; write the amount, 0 for none, or \"unlimited\"",
        ),
        ("lot,N,K2O,moisture\nA,1,1,100\n", "found '100': is out of range; write a number at least 0 and below 100"),
        ("lot,N,K2O,LOI\nA,1,1,-1\n", "found '-1': is out of range; write a number at least 0 and below 100"),
        ("lot,N,K2O,density\nA,1,1,0\n", "found '0': is out of range; write a number above 0"),
        ("lot,N,K2O,molar mass\nA,1,1,0\n", "found '0': is out of range; write a number above 0"),
        ("lot,N,N sd,K2O\nA,1,-1,1\n", "found '-1': is out of range; write a number at least 0"),
        ("lot,N,K2O,max share\nA,1,1,101\n", "found '101': is out of range; write a number at least 0 and at most 100"),
        (
            "lot,N,K2O,min share,max share\nA,1,1,9,8\n",
            "found '9': the least share is above the greatest; write at most 8",
        ),
        ("lot,N,K2O,weigh step\nA,1,1,0\n", "found '0': is out of range; write a number above 0"),
        (
            "lot,N,K2O,sampled\nA,1,1,01/02/2024\n",
            "found '01/02/2024': could be day or month first; write it as 2024-12-31, or ",
        ),
        ("lot,N,K2O,sampled\nA,1,1,soon\n", "found 'soon': is not a date; write it as year-month-day: 2024-12-31"),
        ("lot,N,K2O\nA,,\n", "found 'A': the row holds nothing but a name; fill in its cells, or delete the row"),
    ],
)
def test_a_bad_cell_drops_its_lot(assays: str, sentence: str) -> None:
    """A cell that can't be right leaves out its lot and no other, and says what to write."""
    extra = assays.split("\n")[0].count(",") - 2
    campaign = read(
        assays + "Z,1,1" + ",5" * extra + "\n", campaign='basis = "dry"\nquantity_basis = "dry"\n[csv]\ndecimal = "."'
    )
    found = [text for text in sentences(campaign) if text.startswith("drops: assays.csv, row 2") and sentence in text]
    assert len(found) == 1, sentences(campaign)
    assert "A" not in [lot.name for lot in campaign.lots]


@pytest.mark.parametrize(
    "header, cell, sentence",
    [
        ("N", "8-Oct", "is a date: a spreadsheet may have made it of a range such as 8-10; write the range with "),
        ("N", "13 - 12", "has its low bound above its high bound; write 12 - 13"),
        ("N min", "x5", "is not a number; write 5"),
        ("N", "<= 130", "is a limit outside 0 to 100 percent; write the limit that is meant"),
        ("heap", "<= 130", "is a share outside 0 to 100 percent; write the limit that is meant"),
        ("Zn", "<= 1", "no lot reports Zn; add its values to assays.csv, or take the limit away"),
        ("amount", "-5", "is not an amount above 0; write the amount that is wanted"),
        ("amount", "lots", 'is not an amount; write a number, or a range such as "<= 500" or "100..500"'),
        ("priority", "1.5", "is no whole number; write 1, 2, 3 and so on"),
        ("priority", "0", "is out of range; write a number at least 1"),
        ("accept", "half", "is not known; write whole or part"),
        ("due", "1/2/2024", 'could be day or month first; write it as 2024-12-31, or set [csv] dates = "DMY"'),
        ("only lots", "A; Q*", '"Q*" matches no lot and no material; write a lot\'s name, a material or a wildcard'),
        ("without lots", "urae", '"urae" matches no lot and no material; did you mean "urea"?'),
    ],
)
def test_a_bad_cell_drops_its_order(header: str, cell: str, sentence: str) -> None:
    """A cell that can't be right leaves out its order and no other."""
    campaign = read(
        "lot,N [%],material,Zn\nA,10,urea,\nB,30,map,n/a\n",
        f'order,{header}\none,"{cell}"\ntwo,\n',
        '[groups.heap]\nlots = ["A"]\n[components.Zn]\nunit = "%"',
    )
    (found,) = sentences(campaign)
    assert found.startswith(f"drops: targets.csv, row 2, column {header}: found {cell!r}: {sentence}")
    assert [order.name for order in campaign.orders] == ["two"]


def test_min_above_max_and_two_ways_at_once() -> None:
    """A pair that crosses, and a limit given twice, are problems."""
    assert sentences(read(targets="order,N,N min,N max\none,,5,4\ntwo,3,,4\n")) == [
        "drops: targets.csv, row 2, column N min: found '5': is above the high bound; "
        "write a low bound that is not above the high one",
        "drops: targets.csv, row 3, column N max: found '4': N has a limit in its own column too; "
        "leave one of the two blank",
    ]


def test_orders_are_unique() -> None:
    """A second order of one name is a problem, and the first is kept."""
    campaign = read(targets="order,N\none,<= 15\none,<= 16\n")
    assert sentences(campaign) == [
        "drops: targets.csv, row 3: found 'one': is a second order of this name, beside row 2; give it "
        "a name of its own"
    ]
    assert [order.limits["N"].text for order in campaign.orders] == ["<= 15"]


def test_unknown_limit_columns() -> None:
    """A column of limits that names nothing stops; a column of text is a remark."""
    campaign = read(targets="order,K20,Carrier\none,<= 5,by ship\n")
    assert sentences(campaign) == [
        "stops: targets.csv, row 1, column K20: found 'K20': names no component, derived quantity or group; "
        'did you mean "K2O"?'
    ]
    assert campaign.orders[0].remarks == {"Carrier": "by ship"}


def test_moisture_without_a_basis_stops() -> None:
    """A moisture column with no declared basis would make the answer silently wrong."""
    assays = "lot,N,K2O,moisture\nA,10,20,5\nB,30,5,6\n"
    assert sentences(read(assays)) == [
        "stops: assays.csv, row 1, column moisture: there is a moisture column, and no basis is declared for N, K2O; "
        'write basis = "as received" or basis = "dry" in campaign.toml'
    ]
    assert sentences(read(assays, campaign='basis = "as received"')) == []
    assert (
        sentences(read(assays, campaign='[components.N]\nbasis = "dry"\n[components.K2O]\nbasis = "as received"')) == []
    )


def test_bases_need_their_carriers() -> None:
    """A lot without the carrier that a basis needs is left out; without the column the campaign stops."""
    blank = read(
        "lot,N,K2O,moisture\nA,10,20,5\nB,30,5,\nC,,5,\n",
        campaign='basis = "as received"\n[components.N]\nbasis = "dry"',
    )
    assert sentences(blank) == [
        "drops: assays.csv, row 3, column moisture: found '': lot B has no moisture, which the basis of N needs; "
        "write the lot's moisture"
    ]
    assert [lot.name for lot in blank.lots] == ["A", "C"]
    for basis, carrier in (("dry", "moisture"), ("volume", "density"), ("mole", "molar mass")):
        (sentence,) = sentences(read(campaign=f'[components.N]\nbasis = "{basis}"'))
        assert sentence == (
            f"stops: assays.csv, row 1: N is on basis {basis}, which needs a {carrier} column: there is none; "
            f"add the column {carrier}, or declare another basis in campaign.toml"
        )
    assert sentences(read(campaign='basis = "dry"\nquantity_basis = "dry"')) == []


def test_a_limited_carrier_is_a_component() -> None:
    """Moisture that an order limits is a component on the basis as received, and stays the lot's carrier."""
    campaign = read(
        "lot,N,moisture,LOI,density\nA,10,5,2,1.5\nB,30,50 g,3,1.6\n".replace("50 g", "6"),
        "order,moisture,loi,density\none,<= 5.5,<= 3,>= 1\n",
        'basis = "dry"',
    )
    assert sentences(campaign) == []
    shown = [(c.name, c.unit, c.basis, c.limit_basis, c.rule) for c in campaign.components]
    assert shown == [
        ("N", "", "dry", "dry", "linear"),
        ("moisture", "%", "as received", "as received", "linear"),
        ("LOI", "%", "dry", "dry", "linear"),
        ("density", "", "as received", "as received", "harmonic"),
    ]
    assert values(campaign)["B"] == {"N": F(30), "moisture": F(6), "LOI": F(3), "density": F("1.6")}
    assert campaign.lots[1].moisture is not None
    assert list(campaign.orders[0].limits) == ["moisture", "LOI", "density"]


def test_groups() -> None:
    """A group holds the lots that its patterns name, by lot or material, and may be limited by a column."""
    campaign = read(
        "lot,N,material\nscrap 1,1,\nB,2,Old Scrap; x\nC,3,new\n",
        "order,N,recycled\none,<= 9,max 30\ntwo,<= 9,10..20 %\n",
        '[groups.recycled]\nlots = ["SCRAP*", "old*"]\nshare = "<= 40 %"',
    )
    assert sentences(campaign) == []
    (group,) = campaign.groups
    assert (group.name, group.lots, group.unit) == ("recycled", ("scrap 1", "B"), "%")
    assert group.share is not None
    assert (group.share.low, group.share.high) == (None, F(40))
    one, two = (order.limits["recycled"] for order in campaign.orders)
    assert (one.low, one.high, two.low, two.high) == (None, F(30), F(10), F(20))


def test_patterns() -> None:
    """Patterns ignore case and match the name or a material; brackets in a name match themselves."""
    lot = Lot(name="Urea [46]", place=Place("assays.csv", 2, None), assay={}, materials=("Ammonium nitrate",))
    assert all(matches(pattern, lot) for pattern in ("urea*", "UREA [46]", "ammonium NITRATE", "amm*", "*"))
    assert not any(matches(pattern, lot) for pattern in ("urea", "nitrate", "*47*"))


def test_held_lots_still_match() -> None:
    """A pattern that names only a lot on hold is no slip."""
    campaign = read("lot,N,K2O,use\nA,1,5,\nB,2,5,no\n", campaign='[house]\nkeep_apart = [["A", "B"]]')
    assert sentences(campaign) == []


def test_whole_is_checked() -> None:
    """Lots whose components miss the whole are told."""
    assert sentences(read("lot,N,K2O\nA,60,40\nB,60,30\n", campaign='[whole]\ncomponents = ["N", "K2O"]')) == [
        "note: assays.csv, row 3: found 'B': N + K2O is 90, and the whole is 100; check its values"
    ]


def test_aliases_are_told_apart() -> None:
    """Two lots with one alias are told: clients could not tell them apart."""
    assert sentences(read("lot,N,K2O,alias\nA,1,4,x\nB,2,5,X\n")) == [
        "note: assays.csv, row 3, column alias: found 'X': is the alias of lot A too; give each lot an alias of its own"
    ]


def test_no_lot_left_stops() -> None:
    """A campaign without lots has no answers."""
    assert "stops: assays.csv: no lot is left to blend; write at least one lot that can be used" in sentences(
        read("lot,N,K2O\n")
    )


def test_no_orders_is_told() -> None:
    """A campaign without orders still shows its lots."""
    campaign = read(targets="order,N\n")
    assert sentences(campaign) == ["note: targets.csv: holds no orders; write one row for each order"]
    assert len(campaign.lots) == 2


def test_notes_are_text() -> None:
    """notes.md is read in any encoding, with plain line ends."""
    assert read(notes=b"# a\r\nb\n").notes == "# a\nb\n"
    assert read(notes="é".encode("utf-16")).notes == "é"
    spoiled = read(ASSAYS, notes=b"a\0b")
    assert (spoiled.notes, spoiled.is_stopped) == ("", False)


def test_dates_can_be_told() -> None:
    """The setting for dates decides day and month."""
    for order, month in (("DMY", 2), ("mm/dd/yyyy", 1)):
        lot = read("lot,N,K2O,available\nA,1,5,01.02.2024\n", campaign=f'[csv]\ndates = "{order}"').lots[0]
        assert lot.available is not None
        assert lot.available.month == month


def test_dates_tell_their_order() -> None:
    """One date that can be read in one order only decides for the whole file, and is told."""
    campaign = read("lot,N,K2O,available,sampled\nA,1,5,1/2/2024,\nB,1,5,,28/1/2024\n")
    assert campaign.lots[0].available == datetime.date(2024, 2, 1)
    assert sentences(campaign) == []
    assert "dates in figures are read as day, month, year" in [entry.what for entry in campaign.read]


def test_names_are_compared_in_compatibility_form() -> None:
    """K₂O, k2o and K2O are one name; µ and μ too."""
    campaign = read("lot,K₂O,µ\nA,1,2\n", "order,k2o,μ\none,<= 1,<= 2\n")
    assert sentences(campaign) == []
    assert list(campaign.orders[0].limits) == ["K₂O", "µ"]
