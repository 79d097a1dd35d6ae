"""Arrangements as a recipe would give them, and readings as a good bench would."""

from collections.abc import Mapping

import numpy as np

from rigctl.optics import Detector, Element, Quantity, Train, Visits, readings
from rigctl.optics.kernel import Array
from rigctl.polarimetry import Observed

FULL_SCALE_W = 1e-3


def quantity(name: str, value: float, u: float | None = None, *, is_unknown: bool = False) -> Quantity:
    kinds = {"axis": "angle", "dial offset": "angle", "extinction ratio": "ratio", "retardance": "retardance"}
    return Quantity(name, kinds[name.split(".")[1]], value, u, is_unknown=is_unknown)


def train_of(*elements: Element, given: tuple[Quantity, ...]) -> Train:
    """A train whose unnamed axes and ratios are exactly 0; power, drift and stray light are free."""
    free = (
        Quantity("source.power", "power", FULL_SCALE_W, is_free=True),
        Quantity("source.drift", "drift", 0.0, is_free=True),
        Quantity("signal.stray light", "power", 0.0, is_free=True),
    )
    exact = [quantity(a, 0.0) for e in elements for a in e.addresses]
    return Train(elements, (Detector("signal"),), {q.name: q for q in (*exact, *free, *given)})


def polarizer_case(*, ratio: float = 1e-3) -> Train:
    """A polarizer behind a good one: dial offset and extinction ratio are unknown."""
    return train_of(
        Element("entry cube", "polarizer"),
        Element("part", "polarizer", "part mount"),
        given=(
            quantity("entry cube.extinction ratio", 1e-5),
            quantity("part.extinction ratio", ratio, is_unknown=True),
            quantity("part.dial offset", 0.0, 5.0, is_unknown=True),
        ),
    )


def plate_case(*, waves: float = 0.25) -> Train:
    """A plate between parallel polarizers: retardance and dial offset are unknown."""
    return train_of(
        Element("entry cube", "polarizer"),
        Element("part", "retarder", "part mount"),
        Element("exit cube", "polarizer"),
        given=(
            quantity("entry cube.extinction ratio", 1e-3, 2e-4),
            quantity("exit cube.extinction ratio", 1e-3, 2e-4),
            quantity("part.retardance", waves, is_unknown=True),
            quantity("part.dial offset", 0.0, 3.0, is_unknown=True),
        ),
    )


def half_wave_case(*, waves: float = 0.5) -> Train:
    """A half-wave plate before a quarter-wave plate and a polarizer at 22.5 deg."""
    return train_of(
        Element("entry cube", "polarizer"),
        Element("part", "retarder", "part mount"),
        Element("quarter", "retarder"),
        Element("exit cube", "polarizer"),
        given=(
            quantity("entry cube.extinction ratio", 1e-3, 2e-4),
            quantity("exit cube.extinction ratio", 1e-3, 2e-4),
            quantity("part.retardance", waves, 0.02, is_unknown=True),
            quantity("part.dial offset", 0.0, 3.0, is_unknown=True),
            quantity("quarter.retardance", 0.25, 0.003),
            quantity("exit cube.axis", 22.5, 0.2),
        ),
    )


def sweep(*, step_deg: float = 5.0, darks: int = 10, hours: float = 0.25) -> Visits:
    """One turn of the part with the beam open, and dark readings before and after."""
    dial = np.arange(0.0, 360.0, step_deg)
    before = darks // 2
    count = dial.size + darks
    is_open = np.zeros(count, dtype=bool)
    is_open[before : before + dial.size] = True
    angles = np.zeros(count)
    angles[is_open] = dial
    return Visits({"part mount": angles}, is_open, np.linspace(0.0, hours, count))


def truth_of(train: Train, rng: np.random.Generator) -> dict[str, float]:
    """A hidden truth: nuisances from their tolerances, power, drift and stray light from the bench."""
    drawn = {q.name: q.value + q.prior_u * rng.standard_normal() for q in train.fitted if q.prior_u is not None}
    bench = {
        "source.power": FULL_SCALE_W * rng.uniform(0.5, 1.5),
        "source.drift": 0.02 * rng.standard_normal(),
        "signal.stray light": FULL_SCALE_W * rng.uniform(0.0, 2e-3),
    }
    return {**bench, **drawn}


def observe(
    train: Train, visits: Visits, truth: Mapping[str, float], rng: np.random.Generator, *, per_dwell: int = 5
) -> dict[str, Observed]:
    """Dwells with a floor of 2e-7 W and relative noise of 1e-3 per reading."""
    seen = {}
    for name, level in readings(train, visits, truth).items():
        sd = np.hypot(2e-7, 1e-3 * level)
        drawn = level[:, None] + sd[:, None] * rng.standard_normal((level.size, per_dwell))
        seen[name] = Observed(drawn.mean(axis=1), drawn.std(axis=1, ddof=1), np.full(level.size, float(per_dwell)))
    return seen


def variances(visits: Visits, u_w: float = 1e-7) -> dict[str, Array]:
    return {"signal": np.full(visits.count, u_w**2)}
