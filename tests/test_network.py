"""The network of a plan: its real conductors, joints, protection and devices, by resistance and by node."""

from typing import Any

import pytest

from farvolt.network import BOND, CONTACT_OHM, FEED, RETURN, Network, build, conductor_lengths_m
from farvolt.plan import Plan
from farvolt.rulebook import load
from wiring import COPPER_PER_K, bank, cable, fuse, lamp, plan_of

FOUR, TEN = 4.95e-3, 1.91e-3
"""Ohm per metre at 20 degC: IEC 60228 Table 3, flexible copper of 4 and 10 mm2."""


def net(plan: Plan) -> Network:
    return build(plan, load(plan.plan.rulebook))


def ohms(network: Network, run: int = 0) -> dict[int, float]:
    """Resistance at 20 degC of the conductors of a run, by pole."""
    return {
        int(pole): float(fixed + cable_ohm)
        for index, pole, fixed, cable_ohm in zip(
            network.run, network.pole, network.fixed_ohm, network.cable_ohm_20, strict=True
        )
        if index == run
    }


def one(**more: Any) -> Network:
    return net(plan_of([cable("feed", "bank", "pump", "3 m", "4 mm2", **more)], [lamp("pump", "pump")]))


def test_both_wires_are_in_the_network() -> None:
    """3 m of 4.95 mohm/m out, the same back: nothing is doubled by rule of thumb."""
    assert ohms(one()) == {FEED: pytest.approx(3 * FOUR), RETURN: pytest.approx(3 * FOUR)}
    network = one()
    assert network.node_count == 4
    assert (network.a[0], network.b[0]) == (network.feed("bank"), network.feed("pump"))
    assert (network.a[1], network.b[1]) == (network.ret("bank"), network.ret("pump"))


def test_a_return_of_its_own_size_and_length() -> None:
    found = ohms(one(**{"return": {"size": "10 mm2", "length": "5 m"}}))
    assert found == {FEED: pytest.approx(3 * FOUR), RETURN: pytest.approx(5 * TEN)}
    assert ohms(one(**{"return": {"size": "10 mm2"}}))[RETURN] == pytest.approx(3 * TEN)
    assert ohms(one(**{"return": {"length": "5 m"}}))[RETURN] == pytest.approx(5 * FOUR)


@pytest.mark.parametrize(("carries", "poles"), [("both", {FEED, RETURN}), ("feed", {FEED}), ("return", {RETURN})])
def test_a_run_has_the_conductors_it_carries(carries: str, poles: set[int]) -> None:
    network = one(carries=carries)
    assert set(ohms(network)) == poles
    lengths = conductor_lengths_m(network.plan.runs[0])
    assert lengths == (3 if FEED in poles else 0, 3 if RETURN in poles else 0)


def test_parallel_cables_divide_the_resistance() -> None:
    assert ohms(one(parallel=3))[FEED] == pytest.approx(3 * FOUR / 3)


def test_joints_are_in_each_conductor_and_protection_in_its_own() -> None:
    """Two joints of 0.2 mohm in each conductor; 2 mohm of protection in the feed, 3 mohm in the return."""
    guards = [fuse("15 A") | {"resistance": "2 mohm"}, fuse("15 A", pole="return") | {"resistance": "3 mohm"}]
    found = ohms(one(joints=2, protection=guards))
    assert found[FEED] == pytest.approx(3 * FOUR + 2 * 0.2e-3 + 2e-3)
    assert found[RETURN] == pytest.approx(3 * FOUR + 2 * 0.2e-3 + 3e-3)


def test_protection_without_a_resistance_takes_its_types_drop() -> None:
    """A medium blade drops 100 mV at its rating (from memory): 15 A make 6.67 mohm."""
    guard = {"type": "blade", "rating": "15 A"}
    assert ohms(one(protection=guard))[FEED] == pytest.approx(3 * FOUR + 0.100 / 15)


def test_a_measured_resistance_covers_all_between_the_ends() -> None:
    """12 mohm at 50 degC are 12 / (1 + 0.00393 x 30) = 10.74 mohm at 20 degC, joints and protection included."""
    more = {"resistance": "12 mohm", "resistance_temperature": "50 degC", "joints": 4, "protection": fuse("15 A")}
    found = ohms(one(**more))
    assert found[FEED] == pytest.approx(0.006 / (1 + COPPER_PER_K * 30))
    assert sum(found.values()) == pytest.approx(0.012 / (1 + COPPER_PER_K * 30))


def test_a_measured_resistance_is_shared_as_the_conductors_are() -> None:
    """Feed 3 m of 4.95, return 3 m of 1.91 mohm/m: shared 4.95 to 1.91."""
    found = ohms(one(resistance="12 mohm", **{"return": {"size": "10 mm2"}}))
    assert found[FEED] / found[RETURN] == pytest.approx(FOUR / TEN)


