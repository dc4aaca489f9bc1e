"""Drawer files in both forms, and what is said about those that cannot be used."""

import pytest

from livelag.bench.drawer import load_drawer
from livelag.bench.parts_search import find_parts
from livelag.bench.stock import Lot
from livelag.bench.wishes import wishes_from
from livelag.circuit.parts import Capacitor, Pot, Resistor, Taper
from livelag.circuit.presets import load_stage
from livelag.errors import FileError, LivelagError

TOML = """
[[resistor]]
value = "2k2"
quantity = 10
[[resistor]]
value = 4700
tolerance = 0.05
[[pot]]
value = "220k"
taper = "logarithmic"
end = "50"
[[capacitor]]
value = "1u"
kind = "polyester"
quantity = 2
[[capacitor]]
value = "10u"
kind = "bipolar electrolytic"
[[capacitor]]
value = "100u"
kind = "electrolytic"
"""
CSV = """part, value, kind, taper, tolerance, end, quantity
resistor, 2k2, , , , , 10
resistor, 4700, , , 0.05
pot, 220k, , logarithmic, , 50

capacitor, 1u, polyester, , , , 1
capacitor, 10u, bipolar electrolytic
capacitor, 100u, electrolytic
capacitor, 1u, polyester, , , , 1
"""
BOTH = pytest.mark.parametrize(("name", "text"), [("d.toml", TOML), ("d.csv", CSV)])


@pytest.fixture
def drawer(tmp_path):
    """Write a drawer file and load it."""

    def load(text, name="d.toml", **options):
        path = tmp_path / name
        path.write_text(text, encoding="utf-8")
        return load_drawer(path, **options)

    return load


@BOTH
def test_both_forms_say_the_same(drawer, name, text):
    pool = drawer(text, name)
    assert pool.resistors == (Lot(Resistor(2200.0), 10), Lot(Resistor(4700.0, 0.05), 1))
    assert pool.pots == (Lot(Pot(220e3, Taper.logarithmic(), 0.2, 50.0), 1),)
    assert pool.capacitors == (
        Lot(Capacitor("drawer", 1e-6, "polyester", 0.1), 2),
        Lot(Capacitor("drawer", 1e-5, "bipolar electrolytic", 0.2), 1),
    )
    assert pool.left_out == 1
    assert pool.tapers == ()


@BOTH
def test_polarised_parts_stay_where_the_voltage_cannot_reverse(drawer, name, text):
    kinds = [lot.part.kind for lot in drawer(text, name, can_reverse=False).capacitors]
    assert "electrolytic" in kinds


def test_kinds_and_taper_narrow_a_drawer(drawer):
    assert [lot.part.kind for lot in drawer(TOML, kinds=["polyester"]).capacitors] == ["polyester"]
    with pytest.raises(LivelagError, match="the drawer has no pot with a linear taper"):
        drawer(TOML, taper="linear")
    with pytest.raises(LivelagError, match="the drawer has no capacitor of c0g"):
        drawer(TOML, kinds=["c0g"])


def test_a_part_used_twice_counts_twice(drawer):
    """Two ranges of one and two microfarads: two of the first are needed, or a 2 uF part."""
    text = """
[[resistor]]
value = "1k"
[[pot]]
value = "100k"
[[capacitor]]
value = "1u"
kind = "polyester"
quantity = {}
[[capacitor]]
value = "3u3"
kind = "polyester"
"""
    wishes = wishes_from(1e-3, [0.0142], 0.202, overlap_ratio=50.5, within=3.0)
    base = load_stage("two-range-film")
    two = find_parts(wishes, drawer(text.format(2)), base).candidates[0]
    one = find_parts(wishes, drawer(text.format(1)), base).candidates[0]
    assert [part.capacitance_f for part in two.capacitors] == [1e-6, 1e-6]
    assert two.worst_log < 0.01
    assert sorted(part.capacitance_f for part in one.capacitors) == [1e-6, 3.3e-6]


