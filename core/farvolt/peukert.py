"""Peukert's law in its two forms, which must not be mixed (W. Peukert, 1897): how long a constant current lasts.

By rated hours: t = H · (C / (I · H))^k, with the capacity C that a data sheet gives for H hours. By one ampere:
t = Cp / I^k, with the capacity Cp that the battery would give at 1 A, which no data sheet states.
"""

import math


def hours_at(current_A: float, capacity_Ah: float, rated_hours: float, exponent: float) -> float:
    """Hours that a current lasts, from the capacity at the rated hours."""
    return float(rated_hours * (capacity_Ah / (current_A * rated_hours)) ** exponent)


def hours_by_one_ampere(current_A: float, capacity_at_1A_Ah: float, exponent: float) -> float:
    """Hours that a current lasts, from the capacity at 1 A."""
    return float(capacity_at_1A_Ah / current_A**exponent)


def capacity_at_one_ampere(capacity_Ah: float, rated_hours: float, exponent: float) -> float:
    """The capacity Cp of the other form: C · (C / H)^(k − 1)."""
    return float(capacity_Ah * (capacity_Ah / rated_hours) ** (exponent - 1))


def exponent_from(first: tuple[float, float], second: tuple[float, float]) -> float:
    """The exponent from two discharges, each (current in A, hours)."""
    return (math.log(second[1]) - math.log(first[1])) / (math.log(first[0]) - math.log(second[0]))


def capacity_over(hours: float, capacity_Ah: float, rated_hours: float, exponent: float) -> float:
    """Charge that a constant current takes out when it lasts so long: C · (t / H)^(1 − 1/k)."""
    return float(capacity_Ah * (hours / rated_hours) ** (1 - 1 / exponent))


def capacity_at(current_A: float, capacity_Ah: float, rated_hours: float, exponent: float) -> float:
    """Charge that a constant current takes out: C · (C / (I · H))^(k − 1)."""
    return current_A * hours_at(current_A, capacity_Ah, rated_hours, exponent)
