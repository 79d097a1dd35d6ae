"""Arrangements as a recipe would give them, and readings as a good bench would."""

from collections.abc import Mapping
from dataclasses import replace

import numpy as np

from rigctl.optics import Detector, Element, Levels, Quantity, Train, Visits, readings
from rigctl.optics.kernel import Array
from rigctl.polarimetry import Observed

FULL_SCALE_W = 1e-3


def quantity(name: str, value: float, u: float | None = None, *, is_unknown: bool = False) -> Quantity:
    kinds = {
        "axis": "angle",
        "dial offset": "angle",
        "extinction ratio": "ratio",
        "retardance": "retardance",
        "fraction": "fraction",
        "temperature coefficient": "coefficient",
    }
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


def empty_pair_case() -> Train:
    """A plate between polarizers of which the exit's axis is unknown: the sweep alone does not tell it."""
    return plate_case().rewritten(quantity("exit cube.axis", 22.5, 5.0, is_unknown=True))


def three_ovens_case() -> Train:
    """The same with a retardance for each of three temperatures."""
    train = empty_pair_case()
    return train.rewritten(replace(train.quantities["part.retardance"], each="oven"))


def warm_case(*, per_k: float = 1e-4) -> Train:
    """A half-wave plate before a quarter-wave plate, with an unknown temperature coefficient."""
    train = half_wave_case()
    warm = replace(train.elements[1], warmed_by="oven", reference_temperature_c=25.0)
    coefficient = quantity("part.temperature coefficient", per_k, is_unknown=True)
    elements = (train.elements[0], warm, *train.elements[2:])
    return Train(elements, train.detectors, {**train.quantities, coefficient.name: coefficient})


def monitored_case() -> Train:
    """The polarizer pair with a pick-off between, whose fraction is unknown, and a monitor behind it."""
    train = polarizer_case()
    given = (
        quantity("splitter.fraction", 0.05, is_unknown=True),
        Quantity("monitor.stray light", "power", 0.0, is_free=True),
    )
    elements = (train.elements[0], Element("splitter", "pick-off"), train.elements[1])
    detectors = (*train.detectors, Detector("monitor", "splitter"))
    return Train(elements, detectors, {**train.quantities, **{q.name: q for q in given}})


def without(visits: Visits, *names: str) -> Visits:
    """The same visits with parts out of the beam."""
    return replace(visits, present={name: np.zeros(visits.count, dtype=bool) for name in names})


def steps(*parts: Visits) -> Visits:
    """One step after another in time."""
    begins_h = np.cumsum([0.0, *(part.time_h.max() + 0.01 for part in parts)])
    return Visits.join(*(replace(p, time_h=p.time_h + h) for p, h in zip(parts, begins_h, strict=False)))


def at_ovens(visits: Visits, *temperatures_c: float) -> Visits:
    """The same visits at each temperature, one after another."""
    labels = tuple(f"{t:g} degC" for t in temperatures_c)

    def at(k: int) -> Visits:
        levels = {"oven": Levels(labels, np.full(visits.count, k))}
        return replace(visits, levels=levels, temperature_c={"oven": np.full(visits.count, temperatures_c[k])})

    return steps(*(at(k) for k in range(len(labels))))


def empty_pair_and_three_ovens() -> Visits:
    """An empty pair at the first temperature, then the plate at all three."""
    plate = at_ovens(sweep(step_deg=10.0), 22.0, 25.0, 28.0)
    return steps(without(plate.rows(np.arange(46)), "part"), plate)


RANGES = ("2 uW", "1 mW")
SWITCH_W = 1.5e-6


def on_two_ranges(visits: Visits, light_w: Array) -> Visits:
    """Dim visits on the sensitive range, bright ones on the other; every second dark on each."""
    darks = np.cumsum(~visits.is_open) % 2
    index = np.where(visits.is_open, light_w > SWITCH_W, darks)
    return replace(visits, levels={"range of signal": Levels(RANGES, index.astype(np.intp))})


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
        **{d.stray_light: FULL_SCALE_W * rng.uniform(0.0, 2e-3) for d in train.detectors},
    }
    return {**bench, **drawn}


def observe(
    train: Train, visits: Visits, truth: Mapping[str, float], rng: np.random.Generator, *, per_dwell: int = 5
) -> dict[str, Observed]:
    """Dwells with a floor of 2e-7 W (2e-10 W on the sensitive range) and relative noise of 1e-3 per reading."""
    seen = {}
    for name, level in readings(train, visits, truth).items():
        sd = np.hypot(floor_w(visits, name), 1e-3 * level)
        drawn = level[:, None] + sd[:, None] * rng.standard_normal((level.size, per_dwell))
        seen[name] = Observed(drawn.mean(axis=1), drawn.std(axis=1, ddof=1), np.full(level.size, float(per_dwell)))
    return seen


def floor_w(visits: Visits, detector: str) -> Array:
    ranges = visits.levels.get(f"range of {detector}")
    floors_w = np.array([2e-10, 2e-7])
    return np.full(visits.count, 2e-7) if ranges is None else np.asarray(floors_w[ranges.index])


def variances(visits: Visits, u_w: float = 1e-7) -> dict[str, Array]:
    return {"signal": np.full(visits.count, u_w**2)}
