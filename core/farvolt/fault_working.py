"""How a fault current comes about, in lines that a person can redo; and how its place is named."""

import numpy as np

from farvolt.fault_network import FaultNetwork
from farvolt.network import Floats
from farvolt.plan import Run
from farvolt.shorts import Shorted, Spot
from farvolt.units import number

_SAME = 1e-6
"""A conductor carries the whole of a fault current where it differs by less than this share."""


def at_device(run: Run, which: int) -> str:
    """The place of one of a run's protections."""
    one = run.protections[which]
    point = run.from_point if one.end == "from" else run.to_point
    pole = " in the return" if one.pole == "return" else ""
    return f'at the {one.rating} {one.type}{pole} of "{run.name}" near "{point}"'


def along(run: Run, end: str, metres: float) -> str:
    """A place within a run."""
    point = run.from_point if end == "from" else run.to_point
    return f'in "{run.name}", {number(metres)} m from "{point}"'


def by_source(net: FaultNetwork, found: Shorted, part: list[int]) -> tuple[tuple[str, float], ...]:
    """What each source that takes part delivers, the strings of a battery together."""
    total: dict[str, float] = {}
    for place in part:
        name = net.sources[place].name
        total[name] = total.get(name, 0.0) + float(found.port_A[place])
    return tuple(total.items())


def working(net: FaultNetwork, found: Shorted, amps: float) -> tuple[str, ...]:
    """EMF over the sum of resistances where one battery feeds the fault along one way; else what each source gives."""
    giving = [
        place for place, given in enumerate(found.port_A) if abs(given) >= 1e-3 and net.sources[place].source >= 0
    ]
    sources = tuple(dict.fromkeys(net.sources[place].text for place in giving))
    line = _one_way(net, found, giving[0], amps) if len(giving) == 1 else None
    if line is not None:
        return (*sources, line)
    parts = [f'"{name}" {number(given, 4)} A' for name, given in by_source(net, found, net.taking_part(found))]
    through = f", of which {number(amps, 4)} A here" if abs(amps - abs(found.amps)) > _SAME * amps else ""
    return (*sources, f"From the network: {' + '.join(parts)}; short {number(abs(found.amps), 4)} A{through}")


def _one_way(net: FaultNetwork, found: Shorted, port: int, amps: float) -> str | None:
    """The sum along the only way, where it gives the current; None in a mesh, and with a diode or a limit on it."""
    source, total = net.sources[port], abs(found.amps)
    if np.isfinite(source.limit_A) or abs(amps - total) > _SAME * total:
        return None
    carried = _carried(net, found)
    whole = np.abs(carried - 1) < _SAME
    cable, fixed = float(net.cable_ohm[whole].sum()), float(net.fixed_ohm[whole].sum())
    for spot in (found.place.feed, found.place.back):
        more_cable, more_fixed = _part(net, found, spot)
        cable, fixed = cable + more_cable, fixed + more_fixed
    if abs(source.volts / (source.ohm + cable + fixed) - total) > 1e-5 * total:
        return None
    terms = [(source.ohm, ""), (cable, " cable"), (fixed, " joints and contacts")]
    shown = " + ".join(f"{number(1000 * ohm, 4)}{what}" for ohm, what in terms if ohm > 0)
    summed = f"({shown})" if cable or fixed else shown
    return f"{number(source.volts, 4)} V / {summed} mohm = {number(total, 4)} A"


def _carried(net: FaultNetwork, found: Shorted) -> Floats:
    """Over branches: their share of the fault current; none for those that hold the place itself."""
    carried = np.abs(found.branch_A) / abs(found.amps)
    for spot in (found.place.feed, found.place.back):
        if spot.branch >= 0:
            carried[spot.branch] = 0.0
    return carried


def _part(net: FaultNetwork, found: Shorted, spot: Spot) -> tuple[float, float]:
    """Cable and fixed resistance of the part of a run that carries the whole current to a spot in it."""
    if spot.branch < 0:
        return 0.0, 0.0
    near, far = (abs(part) for part in found.parts_A(spot))
    if near >= far:
        return spot.near_ohm - spot.near_fixed_ohm, spot.near_fixed_ohm
    fixed = float(net.fixed_ohm[spot.branch]) - spot.near_fixed_ohm
    return spot.far_ohm - fixed, fixed
