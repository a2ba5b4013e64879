"""The choice of cables against every combination of sizes, on many small random plans.

python tests/bench/choice_against_all.py [PLANS [FIRST]]
"""

import sys
from pathlib import Path

sys.path.insert(0, str(Path(__file__).parents[1]))

from choosing import every_combination, small, stock
from farvolt import rulebook
from farvolt.choice_options import Wishes
from farvolt.choose import choose

MIXED = {"behaviours": ("power", "current", "resistance"), "charger": True}


def judged(seed: int) -> str:
    """What came of one plan: "same", "none passes" where both say so, or how they differ."""
    plan = small(seed, **(MIXED if seed % 3 == 0 else {}))
    sizes = stock(plan)
    tried = every_combination(plan, sizes)
    found = choose(plan, rulebook.load(plan.plan.rulebook), Wishes(sizes=sizes))
    least, cost = tried.least, found.cost
    if least is None or cost is None:
        return "none passes" if least is None and cost is None else f"differ: {least} and {cost} ({found.ended})"
    if found.bound > least * (1 + 1e-6):
        return f"differ: a bound of {found.bound} above {least}"
    same = least * (1 - 1e-6) <= cost <= least * (1 + found.wishes.gap + 1e-6)
    return "same" if same else f"differ: {least} and {cost}, none said to be below {found.bound}"


def main(plans: int = 200, first: int = 0) -> None:
    """Print every difference, and how many plans came out how."""
    counts: dict[str, int] = {}
    for seed in range(first, first + plans):
        word = judged(seed)
        counts[word.split(":")[0]] = counts.get(word.split(":")[0], 0) + 1
        if word.startswith("differ"):
            print(f"plan {seed}: {word}", flush=True)
    print(", ".join(f"{word}: {count}" for word, count in sorted(counts.items())))


if __name__ == "__main__":
    main(*(int(word) for word in sys.argv[1:]))
