"""Finds drivers and simulated benches that are installed, by their entry points.

It owns the two entry point groups, and blames a plugin by name when it cannot be loaded. It knows none of them.
"""

from collections.abc import Mapping
from importlib.metadata import EntryPoint, entry_points

from rigctl.errors import PlanError
from rigctl.interfaces import BenchFactory, Driver

DRIVERS = "rigctl.drivers"
BENCHES = "rigctl.benches"


def _loaded(point: EntryPoint) -> object:
    """Load what an entry point names; a plugin may fail in any way, and is named for it."""
    try:
        return point.load()
    except Exception as error:
        origin = point.dist.name if point.dist else "an unknown package"
        raise PlanError(
            f"the plugin '{point.name}' of package '{origin}' cannot be loaded: {type(error).__name__}: {error}",
            do="Mend or remove that package.",
        ) from error


def find_drivers() -> Mapping[str, Driver]:
    """Every installed driver by its name in rig files."""
    drivers: dict[str, Driver] = {}
    for point in sorted(entry_points(group=DRIVERS)):
        driver = _loaded(point)
        if not isinstance(driver, Driver) or driver.name != point.name:
            raise PlanError(f"the plugin '{point.name}' is not a Driver of that name", do="Mend or remove its package.")
        if driver.name in drivers and drivers[driver.name] is not driver:
            raise PlanError(f"two packages bring a driver '{driver.name}'", do="Remove one of them.")
        drivers[driver.name] = driver
    return drivers


def find_bench_factory(name: str = "polrig") -> BenchFactory:
    """Return the simulated bench of a name; ours is called 'polrig'."""
    for point in entry_points(group=BENCHES, name=name):
        factory: BenchFactory = _loaded(point)  # type: ignore[assignment]  # a Protocol without runtime checks
        return factory
    raise PlanError(f"no simulated bench '{name}' is installed", do="Install polrig with its simulators.")
