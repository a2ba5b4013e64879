"""Plans for the tests of papers: a large one, and one whose names try everything."""

from farvolt import examples

LONG = "A very long name that goes on and on " * 5
HEBREW, ARABIC = "קופסת חיבורים ראשית", "مضخة المياه"


def large(runs: int) -> str:
    """A plan of so many runs: a battery, a busbar, fuse blocks with up to nine lamps each."""
    parts = [
        'format = 1\n[plan]\nname = "Long hall"\nnominal = "12 V"\n[[points]]\nname = "bus"\nkind = "busbar"\n'
        '[[sources]]\nname = "bank"\nkind = "battery"\nat = "bank"\nemf = "12.8 V"\nresistance = "15 mohm"\n'
        + _run("main", 1, "bank", "bus", "50 mm2", "terminal fuse", 150)
    ]
    count, block = 1, 0
    while count < runs:
        block += 1
        count += 1
        parts.append(_run(f"feeder {block}", count, "bus", f"block {block}", "16 mm2", "terminal fuse", 60))
        parts.append(f'[[points]]\nname = "block {block}"\nkind = "fuse block"\n')
        for number in range(1, min(9, runs - count) + 1):
            name = f"lamp {block}.{number}"
            parts.append(_run(f"to {name}", count + number, f"block {block}", name, "2.5 mm2", "blade", 10))
            parts.append(f'[[loads]]\nname = "{name}"\nat = "{name}"\npower = "5 W"\nhours_per_day = 4\n')
        count += min(9, runs - count)
    parts.append('[[cases]]\nname = "Evening"\n')
    return "".join(parts)


def _run(name: str, number: int, start: str, end: str, size: str, kind: str, rating_A: int) -> str:
    return (
        f'[[runs]]\nname = "{name}"\nlabel = "W{number:03}"\nfrom = "{start}"\nto = "{end}"\nlength = "2 m"\n'
        f'size = "{size}"\nprotection = {{ type = "{kind}", rating = "{rating_A} A", distance = "0.1 m" }}\n'
    )


def hostile() -> str:
    """The van with names that are markup, formulas, endless, from right to left, or in letters no typeface has."""
    text = examples.text("instrument-repair-van")
    changes = {
        "Instrument-repair van": f"<script>alert(1)</script> =SUM(A1) {HEBREW} {'W' * 120}",
        "fridge feed": "=HYPERLINK(1)", "main bus": HEBREW, "living block": LONG.strip(), "water pump": ARABIC,
        "fridge": "<b>fridge</b> &amp; *x* {nb} **b** $1", "bed outlet": "X" * 200,
        "W08": "很长的 🔌", "W09": "e\\u0301Ω≈",
    }  # fmt: skip
    for old, new in changes.items():
        text = text.replace(f'"{old}"', f'"{new}"')
    return text
