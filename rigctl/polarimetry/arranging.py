"""The train as a fit takes it: only the detectors that were read, and what every change of range brings along.

It owns the quantities that nobody writes down: stray light on each range, and how well ranges agree.
"""

from collections.abc import Collection
from dataclasses import replace

import numpy as np

from rigctl.optics.parts import Detector, Quantity, at_level
from rigctl.optics.train import Train
from rigctl.optics.visits import Levels, Visits

GAIN_U = 0.005  # usual agreement of a power meter's neighbouring ranges, common practice


def arranged(train: Train, visits: Visits, read: Collection[str]) -> Train:
    """The train to fit.

    Parameters
    ----------
    train
        As people wrote it.
    visits
        Settings of n visits.
    read
        The detectors that have readings.

    Returns
    -------
    The train with these detectors, a quantity for each level, and for a detector that was read on several
    ranges its stray light on each of them and its gain relative to the most used one.
    """
    train = train.read_by(read)
    for detector in train.detectors:
        levels = visits.levels.get(detector.range_key)
        if levels is not None and np.unique(levels.index).size > 1:
            train = train.rewritten(*_of_ranges(train, detector, levels, visits))
    return train.levelled(visits)


def _of_ranges(train: Train, detector: Detector, levels: Levels, visits: Visits) -> list[Quantity]:
    stray = train.quantities[detector.stray_light]
    found = [replace(stray, each=detector.range_key)] if stray.each is None else []
    if detector.gain in train.quantities:
        return found
    lit = np.bincount(levels.index[visits.is_open], minlength=len(levels.labels))
    gain = Quantity(detector.gain, "gain", 1.0, each=detector.range_key)
    exact = [replace(gain, name=at_level(gain.name, label), each=None) for label in levels.labels]
    others = [replace(q, u=GAIN_U) for k, q in enumerate(exact) if lit[k] and k != np.argmax(lit)]
    return [*found, gain, *exact, *others]
