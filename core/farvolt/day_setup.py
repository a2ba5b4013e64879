"""What days need before they begin: the network of the plan, its banks, and what each step asks for and may give."""

from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path

import numpy as np

from farvolt import interim, temperatures
from farvolt import network as networks
from farvolt.day_bank import BankUnit, unit
from farvolt.day_course import Course
from farvolt.day_network import Laws
from farvolt.errors import FarvoltError
from farvolt.network import Floats, Network
from farvolt.operating import Operating, operating, rated
from farvolt.plan import Battery, Case, Plan
from farvolt.rulebook import Rulebook, load


@dataclass(frozen=True)
class Start:
    """How the days begin: charge of every bank (None: as the plan states), and whether the banks are at their end."""

    charge: float | None = None
    aged: bool = False


@dataclass(frozen=True)
class Ready:
    """A plan made ready for days: its network, and what stays the same in all steps."""

    plan: Plan
    network: Network
    condition: Operating
    factor_of_20: Floats
    load_nominal_V: Floats


def prepare(plan: Plan, folder: Path | None = None) -> Ready:
    """The network of a plan, at the plan's conductor temperatures. Raises FarvoltError where it has no battery."""
    banks = [one for one in plan.sources if isinstance(one, Battery)]
    if not banks:
        raise FarvoltError('days need a bank, and the plan has none; accepted: a source of kind "battery"')
    for one in banks:
        if one.capacity is None:
            raise FarvoltError(f'sources "{one.name}", capacity: days need it; accepted: such as capacity = "200 Ah"')
    rulebook = load(plan.plan.rulebook, folder)
    plan = interim.with_sizes(plan, interim.sizes(plan, rulebook))
    return of_network(networks.build(plan, rulebook), rulebook)


def of_network(network: Network, rulebook: Rulebook) -> Ready:
    """A network made ready, whose batteries have capacities and whose runs have sizes."""
    plan, case = network.plan, Case(name="days")
    condition = operating(network, case)
    mode = temperatures.at(plan, rulebook, case, "plan" if plan.plan.conductor_temperature != "estimated" else "basis")
    nominal = np.array([condition.islands.nominal(network.feed(one.at)) for one in plan.loads], dtype=float)
    return Ready(plan, network, condition, mode.factor_of_20, nominal)


def units(ready: Ready, course: Course, start: Start) -> list[BankUnit]:
    """The banks as they begin: one for every battery port."""
    plan, network = ready.plan, ready.network
    degC = float(course.bank_degC.mean())
    found = []
    ports = [(index, index, one.strings) for index, one in enumerate(plan.sources)
             if isinstance(one, Battery) and not networks.linked(one)]  # fmt: skip
    ports += [(index, len(plan.sources) + place, 1) for place, (index, _, _) in enumerate(network.strings)]
    for index, port, strings in ports:
        battery = plan.sources[index]
        assert isinstance(battery, Battery)
        nominal = ready.condition.islands.nominal(network.feed(battery.at))
        charge = battery.charge.si if start.charge is None else start.charge
        aged = plan.bank.ageing if start.aged else None
        one = unit(battery, port, nominal, strings=strings, degC=degC, charge=charge, aged=aged)
        one.cut = charge <= 0
        found.append(one)
    return found


def laws(ready: Ready, course: Course, banks: Sequence[BankUnit]) -> Laws:
    """The laws of all ports before the first step; the banks with the resistance that matrices are made for."""
    c = ready.condition
    nothing = (np.zeros(len(c.load_a)) for _ in range(3))
    found = Laws(c.volts.copy(), c.ohm.copy(), c.low.copy(), c.high.copy(), c.power.copy(), *nothing)
    for one in banks:
        found.ohm[one.port] = one.usual_ohm(float(course.bank_degC.mean()), course.hours)
    return found


def demand(ready: Ready, course: Course) -> tuple[Floats, Floats, Floats]:
    """Over (step, load): constant power, constant current and conductance that the loads ask for."""
    plan = ready.plan
    found = np.zeros((3, len(course), len(plan.loads)))
    for index, one in enumerate(plan.loads):
        running = rated(one, float(ready.load_nominal_V[index]), idling=False)
        whole = rated(one, float(ready.load_nominal_V[index]))
        free = np.ones(len(course))
        if one.inverter_of is not None:
            charger = next(place for place, source in enumerate(plan.sources) if source.name == one.inverter_of)
            free = 1.0 - np.minimum(course.sources[:, charger], 1.0)
        for row, (run, all_of_it) in enumerate(zip(running, whole, strict=True)):
            found[row, :, index] = free * (course.loads[:, index] * run + course.idle[:, index] * (all_of_it - run))
    return found[0], found[1], found[2]
