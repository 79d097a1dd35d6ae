"""The least-squares problem: readings, weights, what was known beforehand, and all slopes.

It owns the rows of the problem; it never decides where to start nor what to report.
"""

from collections.abc import Mapping
from dataclasses import dataclass, field, replace

import numpy as np

from rigctl.optics.forward import readings_and_slopes
from rigctl.optics.kernel import Array, Indices
from rigctl.optics.parts import POWER, Quantity, base_of, range_key
from rigctl.optics.train import Train
from rigctl.optics.visits import Visits
from rigctl.polarimetry.coordinates import WIDTHS, to_people

STRAY_WIDTH = 0.1  # of the source's power: brighter stray light would be seen by eye


@dataclass(frozen=True, slots=True, eq=False)
class Problem:
    """A train, its visits and the readings, as rows of one least-squares problem.

    Parameters
    ----------
    asked
        The train as people wrote it.
    train
        The same in the forms of the fit.
    visits
        Settings of n visits.
    level_w
        By detector: measured power, shape (n,); any number where the weight is 0.
    weight
        By detector: 1 over the standard uncertainty of each mean, shape (n,), 1/W; 0 for no reading.
    held
        Quantities that the data do not determine: held near their nominal values by a wide prior, so
        that the uncertainty of the others stays honest.
    fitted
        Follows from the train: the quantities in the forms of the fit, in the order of the columns.
    """

    asked: Train
    train: Train
    visits: Visits
    level_w: Mapping[str, Array]
    weight: Mapping[str, Array]
    held: tuple[str, ...] = ()
    fitted: tuple[Quantity, ...] = field(init=False)

    def __post_init__(self) -> None:
        object.__setattr__(self, "fitted", self.train.fitted)  # asked for at every step

    @property
    def names(self) -> tuple[str, ...]:
        """Their addresses."""
        return tuple(q.name for q in self.fitted)

    @property
    def nominal(self) -> Array:
        """Their nominal values, shape (P,)."""
        return np.array([q.value for q in self.fitted])

    @property
    def row_count(self) -> int:
        """Number of readings that count."""
        return sum(int(np.count_nonzero(weight)) for weight in self.weight.values())

    @property
    def dof(self) -> int:
        """Degrees of freedom; a quantity known beforehand adds as much as it takes."""
        bare = [q for q in self.fitted if q.prior_u is None and q.name not in self.held]
        return max(0, self.row_count - len(bare))

    def widths(self, z: Array) -> Array:
        """What is plausible for each quantity before any sweep, shape (P,)."""
        source_w = {q.name: abs(float(v)) for q, v in zip(self.fitted, z, strict=True) if base_of(q.name) == POWER}
        brightest_w = max(source_w.values(), default=abs(self.train.quantities[POWER].value)) or 1.0
        powers = {q.name: STRAY_WIDTH * brightest_w for q in self.fitted} | dict.fromkeys(source_w, brightest_w)
        return np.array([powers[q.name] if q.kind == "power" else WIDTHS[q.kind] for q in self.fitted])

    def values(self, z: Array) -> dict[str, float]:
        """Every quantity of the train in the forms of the fit."""
        return self.train.values(dict(zip(self.names, map(float, z), strict=True)))

    def rows(self, z: Array) -> tuple[Array, Array]:
        """Residuals and slopes at `z`, in standard uncertainties.

        Returns
        -------
        Residuals, shape (N,), and slopes of the model, shape (N, P); the readings first, then what was
        known beforehand.
        """
        levels, slopes = readings_and_slopes(self.train, self.visits, self.values(z), self.names)
        residuals = [(self.level_w[name] - level) * self.weight[name] for name, level in levels.items()]
        columns = [slope * self.weight[name][:, None] for name, slope in slopes.items()]
        known, known_slopes = self._known(z)
        return np.concatenate([*residuals, known]), np.concatenate([*columns, known_slopes])

    def _known(self, z: Array) -> tuple[Array, Array]:
        """Rows of the priors, in the numbers that people wrote, and of the quantities held."""
        residuals, slopes = [], []
        widths = self.widths(z) if self.held else np.ones(z.size)
        for k, quantity in enumerate(self.fitted):
            unit = np.zeros(z.size)
            if quantity.prior_u is not None:
                value, unit[k] = to_people(quantity.kind, float(z[k]))
                residuals.append((self.asked.quantities[quantity.name].value - value) / quantity.prior_u)
                slopes.append(unit / quantity.prior_u)
            elif quantity.name in self.held:
                unit[k] = 1.0 / widths[k]
                residuals.append((quantity.value - float(z[k])) / widths[k])
                slopes.append(unit)
        return np.array(residuals), np.reshape(slopes, (len(slopes), z.size))

    def holding(self, held: tuple[str, ...]) -> "Problem":
        """The same problem with other quantities held."""
        return replace(self, held=held)

    def rows_at(self, places: Indices) -> "Problem":
        """The problem with only some of its visits."""
        level_w = {name: level[places] for name, level in self.level_w.items()}
        weight = {name: w[places] for name, w in self.weight.items()}
        return replace(self, visits=self.visits.rows(places), level_w=level_w, weight=weight)

    def extended(self, extra: Visits) -> "Problem":
        """The problem with more visits, read as well as those there are on the same range; for slopes only."""
        level_w = {name: np.append(level, np.zeros(extra.count)) for name, level in self.level_w.items()}
        weight = {name: np.append(w, self._typical(name, extra)) for name, w in self.weight.items()}
        return replace(self, visits=Visits.join(self.visits, extra), level_w=level_w, weight=weight)

    def _typical(self, detector: str, extra: Visits) -> Array:
        """Weight of a usual reading on the range of each further visit, 1/W."""
        weight, key = self.weight[detector], range_key(detector)
        if key not in self.visits.levels:
            return np.full(extra.count, _median(weight))
        own, wanted = self.visits.levels[key].index, extra.levels[key].index
        return np.array([_median(weight[own == k]) for k in wanted])

    def told(self, name: str, u: float) -> "Problem":
        """The problem if one quantity were known to `u` beforehand; for slopes only."""
        known = replace(self.train.quantities[name], u=u, is_unknown=False, is_free=False)
        asked = replace(self.asked.quantities[name], u=u, is_unknown=False, is_free=False)
        return replace(self, train=self.train.rewritten(known), asked=self.asked.rewritten(asked))


def _median(weight: Array) -> float:
    counting = weight[weight > 0.0]
    return float(np.median(counting)) if counting.size else 0.0
