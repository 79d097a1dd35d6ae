"""What the size of chi-squared says about the uncertainties, in a factor and in words.

It owns that judgement; uncertainties are never enlarged without a sentence that says so.
"""

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from rigctl.optics.parts import range_key
from rigctl.optics.visits import Levels, Visits
from rigctl.polarimetry.results import Observed
from rigctl.polarimetry.variance import reading_variances

Z995 = 2.5758293035489004  # two-sided 99 % quantile of the normal distribution


@dataclass(frozen=True, slots=True)
class Scatter:
    """Chi-squared of a fit and what its weights rest on.

    Parameters
    ----------
    chi2, dof
        Of the fit.
    within_dof
        Degrees of freedom of the scatter within the dwells, which set the weights.
    silent
        Detectors whose dwells show no scatter at all.
    """

    chi2: float
    dof: int
    within_dof: float
    silent: tuple[str, ...] = ()

    @property
    def growth(self) -> float:
        """Factor on all standard uncertainties: 1 while chi-squared is not beyond its 99 % band.

        Source
        ------
        R. T. Birge, Phys. Rev. 40, 207 (1932), citation from memory: the square root of chi-squared
        per degree of freedom.
        """
        if self.dof and (self.silent or self.chi2 > self.band[1]):
            return float(np.sqrt(self.chi2 / self.dof))
        return 1.0

    @property
    def band(self) -> tuple[float, float]:
        """The middle 99 % of chi-squared.

        Source
        ------
        E. B. Wilson, M. M. Hilferty, Proc. Natl. Acad. Sci. 17, 684 (1931), citation from memory: the
        cube root is nearly normal. The weights are themselves estimates: to first order the relative
        variances 2/dof of both add.
        """
        part = 2.0 / 9.0 * (1.0 / self.dof + (1.0 / self.within_dof if self.within_dof else 0.0))
        low, high = (self.dof * max(0.0, 1.0 - part + z * part**0.5) ** 3 for z in (-Z995, Z995))
        return low, high

    def notes(self) -> tuple[str, ...]:
        """Sentences for whoever reads the uncertainties."""
        if not self.dof:
            return ("as many quantities as readings: nothing is left to judge the fit by",)
        if self.silent:
            names = " and ".join(self.silent)
            return (f"the dwells of {names} show no scatter: uncertainties rest on the misses of the fit",)
        if self.growth > 1.0:
            return (
                f"the readings miss the fit by {self.growth:.2f} times what their scatter within a dwell "
                "explains: all standard uncertainties are multiplied by that",
            )
        if self.chi2 < self.band[0]:
            return ("the means scatter less than the readings within a dwell: the noise is not white",)
        return ()


def scatter(chi2: float, dof: int, levels: Mapping[str, Observed], visits: Visits) -> Scatter:
    """What chi-squared says, given the dwells and the ranges on which they were read."""
    within = sum(float(np.sum(np.maximum(observed.n - 1, 0))) for observed in levels.values())
    silent = tuple(
        name for name, observed in levels.items() if _is_silent(observed, visits.levels.get(range_key(name)))
    )
    return Scatter(chi2, dof, within, silent)


def _is_silent(observed: Observed, ranges: Levels | None) -> bool:
    """Whether the dwells of some range, where there are any, show no scatter."""
    read = observed.n >= 1
    return bool(np.any(np.isnan(reading_variances(observed, observed.power_w, ranges)[read])))
