"""What a prediction or a fit hands over, and the same as plain values for a file.

It owns the words in which an answer is given; it never computes one. Values are in the units of their
kinds: angle deg, retardance waves, ratio, power W, drift 1/h.
"""

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

from rigctl.optics.kernel import Array, Flags


@dataclass(frozen=True, slots=True, eq=False)
class Observed:
    """What one detector read at n visits; a visit without a reading has power nan or n 0.

    Parameters
    ----------
    power_w
        Mean of the dwell, shape (n,), W.
    sd_w
        Standard deviation of the dwell's readings, shape (n,), W.
    n
        Number of readings of the dwell, shape (n,).
    """

    power_w: Array
    sd_w: Array
    n: Array

    def rows(self, keep: Flags) -> "Observed":
        """Only the visits marked in `keep`, shape (n,)."""
        return Observed(self.power_w[keep], self.sd_w[keep], self.n[keep])


@dataclass(frozen=True, slots=True)
class Estimate:
    """A quantity with its standard uncertainty.

    Parameters
    ----------
    name, kind
        Address and kind of the quantity.
    value, u
        Estimate (for a prediction: the nominal value) and standard uncertainty.
    is_unknown
        Whether it was asked for.
    note
        What a reader must know, or nothing.
    interval
        95 % interval where value and uncertainty alone would mislead.
    """

    name: str
    kind: str
    value: float
    u: float
    is_unknown: bool
    note: str = ""
    interval: tuple[float, float] | None = None


@dataclass(frozen=True, slots=True)
class Refusal:
    """Unknowns that the data do not determine, and the most practical way to determine them.

    Parameters
    ----------
    names
        The unknowns that are refused.
    why, remedy
        A sentence each; the remedy is empty when none was found.
    u_with_remedy
        Standard uncertainty that the remedy would give, by name.
    """

    names: tuple[str, ...]
    why: str
    remedy: str
    u_with_remedy: Mapping[str, float]


@dataclass(frozen=True, slots=True)
class Coupling:
    """An unknown that is found only poorly because another is not known well.

    Parameters
    ----------
    name, u
        The unknown and its standard uncertainty.
    u_if_others_known
        What that would be if everything else were known.
    most_blurred_with
        The quantity it is most confused with.
    remedy, u_with_remedy
        The most practical way to part them, in a sentence, and the uncertainty it would give; empty and None when
        none was found.
    """

    name: str
    u: float
    u_if_others_known: float
    most_blurred_with: str
    remedy: str = ""
    u_with_remedy: float | None = None


@dataclass(frozen=True, slots=True)
class ChiSquaredSplit:
    """Chi-squared in two parts: what no sum of harmonics explains, and what this train does not."""

    not_harmonics: float
    not_harmonics_dof: int
    not_train: float
    not_train_dof: int


@dataclass(frozen=True, slots=True)
class Prediction:
    """How well a sweep will determine each quantity, judged at the nominal values."""

    estimates: tuple[Estimate, ...]
    couplings: tuple[Coupling, ...]
    equivalents: tuple[str, ...]
    refusals: tuple[Refusal, ...]


@dataclass(frozen=True, slots=True, eq=False)
class Fit:
    """What the data say.

    Parameters
    ----------
    estimates
        Every quantity that the data determine, the unknown ones and the others, in the order of the light.
    covariance
        Of the estimates in their order, in the units of their kinds.
    chi2, dof
        Weighted sum of squares, what was known beforehand included, and its degrees of freedom.
    split
        Where chi-squared comes from, when the sweep allows to say.
    equivalents
        Other solutions that fit as well.
    refusals
        Unknowns that are not given, with the reason.
    notes
        What a reader of the uncertainties must know.
    fitted_w, u_w
        By detector: fitted power and standard uncertainty of each visit's mean, shape (n,), W.
    """

    estimates: tuple[Estimate, ...]
    covariance: Array
    chi2: float
    dof: int
    split: ChiSquaredSplit | None
    equivalents: tuple[str, ...]
    refusals: tuple[Refusal, ...]
    notes: tuple[str, ...]
    fitted_w: Mapping[str, Array]
    u_w: Mapping[str, Array]

    @property
    def names(self) -> tuple[str, ...]:
        """Addresses of the estimates, the order of the covariance."""
        return tuple(estimate.name for estimate in self.estimates)

    def estimate(self, name: str) -> Estimate | None:
        """The estimate of one quantity, or None when the data do not give it."""
        return next((estimate for estimate in self.estimates if estimate.name == name), None)


def as_dict(fit: Fit) -> dict[str, Any]:
    """A fit as plain values, ready for JSON; without the fitted curve."""
    return {
        "estimates": [_estimate_dict(estimate) for estimate in fit.estimates],
        "covariance": fit.covariance.tolist(),
        "chi2": fit.chi2,
        "dof": fit.dof,
        "chi2_split": None if fit.split is None else _split_dict(fit.split),
        "equivalents": list(fit.equivalents),
        "refusals": [_refusal_dict(refusal) for refusal in fit.refusals],
        "notes": list(fit.notes),
    }


def _estimate_dict(estimate: Estimate) -> dict[str, Any]:
    return {
        "name": estimate.name,
        "kind": estimate.kind,
        "value": estimate.value,
        "standard_uncertainty": estimate.u,
        "unknown": estimate.is_unknown,
        "note": estimate.note,
        "interval_95": None if estimate.interval is None else list(estimate.interval),
    }


def _refusal_dict(refusal: Refusal) -> dict[str, Any]:
    return {
        "names": list(refusal.names),
        "why": refusal.why,
        "remedy": refusal.remedy,
        "standard_uncertainty_with_remedy": dict(refusal.u_with_remedy),
    }


def _split_dict(split: ChiSquaredSplit) -> dict[str, Any]:
    return {
        "not_harmonics": split.not_harmonics,
        "not_harmonics_dof": split.not_harmonics_dof,
        "not_train": split.not_train,
        "not_train_dof": split.not_train_dof,
    }
