"""Names inside a run file: words of a recipe made fit for NeXus, netCDF and an analyst's keyboard.

NeXus allows letters, digits, `_` and inner dots; all names of one group differ.

Source
------
NeXus manual, "Rules for storing data items in NeXus files", naming conventions.
"""

import re
import unicodedata
from collections.abc import Iterable, Sequence

_FORBIDDEN = re.compile(r"[^A-Za-z0-9_.]+")

DETECTOR_SUFFIXES = (
    *("", "_errors", "_sd", "_n", "_range", "_flags", "_levels", "_reading"),
    *("_corrected", "_corrected_errors", "_dark", "_dark_errors"),
    *("_correction_factor", "_correction_factor_errors"),
)
AXIS_SUFFIXES = ("", "_read")


def plain_text(text: str) -> str:
    """Return text in ASCII: letters lose their accents, the rest becomes `?`, controls a space."""
    decomposed = unicodedata.normalize("NFKD", text)
    bare = "".join(letter for letter in decomposed if not unicodedata.combining(letter))
    plain = bare.encode("ascii", "replace").decode()
    return "".join(letter if letter.isprintable() else " " for letter in plain)


def clean_name(text: str) -> str:
    """Return a valid name that reads like the text; spaces become `_`."""
    name = _FORBIDDEN.sub("_", plain_text(text)).strip(".")
    return name if name and not name[0].isdigit() else f"_{name}"


def free_names(texts: Sequence[str], *, suffixes: Sequence[str] = ("",), taken: Iterable[str] = ()) -> tuple[str, ...]:
    """Return a name for each text such that no name with any suffix is taken; the later of two is numbered."""
    used = set(taken)
    names = []
    for text in texts:
        name = _free_name(clean_name(text), suffixes, used)
        used.update(name + suffix for suffix in suffixes)
        names.append(name)
    return tuple(names)


def _free_name(name: str, suffixes: Sequence[str], used: set[str]) -> str:
    candidate, number = name, 2
    while any(candidate + suffix in used for suffix in suffixes):
        candidate, number = f"{name}_{number}", number + 1
    return candidate
