"""The numbers in which a fit works, and the way back to those that people read.

It owns the private choice of form: the cosine of a retardance when the sweep cannot see its sine, and
the leaked amplitude of a polarizer when the sweep can see it. In these forms the readings stay
(nearly) linear up to and beyond the edges, so an estimate at 0 or half a wave is not biased.
"""

import math
from collections.abc import Mapping
from dataclasses import replace
from statistics import NormalDist
from types import MappingProxyType

import numpy as np

from rigctl.optics.forward import coefficient_visibility
from rigctl.optics.kernel import Array
from rigctl.optics.parts import Element, Quantity
from rigctl.optics.train import Train
from rigctl.optics.visits import Visits
from rigctl.polarimetry.results import Estimate

# What is plausible before any sweep, in human terms, by form.
WIDTHS: Mapping[str, float] = MappingProxyType(
    {
        "angle": 30.0,
        "retardance": 0.25,
        "cosine": 1.0,
        "ratio": 0.1,
        "leak": 0.3,
        "fraction": 0.1,
        "gain": 0.1,
        "coefficient": 1e-3,
        "power": 1.0,
        "drift": 1.0,
    }
)
# Between which numbers to probe for what holds at large.
PROBES: Mapping[str, tuple[float, float]] = MappingProxyType(
    {
        "angle": (0.0, 180.0),
        "retardance": (0.1, 0.4),
        "ratio": (0.01, 0.1),
        "fraction": (0.01, 0.1),
        "coefficient": (1e-3, 2e-3),
    }
)
TURN = 2.0 * np.pi
Z95 = 1.959963984540054  # two-sided 95 % quantile of the normal distribution
UNSEEN = 1e-12  # rounding of a transmission
LEAST_LEAK = 3e-3  # a leak of exactly 0 has no slope to start from


def beyond_edge(form: str, value: float) -> float:
    """How far a fitted number lies where no real element can: a cosine outside -1..1, a ratio below 0."""
    if form == "cosine":
        return abs(value) - 1.0
    return -value if form == "ratio" else -1.0


def in_fit_forms(train: Train, visits: Visits) -> Train:
    """The train with every fitted strength in the form in which this sweep is nearly linear in it."""
    forms = [q for e in train.elements if train.quantities[e.strength].is_fitted for q in _forms(train, visits, e)]
    return train.rewritten(*forms)


def _forms(train: Train, visits: Visits, element: Element) -> list[Quantity]:
    """An element's strength, at all its levels, in the form for this sweep."""
    quantity = train.quantities[element.strength]
    sees_cosine, sees_sine = _visibility(train, visits, element)
    form = quantity.kind
    if form == "ratio" and sees_cosine:
        form = "leak"
    elif (
        form == "retardance" and quantity.prior_u is None and not sees_sine and not changes_with_warmth(train, element)
    ):
        form = "cosine"
    return [_in_form(q, form) for q in (quantity, *train.levels_of(quantity.name))]


def _in_form(quantity: Quantity, form: str) -> Quantity:
    value = to_fit(form, quantity.value)
    return replace(quantity, kind=form, value=max(value, LEAST_LEAK) if form == "leak" else value)


def changes_with_warmth(train: Train, element: Element) -> bool:
    """Whether an element's strength may differ between temperatures without a level for each."""
    if element.temperature_coefficient is None:
        return False
    coefficient = train.quantities[element.temperature_coefficient]
    return coefficient.is_fitted or coefficient.value != 0.0


def _visibility(train: Train, visits: Visits, element: Element) -> tuple[bool, bool]:
    pairs = [coefficient_visibility(train, visits, x, element) for x in probes(train)]
    return any(_is_seen(cosine) for cosine, _ in pairs), any(_is_seen(sine) for _, sine in pairs)


def _is_seen(slope: Array) -> bool:
    return float(np.max(np.abs(slope), initial=0.0)) > UNSEEN


