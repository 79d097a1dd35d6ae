"""Drivers and benches of other packages: found by their entry points, blamed by name when they fail."""

import sys
from collections.abc import Callable, Iterator
from pathlib import Path

import pytest

from rigctl.errors import PlanError
from rigctl.plugins import find_bench_factory, find_drivers

GOOD = """
from dataclasses import replace
from rigctl.plugins import find_drivers
from rigctl_drivers.switch import DRIVER as SWITCH

DRIVER = replace(SWITCH, name="lab-shutter")
NAMELESS = replace(SWITCH, name="another name")
SAME = replace(SWITCH, meaning="a copy under our name")
NUMBER = 7
"""

Install = Callable[..., None]


@pytest.fixture
def install(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Iterator[Install]:
    """Install a package of a lab for one test: a module, and entry points into it."""
    before = set(sys.modules)

    def put(points: str, *, module: str = GOOD, group: str = "rigctl.drivers") -> None:
        info = tmp_path / "lab_bench-1.0.dist-info"
        info.mkdir()
        (info / "METADATA").write_text("Metadata-Version: 2.1\nName: lab-bench\nVersion: 1.0\n", encoding="utf-8")
        (info / "entry_points.txt").write_text(f"[{group}]\n{points}\n", encoding="utf-8")
        (tmp_path / "lab_bench_module.py").write_text(module, encoding="utf-8")
        monkeypatch.syspath_prepend(tmp_path)

    yield put
    for name in set(sys.modules) - before:
        if name.startswith("lab_bench"):
            del sys.modules[name]


def test_ours_are_found_under_the_names_that_rig_files_use() -> None:
    drivers = find_drivers()

    assert {"gcode-rotary", "scpi-power-meter", "scpi-switch"} <= set(drivers)
    assert all(name == driver.name for name, driver in drivers.items())


def test_a_driver_of_another_package_stands_beside_ours(install: Install) -> None:
    ours = set(find_drivers())

    install("lab-shutter = lab_bench_module:DRIVER")

    assert set(find_drivers()) == ours | {"lab-shutter"}
    assert find_drivers()["lab-shutter"].kind == "shutter"


@pytest.mark.parametrize(
    ("module", "why"),
    [
        ("import nothing_of_this_name", "ModuleNotFoundError: No module named 'nothing_of_this_name'"),
        ("DRIVER = 1 / 0", "ZeroDivisionError"),
        ("def DRIVER(:", "SyntaxError"),
        ("", "AttributeError"),
    ],
)
def test_a_plugin_that_cannot_be_loaded_is_blamed_with_its_package(module: str, why: str, install: Install) -> None:
    install("lab-shutter = lab_bench_module:DRIVER", module=module)

    with pytest.raises(PlanError) as told:
        find_drivers()

    assert "the plugin 'lab-shutter' of package 'lab-bench' cannot be loaded" in told.value.what
    assert why in told.value.what
    assert told.value.do == "Mend or remove that package."
    assert told.value.__cause__ is not None


@pytest.mark.parametrize("value", ["NUMBER", "NAMELESS"])
def test_what_is_no_driver_of_its_entry_point_s_name_is_refused(value: str, install: Install) -> None:
    install(f"lab-shutter = lab_bench_module:{value}")

    with pytest.raises(PlanError, match="'lab-shutter' is not a Driver of that name"):
        find_drivers()


def test_two_drivers_of_one_name_are_refused_rather_than_one_taken_by_chance(install: Install) -> None:
    install("scpi-switch = lab_bench_module:SAME")

    with pytest.raises(PlanError, match="two packages bring a driver 'scpi-switch'"):
        find_drivers()


def test_one_driver_that_is_listed_twice_is_no_conflict(install: Install) -> None:
    install("scpi-switch = rigctl_drivers.switch:DRIVER")

    assert "scpi-switch" in find_drivers()


def test_the_simulated_bench_writes_a_rig_for_any_roles() -> None:
    text = find_bench_factory().default_rig({"signal": "power meter"})

    assert "scpi-power-meter" in text


def test_a_bench_of_another_package_is_found_by_its_name(install: Install) -> None:
    install("lab = lab_bench_module:FACTORY", module="FACTORY = object()", group="rigctl.benches")

    assert type(find_bench_factory("lab")) is object


def test_a_bench_that_nobody_installed_is_told_with_what_to_do() -> None:
    with pytest.raises(PlanError, match="no simulated bench 'attic' is installed") as told:
        find_bench_factory("attic")

    assert told.value.do == "Install polrig with its simulators."


def test_a_bench_that_cannot_be_loaded_is_blamed_with_its_package(install: Install) -> None:
    install("lab = lab_bench_module:FACTORY", module="FACTORY = 1 / 0", group="rigctl.benches")

    with pytest.raises(PlanError, match="'lab' of package 'lab-bench' cannot be loaded: ZeroDivisionError"):
        find_bench_factory("lab")
