"""How estimates and predictions look on a screen.

Pure text: it owns rounding, columns and words; it prints nothing. An uncertainty is shown with two significant
digits and its value to the same place (JCGM 100:2008, 7.2.6).
"""

import math
from collections.abc import Mapping, Sequence
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from rigctl.polarimetry import Estimate, Fit, Prediction
    from rigctl.polarimetry.results import Refusal

POWER_PREFIXES = ((1.0, "W"), (1e-3, "mW"), (1e-6, "uW"), (1e-9, "nW"), (1e-12, "pW"))
UNITS = {
    "angle": (1.0, "deg"),
    "retardance": (1.0, "waves"),
    "ratio": (1.0, ""),
    "fraction": (100.0, "%"),
    "gain": (1.0, ""),
    "drift": (100.0, "%/h"),
    "coefficient": (1e6, "ppm/K"),
}


def scale_and_unit(kind: str, value: float) -> tuple[float, str]:
    """Return by what to multiply a value of a kind, and the unit it then has."""
    if kind != "power":
        return UNITS[kind]
    size, unit = next((pair for pair in POWER_PREFIXES if abs(value) >= pair[0]), POWER_PREFIXES[-1])
    return 1.0 / size, unit


def decimals_for(u: float) -> int:
    """Return how many decimals show two significant digits of an uncertainty."""
    if not (math.isfinite(u) and u > 0.0):
        return 6
    return max(0, 1 - math.floor(math.log10(float(f"{u:.1e}"))))


def value_text(kind: str, value: float, u: float) -> str:
    """Return `0.24731 +- 0.00012 waves`."""
    scale, unit = scale_and_unit(kind, max(abs(value), u))
    places = decimals_for(u * scale)
    return f"{value * scale:.{places}f} +- {u * scale:.{places}f} {unit}".rstrip()


def _table(rows: Sequence[Sequence[str]]) -> list[str]:
    widths = [max(len(row[column]) for row in rows) for column in range(len(rows[0]))] if rows else []
    return [
        "  " + "  ".join(cell.ljust(width) for cell, width in zip(row, widths, strict=True)).rstrip() for row in rows
    ]


def _row(estimate: "Estimate", truth: Mapping[str, float]) -> tuple[str, str, str, str]:
    return (
        estimate.name,
        value_text(estimate.kind, estimate.value, estimate.u),
        _truth_text(estimate, truth),
        _remark(estimate),
    )


def _scale_and_unit_of(estimate: "Estimate") -> tuple[float, str]:
    return scale_and_unit(estimate.kind, max(abs(estimate.value), estimate.u))


def _truth_text(estimate: "Estimate", truth: Mapping[str, float]) -> str:
    if estimate.name not in truth:
        return ""
    scale, unit = _scale_and_unit_of(estimate)
    true = comparable_truth(estimate.kind, estimate.value, truth[estimate.name])
    return f"truth {true * scale:.{decimals_for(estimate.u * scale)}f} {unit}".rstrip()


def comparable_truth(kind: str, value: float, truth: float) -> float:
    """Return a truth so that it can be compared with an estimate: of an angle, the nearest modulo 180 deg.

    An axis has no direction, so angles that differ by half a turn are the same.
    """
    return value + math.remainder(truth - value, 180.0) if kind == "angle" else truth


def _remark(estimate: "Estimate") -> str:
    """Say an extinction ratio the way the trade writes it, and what else a reader must know."""
    is_resolved = estimate.kind == "ratio" and estimate.value > 3.0 * estimate.u > 0.0
    written = [f"that is {1.0 / estimate.value:.4g}:1"] if is_resolved else []
    if estimate.interval is not None:
        low, high = (value * _scale_and_unit_of(estimate)[0] for value in estimate.interval)
        written.append(f"95 %: {low:.4g} to {high:.4g}")
    return "; ".join([*written, *([estimate.note] if estimate.note else [])])


def _refusal_lines(refusals: "Sequence[Refusal]") -> list[str]:
    lines = []
    for refusal in refusals:
        lines.append(f"  {', '.join(refusal.names)}: not given: {refusal.why}")
        if refusal.remedy:
            gains = ", ".join(f"{name} to {u:.2g}" for name, u in refusal.u_with_remedy.items())
            lines.append(f"    cure: {refusal.remedy}" + (f" ({gains})" if gains else ""))
    return lines


def fit_lines(fit: "Fit", truth: Mapping[str, float]) -> list[str]:
    """Return a fit as lines: what was asked for, what was fitted along, how well the train explains the data."""
    rows = [_row(estimate, truth) for estimate in fit.estimates]
    table = _table(rows)
    asked = [line for line, estimate in zip(table, fit.estimates, strict=True) if estimate.is_unknown]
    along = [line for line, estimate in zip(table, fit.estimates, strict=True) if not estimate.is_unknown]
    lines = ["estimates, each with its standard uncertainty:", *asked, *_refusal_lines(fit.refusals)]
    lines += ["fitted along:", *along]
    lines.append(f"chi-squared {fit.chi2:.1f} for {fit.dof} degrees of freedom{_split_text(fit)}")
    if fit.equivalents:
        lines.append("these readings cannot tell it from: " + "; ".join(fit.equivalents))
    return lines + [f"note: {note}" for note in fit.notes]


def _split_text(fit: "Fit") -> str:
    split = fit.split
    if split is None:
        return ""
    return (
        f": {split.not_harmonics:.1f} for {split.not_harmonics_dof} is not harmonics, "
        f"{split.not_train:.1f} for {split.not_train_dof} is harmonics that the train does not explain"
    )


def prediction_lines(prediction: "Prediction") -> list[str]:
    """Return what a sweep will tell, as lines."""
    rows = [
        (estimate.name, value_text(estimate.kind, estimate.value, estimate.u))
        for estimate in prediction.estimates
        if estimate.is_unknown
    ]
    lines = ["  expected standard uncertainty, at the nominal values and the meter's own noise:"] if rows else []
    lines += ["  " + line for line in _table(rows)] + _refusal_lines(prediction.refusals)
    for coupling in prediction.couplings:
        lines.append(
            f"    {coupling.name} would be known to {coupling.u_if_others_known:.2g} "
            f"if {coupling.most_blurred_with} were known"
        )
        if coupling.u_with_remedy is not None:
            lines.append(f"    cure: {coupling.remedy} ({coupling.name} to {coupling.u_with_remedy:.2g})")
    return lines


def fit_as_dict(fit: "Fit", truth: Mapping[str, float]) -> dict[str, Any]:
    """Return a fit as plain values, with the hidden truth of a rehearsal beside each estimate."""
    from rigctl.polarimetry import as_dict

    values = as_dict(fit)
    for estimate in values["estimates"]:
        if estimate["name"] in truth:
            true = truth[estimate["name"]]
            estimate["truth"] = comparable_truth(estimate["kind"], estimate["value"], true)
    return values