def probes(train: Train) -> list[dict[str, float]]:
    """Two points away from every special value, to find what holds for this train at large."""
    rng = np.random.default_rng(20)  # any two points will do; always the same ones
    return [{q.name: _probe(q, rng) for q in train.fitted} for _ in range(2)]


def _probe(quantity: Quantity, rng: np.random.Generator) -> float:
    if quantity.prior_u is not None:
        return quantity.value + quantity.prior_u * rng.uniform(0.5, 1.0)
    low, high = PROBES.get(quantity.kind, (0.1, 0.2))
    return float(rng.uniform(low, high))


def to_people(form: str, value: float) -> tuple[float, float]:
    """A fitted number as people read it, and its slope.

    Returns
    -------
    Ratio from leak (leak^2); retardance in 0..0.5 waves from its cosine, with slope 0 beyond the edge;
    anything else unchanged.
    """
    if form == "leak":
        return value * value, 2.0 * value
    if form == "cosine":
        waves = float(np.arccos(np.clip(value, -1.0, 1.0))) / TURN
        sine = np.sin(TURN * waves)
        return waves, -1.0 / (TURN * sine) if abs(value) < 1.0 else 0.0
    return value, 1.0


def to_fit(form: str, value: float) -> float:
    """The fitted number for a value that people read."""
    if form == "leak":
        return float(np.sqrt(max(value, 0.0)))
    return float(np.cos(TURN * value)) if form == "cosine" else value


def estimate_of(quantity: Quantity, form: str, *, value: float, fitted: float, u: float) -> Estimate:
    """A quantity as it is reported.

    Parameters
    ----------
    quantity
        As people wrote it.
    form
        The form of the fit.
    value
        The value that people read, already the chosen one among equivalent ones.
    fitted, u
        The fitted number and its standard uncertainty, in the form of the fit.
    """
    if form == "cosine":
        return _retardance(quantity, value=value, cosine=fitted, u=u)
    plain = Estimate(quantity.name, quantity.kind, value, u * abs(to_people(form, fitted)[1]), quantity.is_unknown)
    return _bounded(plain, form, fitted, u) if quantity.kind == "ratio" and quantity.is_unknown else plain


def _retardance(quantity: Quantity, *, value: float, cosine: float, u: float) -> Estimate:
    low, high = cosine - Z95 * u, cosine + Z95 * u
    if low > -1.0 and high < 1.0:
        return Estimate(
            quantity.name, quantity.kind, value, u / (TURN * math.sqrt(1.0 - cosine**2)), quantity.is_unknown
        )
    sign = -1.0 if np.sin(TURN * value) < -UNSEEN else 1.0
    whole = value - sign * to_people("cosine", cosine)[0]
    ends = sorted(whole + sign * to_people("cosine", c)[0] for c in (low, high))
    spread = max(value - ends[0], ends[1] - value) / Z95
    note = "at an edge of what this sweep can tell (0, half a wave): read the 95 % interval"
    return Estimate(quantity.name, quantity.kind, value, spread, quantity.is_unknown, note, (ends[0], ends[1]))


def _bounded(plain: Estimate, form: str, fitted: float, u: float) -> Estimate:
    """An extinction ratio; below three standard uncertainties with an upper bound."""
    if plain.value >= 3.0 * plain.u:
        return plain
    bound = upper_bound(abs(fitted) if form == "leak" else fitted, u)
    note = "not resolved: read the 95 % upper bound (flat prior on values from 0)"
    return replace(plain, note=note, interval=(0.0, to_people(form, bound)[0]))


def upper_bound(value: float, u: float) -> float:
    """95 % upper bound of a quantity that cannot be negative.

    Source
    ------
    Posterior of a normal estimate x0 with a flat prior on x >= 0: x0 + u z(1 - 0.05 Phi(x0/u)).
    """
    normal = NormalDist()
    # 1 - p loses every digit in the far tail, so the quantile is taken from the other side.
    return value - u * normal.inv_cdf(max(0.05 * normal.cdf(value / u), np.finfo(float).tiny))