@pytest.mark.parametrize(
    ("old", "new", "said"),
    [
        ('"polyester"', '"paper"', "capacitor[1].kind: unknown capacitor kind 'paper'"),
        ("quantity = 2", "quantity = 0", "capacitor[1].quantity is 0; it must be a whole number"),
        ("quantity = 2", "quantity = -3", "capacitor[1].quantity is -3; it must be a whole"),
        ("quantity = 2", "quantity = 1.5", "capacitor[1].quantity is 1.5; it must be a whole"),
        ("quantity = 2", "quantity = nan", "capacitor[1].quantity: nan is not a finite number"),
        ("quantity = 2", 'quantity = "two"', "capacitor[1].quantity: 'two' is not a value"),
        ("4700", "-4700", "resistor[2]: resistance is -4700.0; it must be a positive number"),
        ("4700", "nan", "resistor[2].value: nan is not a finite number"),
        ("0.05", "5", "resistor[2]: tolerance is 5.0; it must be a fraction"),
        ('"logarithmic"', '"audio"', "pot[1].taper: unknown taper 'audio'"),
        ('"50"', '"1M"', "pot[1]: pot end resistance is 1000000.0"),
        ("[[pot]]", "[[knob]]", "knob is not a known key; known: resistor, pot, capacitor"),
        ('end = "50"', 'colour = "red"', "pot[1].colour is not a known key"),
        ('value = "220k"', "", "pot[1].value is missing"),
        ("[[pot]]", "[[pot]", "not TOML"),
    ],
)
def test_a_drawer_in_toml_that_cannot_be_used(drawer, tmp_path, old, new, said):
    assert old in TOML
    with pytest.raises(LivelagError) as caught:
        drawer(TOML.replace(old, new, 1))
    assert str(caught.value).startswith(f"{tmp_path / 'd.toml'}: ")
    assert said in str(caught.value)
    assert "\n" not in str(caught.value)


@pytest.mark.parametrize(
    ("text", "said"),
    [
        ("", "line 1 is ''; it must name the columns"),
        ("part,value,price\n", "line 1: unknown column 'price'"),
        ("part,part,value\n", "line 1 is 'part,part,value'"),
        ("part,kind\n", "line 1 is 'part,kind'; it must name the columns"),
        ("part,value\nvalve,1k\n", "line 2.part: unknown part 'valve'"),
        ("part,value\nresistor,\n", "line 2.value is missing"),
        ("part,value\n\nresistor,1k,red\n", "line 3 has 3 cells; there are 2 columns"),
        ("part,value,taper\nresistor,1k,linear\n", "line 2.taper is not a known key"),
        ("part,value,quantity\nresistor,1k,0\n", "line 2.quantity is 0; it must be a whole"),
        ('part,value\nresistor,"1k\n', "not CSV"),
        ("part,value\n", "the drawer has no resistor"),
        ("part,value\nresistor,1k\n", "the drawer has no pot"),
        ("part,value\nresistor,1k\npot,100k\n", "the drawer has no capacitor"),
        (
            "part,value,kind\nresistor,1k,\npot,100k,\ncapacitor,1u,tantalum\n",
            "no capacitor that may be reversed (polarised ones are left out",
        ),
    ],
)
def test_a_drawer_in_csv_that_cannot_be_used(drawer, text, said):
    with pytest.raises(LivelagError) as caught:
        drawer(text, "d.csv")
    assert said in str(caught.value)
    assert "\n" not in str(caught.value)


def test_files_that_are_no_drawers(drawer, tmp_path):
    with pytest.raises(LivelagError, match=r"the drawer has no resistor"):
        drawer("")
    with pytest.raises(LivelagError, match=r"unknown drawer suffix '.txt'"):
        drawer(CSV, "d.txt")
    with pytest.raises(FileError, match="cannot be read"):
        load_drawer(tmp_path / "none.csv")
    (tmp_path / "b.csv").write_bytes(b"\xff\xfe")
    with pytest.raises(LivelagError, match="UTF-8"):
        load_drawer(tmp_path / "b.csv")
    long = "part,value\n" + "resistor,1k\n" * 1001
    with pytest.raises(LivelagError, match="has 1001 lots; 1000 is the most"):
        drawer(long, "d.csv")
