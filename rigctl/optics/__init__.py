"""What the light meets on its way, and the power that arrives: pure arithmetic, no instruments."""

from rigctl.optics.forward import reader, readings, readings_and_slopes
from rigctl.optics.train import Detector, Element, Quantity, Train
from rigctl.optics.visits import Visits

__all__ = ["Detector", "Element", "Quantity", "Train", "Visits", "reader", "readings", "readings_and_slopes"]