def test_a_chassis_return_is_bonded_at_each_use_and_once_at_the_source() -> None:
    """1 mohm at the lamp (with the run), 1 mohm at the bank, since the plan shows no other way to the chassis."""
    runs = [
        cable("one", "bank", "a", "3 m", "4 mm2", **{"return": "chassis"}),
        cable("two", "bank", "b", "3 m", "4 mm2", **{"return": "chassis"}),
    ]
    network = net(plan_of(runs, [lamp("a", "a"), lamp("b", "b")], rulebook="leisure-vehicle-eu"))
    assert [ohms(network, run)[RETURN] for run in (0, 1)] == [pytest.approx(1e-3)] * 2
    bonds = network.pole == BOND
    assert bonds.sum() == 1
    assert network.fixed_ohm[bonds] == pytest.approx([1e-3])
    (assumed,) = network.assumptions
    assert 'from the return of "bank" to the chassis' in assumed


def test_a_stated_bond_is_taken_instead_of_an_assumed_one() -> None:
    runs = [
        cable("bond", "bank", "chassis", "0.5 m", "10 mm2", purpose="bond"),
        cable("one", "bank", "a", "3 m", "4 mm2", **{"return": "chassis"}),
    ]
    network = net(plan_of(runs, [lamp("a", "a")], rulebook="leisure-vehicle-eu"))
    assert network.assumptions == ()
    assert ohms(network, 0) == {RETURN: pytest.approx(0.5 * TEN)}


@pytest.mark.parametrize(("pole", "branches"), [("feed", [FEED]), ("return", [RETURN]), ("both", [FEED, RETURN])])
def test_a_device_sits_in_its_own_pole_and_the_other_passes_straight_through(pole: str, branches: list[int]) -> None:
    devices = [
        {"name": "switch", "kind": "switch", "from": "bank", "to": "stud", "pole": pole, "resistance": "0.4 mohm"}
    ]
    runs = [cable("feed", "stud", "pump", "3 m", "4 mm2")]
    network = net(plan_of(runs, [lamp("pump", "pump")], devices=devices))
    mine = network.device == 0
    assert network.pole[mine].tolist() == branches
    assert network.fixed_ohm[mine] == pytest.approx([0.4e-3] * len(branches))
    assert (network.feed("bank") == network.feed("stud")) is (FEED not in branches)
    assert (network.ret("bank") == network.ret("stud")) is (RETURN not in branches)


def test_a_device_without_a_resistance_takes_that_of_its_kind_and_a_zero_the_least() -> None:
    devices = [
        {"name": "a", "kind": "shunt", "from": "bank", "to": "one"},
        {"name": "b", "kind": "relay", "from": "one", "to": "two", "resistance": "0 ohm"},
    ]
    network = net(plan_of([cable("feed", "two", "pump")], [lamp("pump", "pump")], devices=devices))
    assert network.fixed_ohm[network.device == 0] == pytest.approx([CONTACT_OHM["shunt"]])
    assert network.fixed_ohm[network.device == 1] == pytest.approx([1e-6])


def test_a_diode_is_a_port_and_no_branch() -> None:
    devices = [{"name": "diode", "kind": "diode", "from": "bank", "to": "stud"}]
    network = net(plan_of([cable("feed", "stud", "pump")], [lamp("pump", "pump")], devices=devices))
    assert network.diodes == ((0, network.feed("bank"), network.feed("stud")),)
    assert not (network.device == 0).any()


@pytest.mark.parametrize("isolated", [True, False])
def test_a_converter_joins_the_returns_unless_it_is_isolated(isolated: bool) -> None:
    supply = {
        "name": "supply", "kind": "converter", "from": "bank", "at": "radio", "nominal": "12 V", "volts": "13.8 V",
        "amps": "10 A", "efficiency": "90 %", "isolated": isolated, "return_bond": "2 mohm",
    }  # fmt: skip
    network = net(plan_of([], [lamp("radio", "radio")], sources=[bank(), supply]))
    assert network.fixed_ohm.tolist() == ([] if isolated else [pytest.approx(2e-3)])
    assert network.pole.tolist() == ([] if isolated else [BOND])


@pytest.mark.parametrize(("take_off", "count"), [("ends", 4), ("same end", 4), ("bar", 6)])
def test_strings_stand_apart_where_their_link_cables_are_stated(take_off: str, count: int) -> None:
    """Three strings: two links in each pole between neighbours, or three cables in each pole to a bar."""
    link = {"length": "0.3 m", "size": "10 mm2"}
    network = net(plan_of([], sources=[bank(strings=3, take_off=take_off, link=link)]))
    assert len(network.strings) == 3
    assert network.fixed_ohm == pytest.approx([0.3 * TEN] * count)
    feeds, returns = [a for _, a, _ in network.strings], [b for _, _, b in network.strings]
    if take_off == "ends":
        assert (feeds[0], returns[-1]) == (network.feed("bank"), network.ret("bank"))
    elif take_off == "same end":
        assert (feeds[0], returns[0]) == (network.feed("bank"), network.ret("bank"))
    else:
        assert network.feed("bank") not in feeds
        assert network.ret("bank") not in returns


def test_a_run_without_size_or_resistance_is_left_out() -> None:
    network = net(plan_of([cable("free", "bank", "pump", size=None)], [lamp("pump", "pump")]))
    assert len(network.a) == 0
