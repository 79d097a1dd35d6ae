"""Arms what may emit: shows the cautions, and asks at a terminal; without one, `--arm` stands for the answer.

The class of a laser is what somebody read on its label and entered; it is never computed.
"""

import sys
from typing import TYPE_CHECKING

from rigctl.cli.console import complain
from rigctl.cli.person import is_somebody_there
from rigctl.errors import PlanError, StopRequestedError

if TYPE_CHECKING:
    from rigctl.files.recipe import Recipe
    from rigctl.files.rig import Rig

VISIBLE_M = (400e-9, 700e-9)
"""Wavelengths that an eye sees: IEC 60825-1, from memory. Outside, a beam gives no warning."""
WORD = "arm"


def cautions(recipe: "Recipe", rig: "Rig") -> list[str]:
    """Return what somebody must know before the beam goes on."""
    wavelength_m = recipe.source.wavelength.value
    lines = ["CAUTION: a laser beam is about to be switched on."]
    for diode in rig.diodes.values():
        lines.append(f"  Diode {diode.name}: class on its label {diode.label_class or 'not entered'}.")
    lines.append(f"  Wavelength {wavelength_m * 1e9:.1f} nm" + ("" if _is_visible(wavelength_m) else ": INVISIBLE."))
    if any(part.kind == "polarizer" and part.turned_by for part in recipe.optics):
        lines.append("  A turning polarizing cube sweeps its rejected beam round the room: enclose it.")
    lines.append("  This software is no safety function: do not rely on it as the interlock.")
    lines.append("  Local rules, the laser safety officer and licensed practice decide.")
    return lines


def _is_visible(wavelength_m: float) -> bool:
    return VISIBLE_M[0] <= wavelength_m <= VISIBLE_M[1]


def arm_or_refuse(recipe: "Recipe", rig: "Rig", *, is_armed: bool) -> None:
    """Show the cautions and go on only when told to.

    Raises
    ------
    PlanError
        Without `--arm` where nobody can be asked.
    StopRequestedError
        When the answer is not the word.
    """
    for line in cautions(recipe, rig):
        complain(line)
    if is_armed:
        return
    if not is_somebody_there():
        raise PlanError(
            "this run may emit, and nobody can be asked: this is no terminal",
            do="Give --arm once the bench is ready to emit unattended.",
        )
    complain(f"Type '{WORD}' and Enter to go on; anything else leaves the bench as it is.")
    if sys.stdin.readline().strip() != WORD:
        raise StopRequestedError("not armed: nothing was sent")
