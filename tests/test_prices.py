"""Price lists: what they answer, and one clear message for each fault of a list of the user's own."""

from pathlib import Path

import pytest

from farvolt import price_file
from farvolt.conductors import parse_size
from farvolt.errors import PriceListError
from farvolt.prices import PriceList, Reel

HEAD = "item,size,material,strand,type,rating_A,stud,per,reel_m,price,currency\n"
FOUR = parse_size("4 mm2")


def listed(*rows: str, head: str = HEAD) -> PriceList:
    """A price list of some rows."""
    return price_file.parse((head + "\n".join(rows) + "\n").encode())


def message(text: str | bytes) -> str:
    """What is said of a list that cannot be used."""
    with pytest.raises(PriceListError) as caught:
        price_file.parse(text if isinstance(text, bytes) else text.encode(), "own.csv")
    return str(caught.value)


def test_cable_by_the_metre_and_on_reels() -> None:
    """By hand: 9 / 10 m is less than 1.00 a metre; the reels come shortest first."""
    prices = listed("cable,4 mm2,copper,,,,,reel,25,30,EUR", "cable,4mm²,copper,,,,,reel,10,9,EUR",
                    "cable,4 mm2,copper,,,,,m,,1,EUR")  # fmt: skip
    assert prices.reels(FOUR, "copper", "flexible") == (Reel(10, 9), Reel(25, 30))
    assert prices.cable_by_the_metre(FOUR, "copper", "solid") == 1
    assert prices.cable_per_m(FOUR, "copper", "flexible") == pytest.approx(0.9)


def test_what_the_list_does_not_have_has_no_price() -> None:
    """Another material, size, type or stud is not guessed from its neighbour."""
    prices = listed("cable,4 mm2,copper,,,,,m,,1,EUR", "lug,4 mm2,,,,,M8,piece,,0.5,EUR",
                    "protection,,,,blade,10,,piece,,0.3,EUR")  # fmt: skip
    assert prices.cable_per_m(FOUR, "tinned copper", "flexible") is None
    assert prices.cable_per_m(parse_size("6 mm2"), "copper", "flexible") is None
    assert prices.reels(FOUR, "copper", "flexible") == ()
    assert (prices.lug(FOUR, "M8"), prices.lug(FOUR, "M6"), prices.lug(FOUR, None)) == (0.5, None, None)
    assert (prices.protection("Blade", 10), prices.protection("blade", 15)) == (0.3, None)
    assert prices.heat_shrink_per_m(FOUR) is prices.label() is prices.holder("blade", 10) is None


def test_the_closest_row_is_taken() -> None:
    """An empty cell means any; a row that says more goes before one that says less."""
    prices = listed("lug,4 mm2,,,,,,piece,,0.5,EUR", "lug,4 mm2,,,,,5/16,piece,,0.9,EUR",
                    "cable,4 mm2,,,,,,m,,1,EUR", "cable,4 mm2,copper,solid,,,,m,,2,EUR")  # fmt: skip
    assert (prices.lug(FOUR, "5/16 in"), prices.lug(FOUR, "M8"), prices.lug(FOUR, None)) == (0.9, 0.5, 0.5)
    assert prices.cable_by_the_metre(FOUR, "copper", "solid") == 2
    assert prices.cable_by_the_metre(FOUR, "aluminium", "solid") == 1


def test_a_device_is_the_smallest_listed_that_is_enough() -> None:
    """150 A takes the 200 A switch; above the largest, and without a rating, there is no price."""
    prices = listed("device,,,,switch,100,,piece,,19,EUR", "device,,,,switch,200,,piece,,28,EUR")
    assert [prices.device("switch", amps) for amps in (80, 100, 150, 250, None)] == [19, 19, 28, None, None]


def test_the_list_shipped_says_that_it_is_invented() -> None:
    """In the file, and in what is shown beside its prices."""
    prices = price_file.example()
    assert price_file.example_text().startswith("# Invented prices")
    assert prices.about.startswith("Invented prices")
    assert prices.cable_per_m(FOUR, "copper", "flexible")
    assert prices.reels(FOUR, "tinned copper", "stranded")


def test_a_longer_reel_of_the_list_shipped_is_cheaper_by_the_metre() -> None:
    """What an invented list should have at least: its figures in the order of a shop's."""
    prices = price_file.example()
    for name in ("1.5 mm2", "4 mm2", "50 mm2", "10 AWG", "2/0 AWG"):
        reels = prices.reels(parse_size(name), "copper", "flexible")
        rates = [(reel.price or 0) / reel.length_m for reel in reels]
        assert rates == sorted(rates, reverse=True)
        assert [reel.price for reel in reels] == sorted(reel.price or 0 for reel in reels)


@pytest.mark.parametrize("mark", [",", ";", "\t"])
def test_columns_may_be_parted_by_semicolons_or_tabs(mark: str) -> None:
    """As spreadsheets of different languages save them, with or without a byte-order mark."""
    text = (HEAD + "label,,,,,,,piece,,0.5,EUR\n").replace(",", mark)
    assert price_file.parse(text.encode("utf-8-sig")).label() == 0.5


