"""The rig file of a bench that nobody wrote one for."""

from collections.abc import Mapping
from pathlib import Path
from typing import cast, get_args

import pytest
from twin_wire import Wire

from rigctl.files import load_recipe, match, parse_rig
from rigctl.files.rig import Rig
from rigctl.interfaces import Driver, RoleKind
from rigctl.plugins import find_drivers
from rigctl_sim.bench import FACTORY

RECIPES = sorted((Path(__file__).parents[2] / "recipes").glob("*.yaml"))
ROLES: dict[str, RoleKind] = {
    "part mount": "rotation stage",
    "signal": "power meter",
    "odd name 1": "power meter",
    "shutter": "shutter",
    "diode": "current source",
    "another diode": "current source",
    "diode tec": "temperature controller",
    "oven": "temperature controller",
    "part slide": "slide",
    "warning lamp": "relay",
}


@pytest.fixture(scope="module")
def drivers() -> Mapping[str, Driver]:
    return find_drivers()


def default_rig(drivers: Mapping[str, Driver], roles: Mapping[str, RoleKind]) -> Rig:
    return parse_rig(FACTORY.default_rig(roles), "default rig", drivers, FACTORY)


def test_every_kind_of_role_is_tried_here() -> None:
    assert set(ROLES.values()) == set(get_args(RoleKind))


def test_every_role_is_filled_with_an_instrument_of_its_own(drivers: Mapping[str, Driver]) -> None:
    rig = default_rig(drivers, ROLES)

    entries = [rig.entry(role) for role in ROLES]
    kinds = [drivers[entry.driver].kind for entry in entries if entry]

    assert kinds == list(ROLES.values())
    assert len({entry.at for entry in entries if entry}) == len(ROLES)


def test_every_source_has_a_diode_with_limits(drivers: Mapping[str, Driver]) -> None:
    rig = default_rig(drivers, ROLES)

    found = {diode.on: (diode.current_a, diode.compliance_v, diode.label_class) for diode in rig.diodes.values()}

    assert found == dict.fromkeys([rig.roles["diode"], rig.roles["another diode"]], (0.1, 3.0, "3B"))


def test_a_bench_without_sources_has_no_diodes(drivers: Mapping[str, Driver]) -> None:
    assert not default_rig(drivers, {"signal": "power meter"}).diodes


def test_two_heads_share_most_of_their_noise(drivers: Mapping[str, Driver]) -> None:
    """A monitor is worth something only where it sees what the signal sees."""
    one = default_rig(drivers, {"signal": "power meter"})
    two = default_rig(drivers, {"signal": "power meter", "monitor": "power meter"})

    assert one.simulated.bench.get("source noise") in (None, 0.0)
    assert two.simulated.bench["source noise"] == pytest.approx(4e-4)


@pytest.mark.parametrize("path", RECIPES, ids=lambda path: path.stem)
def test_it_suits_every_ready_recipe(drivers: Mapping[str, Driver], path: Path) -> None:
    recipe = load_recipe(path)
    rig = default_rig(drivers, cast(dict[str, RoleKind], {name: role.kind for name, role in recipe.roles.items()}))

    match(recipe, rig, drivers)
    bench = FACTORY.build(recipe, rig, 1)

    assert all(bench.twin(entry.at).next_ready_s() is None for entry in rig.instruments.values())
    assert bench.truth()["source.power"] > 0.0


@pytest.mark.parametrize("role", [role for role, kind in ROLES.items() if kind != "rotation stage"])
def test_every_twin_says_that_it_is_simulated(drivers: Mapping[str, Driver], role: str) -> None:
    recipe, rig = load_recipe(RECIPES[0]), default_rig(drivers, ROLES)
    entry = rig.entry(role)
    assert entry is not None

    answer = Wire(FACTORY.build(recipe, rig, 1).twin(entry.at)).ask(b"*IDN?")

    assert answer.startswith("polrig,simulated ")
    assert len(answer) <= 72
