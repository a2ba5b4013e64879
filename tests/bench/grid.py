"""A large plan to measure with: distribution boards in a tree with some rings, and loads of all three behaviours.

Invented, and larger than any vehicle: it only shows how time grows with the number of runs.
"""

from typing import Any

BRANCHES = 20
"""Branch runs, each with its load, at every board."""

WATTS = 2000.0
"""All loads together, however many."""


def grid(runs: int) -> dict[str, Any]:
    """A 48 V plan of about `runs` runs, as the tables of a plan file."""
    boards = max(1, round(runs / (BRANCHES + 1.5)))
    rows = [_run("bank", "board 0", "35 mm2", 1.0)]
    rows += [_run(f"board {(index - 1) // 4}", f"board {index}", "35 mm2", 2.0) for index in range(1, boards)]
    rows += [_run(f"board {index}", f"board {index + 1}", "16 mm2", 3.0) for index in range(1, boards - 1, 2)]
    loads = []
    while len(rows) < runs:
        place = len(loads)
        rows.append(_run(f"board {place // BRANCHES % boards}", f"load point {place}", "2.5 mm2", 1 + place % 7))
        loads.append({"name": f"load {place}", "at": f"load point {place}"})
    for place, load in enumerate(loads):
        load |= {"power": f"{WATTS / len(loads):.6g} W", "behaves": ("power", "current", "resistance")[place % 3]}
    for number, row in enumerate(rows):
        row["name"] = f"run {number}"
    bank = {"name": "bank", "kind": "battery", "at": "bank", "emf": "51.2 V", "resistance": "5 mohm"}
    charger = {"name": "charger", "kind": "charger", "at": "board 0", "volts": "57.6 V", "amps": "20 A"}
    plan = {"name": "Grid", "nominal": "48 V"}
    return {
        "format": 1,
        "plan": plan,
        "sources": [bank, charger],
        "runs": rows,
        "devices": [],
        "loads": loads,
        "cases": [],
    }


def _run(start: str, end: str, size: str, length_m: float) -> dict[str, Any]:
    return {"from": start, "to": end, "length": f"{length_m} m", "size": size, "strand": "flexible"}