@pytest.mark.parametrize(
    ("row", "said"),
    [
        ("cabel,4 mm2,,,,,,m,,1,EUR", ("row 3, item", '"cabel"', "accepted: cable", 'did you mean "')),
        ("cable,5 mm2,,,,,,m,,1,EUR", ("row 3, size", "5 mm2", 'did you mean "6 mm2"')),
        ("cable,,,,,,,m,,1,EUR", ("row 3, size: is empty", '"6 mm2"')),
        ("cable,4 mm2,coper,,,,,m,,1,EUR", ("row 3, material", 'did you mean "copper"')),
        ("cable,4 mm2,,,,,,reel,,1,EUR", ("row 3, reel_m: is empty",)),
        ("cable,4 mm2,,,,,,m,25,1,EUR", ("row 3, reel_m", 'per "m"')),
        ("cable,4 mm2,,,,,,piece,,1,EUR", ("row 3, per", "accepted: m, reel")),
        ('cable,4 mm2,,,,,,m,,"1,50",EUR', ("row 3, price", "comma", "did you mean 1.50")),
        ("cable,4 mm2,,,,,,m,,-1,EUR", ("row 3, price: is not a plain number", '"-1"')),
        ("cable,4 mm2,,,,,,m,,nan,EUR", ("row 3, price: is not a plain number",)),
        ("cable,4 mm2,,,,,,m,,1e9,EUR", ("row 3, price: is not a plain number",)),
        ("cable,4 mm2,,,,,,m,,1000001,EUR", ("row 3, price: is out of range",)),
        ("cable,4 mm2,,,,,,m,,1,Euro", ("row 3, currency", "three letters")),
        ("cable,4 mm2,,,,,,m,,1,USD", ("row 3, currency", "one currency", "did you mean EUR")),
        ("lug,4 mm2,,,,,M7,piece,,1,EUR", ("row 3, stud", '"M7"', "M8")),
        ("lug,4 mm2,,,blade,,M8,piece,,1,EUR", ("row 3, type", 'nothing of an item "lug"')),
        ("protection,,,,,10,,piece,,1,EUR", ("row 3, type: is empty",)),
        ("label,,,,,,,piece,,1,EUR,more", ("row 3: has more cells",)),
        ("label,,,,,,,piece,,2,EUR", ("row 3: prices the same thing as row 2",)),
        (f"label,,,,,,,piece,,{'9' * 300},EUR", ("row 3, price: is too long",)),
    ],
)  # fmt: skip
def test_a_fault_is_named_with_its_row_column_and_what_is_accepted(row: str, said: tuple[str, ...]) -> None:
    """Rows as a spreadsheet counts them."""
    text = message(HEAD + "label,,,,,,,piece,,1,EUR\n" + row + "\n")
    assert all(part in text for part in said), text
    assert text.startswith("own.csv: row 3")


@pytest.mark.parametrize(
    ("data", "said"),
    [
        (b"", "has no headings"),
        (b"# only a notice\n", "has no headings"),
        (b"\xff\xfe\x00i", "not UTF-8"),
        (b"item\x00,per", "characters that no text has"),
        (b"item,per,price\n", 'no column "currency"'),
        (b"item,per,price,currency,prise\n", 'did you mean "price"'),
        (b"item,per,price,currency,price\n", "is there twice"),
        (HEAD.encode(), "no row under them"),
        (HEAD.encode() + b'label,"a\nlabel', "row 2: cannot be read as CSV"),
        (HEAD.encode() + b"x" * 200_000, "cannot be read as CSV"),
        (b"a" * (price_file.SIZE_LIMIT_BYTES + 1), "too large"),
        (HEAD.encode() + b"\n" * price_file.ROW_LIMIT, "too many rows"),
    ],
)
def test_a_list_that_is_none(data: bytes, said: str) -> None:
    """Hostile or broken as a whole: one message, no traceback."""
    assert said in message(data)


def test_of_very_many_faults_the_first_are_told() -> None:
    """And how many more there are."""
    lines = message(HEAD + "nothing\n" * 1000).split("\n")
    assert len(lines) == price_file.FAULT_LIMIT + 1
    assert lines[-1].startswith("own.csv: and ")


def test_a_file_that_cannot_be_read(tmp_path: Path) -> None:
    """Missing, and a folder."""
    for path in (tmp_path / "none.csv", tmp_path):
        with pytest.raises(PriceListError, match="cannot be read"):
            price_file.read(path)


def test_the_notice_of_an_own_list_stays_one_line_of_text() -> None:
    """A control character in it does nothing to a terminal."""
    prices = price_file.parse(("# Shop\x1b[31m, spring\n" + HEAD + "label,,,,,,,piece,,1,EUR\n").encode())
    assert prices.about == "Shop\N{REPLACEMENT CHARACTER}[31m, spring"
    assert listed("label,,,,,,,piece,,1,EUR").about == "Prices as in the price list."
