"""Trains and visits for the tests of the optics, built in a line."""

from collections.abc import Sequence
from dataclasses import replace
from typing import TypeAlias

import numpy as np

from rigctl.optics import Detector, Element, Levels, Quantity, Train, Visits
from rigctl.optics.kernel import Array, Stokes

Part: TypeAlias = tuple[Element, tuple[Quantity, ...]]


def polarizer(
    name: str,
    *,
    axis_deg: float = 0.0,
    ratio: float = 0.0,
    mount: str | None = None,
    dial_offset_deg: float = 0.0,
) -> Part:
    strength = Quantity(f"{name}.extinction ratio", "ratio", ratio)
    return Element(name, "polarizer", mount), _with_angles(name, strength, axis_deg, dial_offset_deg, mount)


def retarder(
    name: str,
    *,
    waves: float,
    axis_deg: float = 0.0,
    mount: str | None = None,
    dial_offset_deg: float = 0.0,
) -> Part:
    strength = Quantity(f"{name}.retardance", "retardance", waves)
    return Element(name, "retarder", mount), _with_angles(name, strength, axis_deg, dial_offset_deg, mount)


def pick_off(name: str, *, fraction: float) -> Part:
    return Element(name, "pick-off"), (Quantity(f"{name}.fraction", "fraction", fraction),)


def warmed(part: Part, role: str, *, per_k: float, reference_c: float | None = None) -> Part:
    """The same part on something that warms it."""
    element, quantities = part
    coefficient = Quantity(f"{element.name}.temperature coefficient", "coefficient", per_k)
    return replace(element, warmed_by=role, reference_temperature_c=reference_c), (*quantities, coefficient)


def each(train: Train, name: str, key: str) -> Train:
    """The same train with one quantity that has a value for each level."""
    return train.rewritten(replace(train.quantities[name], each=key))


def _with_angles(
    name: str, strength: Quantity, axis_deg: float, dial_offset_deg: float, mount: str | None
) -> tuple[Quantity, ...]:
    axis = Quantity(f"{name}.axis", "angle", axis_deg)
    offset = (Quantity(f"{name}.dial offset", "angle", dial_offset_deg),) if mount else ()
    return (strength, axis, *offset)


def assemble(
    *parts: Part,
    power_w: float = 1.0,
    drift_per_h: float = 0.0,
    stray_w: float = 0.0,
    detectors: Sequence[str | Detector] = ("signal",),
    source: Stokes[float] = (1.0, 0.0, 0.0, 0.0),
) -> Train:
    own = [q for _, quantities in parts for q in quantities]
    source_quantities = [
        Quantity("source.power", "power", power_w),
        Quantity("source.drift", "drift", drift_per_h),
    ]
    stand = tuple(d if isinstance(d, Detector) else Detector(d) for d in detectors)
    stray = [Quantity(d.stray_light, "power", stray_w) for d in stand]
    quantities = {q.name: q for q in (*own, *source_quantities, *stray)}
    return Train(tuple(e for e, _ in parts), stand, quantities, source)


def visits_at(angles_deg: Sequence[float] | Array, mount: str = "part mount") -> Visits:
    angles = np.asarray(angles_deg, dtype=float)
    return Visits({mount: angles}, np.ones(angles.size, dtype=bool), np.arange(angles.size) / 600.0)


def random_train(rng: np.random.Generator, *, drift_per_h: float = 0.0, stray_w: float = 0.0) -> Train:
    """Polarizers of finite extinction and retarders in random order, some of them on two mounts."""
    count = int(rng.integers(2, 6))
    parts = [_random_part(rng, f"element {i}") for i in range(count)]
    S1, S2, S3 = rng.uniform(-0.5, 0.5, 3)
    return assemble(
        *parts,
        power_w=float(rng.uniform(0.1, 2.0)),
        drift_per_h=drift_per_h,
        stray_w=stray_w,
        source=(1.0, float(S1), float(S2), float(S3)),
    )


def _random_part(rng: np.random.Generator, name: str) -> Part:
    axis_deg, dial_offset_deg = map(float, rng.uniform(-180.0, 180.0, 2))
    mount = (None, "part mount", "exit mount")[int(rng.integers(3))]
    if rng.random() < 0.5:
        ratio = float(10.0 ** rng.uniform(-6.0, 0.0))
        return polarizer(name, axis_deg=axis_deg, ratio=ratio, mount=mount, dial_offset_deg=dial_offset_deg)
    waves = float(rng.uniform(-1.0, 2.0))
    return retarder(name, waves=waves, axis_deg=axis_deg, mount=mount, dial_offset_deg=dial_offset_deg)


def random_visits(rng: np.random.Generator, count: int = 12) -> Visits:
    angles = {mount: rng.uniform(-360.0, 720.0, count) for mount in ("part mount", "exit mount")}
    return Visits(angles, rng.random(count) > 0.2, rng.uniform(0.0, 3.0, count))


def random_bench(rng: np.random.Generator) -> Train:
    """A random train with two pick-offs, each with a monitor, a warmed element and every quantity at some value."""
    parts = [_random_part(rng, f"element {i}") for i in range(4)]
    parts[1] = warmed(retarder("element 1", waves=0.3, mount="part mount"), "oven", per_k=0.01, reference_c=22.0)
    parts[2] = warmed(polarizer("element 2", axis_deg=50.0, ratio=0.05), "room", per_k=-0.004)
    first, second = (pick_off(f"pick-off {i}", fraction=float(rng.uniform(0.02, 0.5))) for i in range(2))
    detectors = ("signal", Detector("monitor", "pick-off 0"), Detector("second monitor", "pick-off 1"), "other")
    S1, S2, S3 = map(float, rng.uniform(-0.5, 0.5, 3))
    train = assemble(
        *parts[:2],
        first,
        parts[2],
        second,
        parts[3],
        power_w=float(rng.uniform(0.1, 2.0)),
        drift_per_h=0.05,
        stray_w=0.01,
        detectors=detectors,
        source=(1.0, S1, S2, S3),
    )
    return train.rewritten(*(Quantity(d.gain, "gain", float(rng.uniform(0.5, 1.5))) for d in train.detectors))


def bench_visits(rng: np.random.Generator, count: int = 24) -> Visits:
    """Visits of `random_bench` between which everything changes."""
    bare = random_visits(rng, count)
    return replace(
        bare,
        temperature_c={role: rng.uniform(15.0, 35.0, count) for role in ("oven", "room")},
        present={name: rng.random(count) > 0.3 for name in ("element 0", "element 1", "element 3", "pick-off 1")},
        power=rng.uniform(0.5, 1.5, count),
        levels={
            "oven": Levels(("22 degC", "25 degC", "28 degC"), rng.integers(0, 3, count)),
            "step": Levels(("empty pair", "plate"), rng.integers(0, 2, count)),
            "range of signal": Levels(("20 uW", "2 mW"), rng.integers(0, 2, count)),
        },
    )


def azimuth_deg(train: Train, element: Element, angles_deg: dict[str, float]) -> float:
    """Where an element's axis stands, written out from the definition."""
    axis = train.quantities[f"{element.name}.axis"].value
    if element.mount is None:
        return axis
    return axis + angles_deg[element.mount] - train.quantities[f"{element.name}.dial offset"].value
