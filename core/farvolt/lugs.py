"""Studs and the lugs that join cables to them, as they are usually stocked."""

import re
from dataclasses import dataclass

from farvolt.tables import read
from farvolt_data import ROOT


@dataclass(frozen=True, slots=True)
class Lugs:
    """Studs that lugs are usually stocked for, for conductors up to an area."""

    area_up_to_mm2: float
    smallest: str
    largest: str


STUDS = {row["stud"]: float(row["diameter_mm"]) for row in read(ROOT / "devices" / "studs.csv")}
"""Diameter of each stud size in mm, by its one name."""

LUGS = [
    Lugs(float(row["area_up_to_mm2"]), row["smallest_stud"], row["largest_stud"])
    for row in read(ROOT / "devices" / "lugs.csv")
]
"""By rising area; the last holds for every larger one."""


def known_stud(text: str) -> str | None:
    """The one name of a stud size however it is spelt ("m8", "3/8", '3/8"', "no. 10"), or None."""
    word = " ".join(text.lower().split())
    word = re.sub(r'\s*("|\'\'|in\.?|inch|inches)$', "", word)
    word = re.sub(r"^(no\.?|number)\s*", "#", word).replace(" ", "")
    return next((name for name in STUDS if name.lower().removesuffix(" in") == word), None)
