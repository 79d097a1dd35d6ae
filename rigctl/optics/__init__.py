"""What the light meets on its way, and the power that arrives: pure arithmetic, no instruments."""

from rigctl.optics.forward import readings, readings_and_slopes
from rigctl.optics.parts import Detector, Element, Quantity
from rigctl.optics.rows import Row, visits_of
from rigctl.optics.scalar import Reader, reader
from rigctl.optics.train import Train
from rigctl.optics.visits import Levels, Visits

__all__ = [
    "Detector",
    "Element",
    "Levels",
    "Quantity",
    "Reader",
    "Row",
    "Train",
    "Visits",
    "reader",
    "readings",
    "readings_and_slopes",
    "visits_of",
]
