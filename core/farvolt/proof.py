"""Where bounds on the voltages under tolerances are proven, and where they can only be sampled.

Let one source, E behind r, feed loads that draw j = P/u + I at their voltages u, and let feed and return be joined
at the source and by the loads alone. Then u = E − Z·j with Z_km = r + F_km + B_km, where F and B are the transfer
resistances of the feed and of the return network seen from the source. These are inverses of grounded Laplacians
(M-matrices): no entry is negative. So T(u) = E − Z·j(u) is isotone: higher voltages make smaller currents, and these
make higher voltages. The solution reached from zero load is the highest fixed point of T, the limit of T(T(…E…)).
T rises with E and falls with every P and I, wherever it is taken; hence so does its limit (Knaster and Tarski):
every voltage is lowest where E is least and all demands are greatest at once, highest at the opposite. That is the
proof in loads and EMF, for any mesh of conductors.

Where feed and return are trees, F_km and B_km are the sums of the resistances that the ways of k and m share: T falls
with every resistance too, and every voltage is lowest with all resistances greatest at once.

What breaks it, so that nothing is claimed: a load with a conductance draws more at a higher voltage, and T is no
longer isotone (a thicker branch to a heater lowers its neighbour); in a mesh a transfer resistance may fall where a
conductor's resistance rises; a second source, a charger or a controller at its limit, a converter and a diode are no
straight line of one E and r. A case that gives way at its worst has no bound either.
"""

from dataclasses import dataclass
from typing import Literal

import numpy as np

from farvolt.fed import Fed, first_diode
from farvolt.network import Network
from farvolt.operating import Operating, components

Reach = Literal["all", "loads", "none"]
"""What the bounds are proven in: all tolerances; loads and source voltage, not resistances; nothing."""


@dataclass(frozen=True, slots=True)
class Proof:
    """How far the proof reaches in a case, and what ends it there ("" where nothing does)."""

    reach: Reach
    because: str


def proof(network: Network, condition: Operating, supply: Fed) -> Proof:
    """How far the proof of this module reaches in a case: it looks at the network, not at any solution."""
    because = _not_one_source(network, condition, supply)
    if because:
        return Proof("none", because)
    on = condition.branch_on & supply.live[network.a] & supply.live[network.b]
    part = components(network.node_count, network.a[on], network.b[on])
    port = int(np.flatnonzero(supply.source_on)[0])
    feed, back = int(part[condition.source_a[port]]), int(part[condition.source_b[port]])
    if feed == back:
        return Proof("none", "feed and return are joined by conductors")
    loads = np.flatnonzero(supply.load_on)
    if np.any(part[condition.load_a[loads]] != feed) or np.any(part[condition.load_b[loads]] != back):
        return Proof("none", "a load does not stand between the feed and the return of the source")
    heaters = [network.plan.loads[load].name for load in loads if condition.load_S[load] > 0]
    if heaters:
        more = f" and {len(heaters) - 1} more" if len(heaters) > 1 else ""
        return Proof("none", f'loads of constant resistance are on: "{heaters[0]}"{more}')
    for number, word in ((feed, "feed"), (back, "return")):
        if np.count_nonzero(part[network.a[on]] == number) != np.count_nonzero(part == number) - 1:
            return Proof("loads", f"the {word} is no tree: its conductors form a loop")
    return Proof("all", "")


def _not_one_source(network: Network, condition: Operating, supply: Fed) -> str:
    """Why a case is not fed by one source that is a straight line; "" where it is."""
    working = np.flatnonzero(supply.source_on)
    if np.any(working >= first_diode(network)):
        return "a diode is at work"
    if len(working) != 1:
        return f"{len(working)} sources, or strings of a battery that stand apart, are at work"
    port = int(working[0])
    if np.isfinite(condition.high[port]) or np.isfinite(condition.power[port]):
        return f'"{network.plan.sources[port].name}" has a limit of current or power'
    return ""
