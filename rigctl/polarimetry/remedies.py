"""What can be done about a sweep that does not tell enough: more readings, the most practical first.

It owns the candidates and their sentences, read off the train and its visits; whether one helps is judged elsewhere.
"""

from collections.abc import Iterator, Sequence
from dataclasses import dataclass, replace

import numpy as np

from rigctl.optics.kernel import Array, Flags
from rigctl.optics.visits import Levels, Visits, groups
from rigctl.polarimetry.problem import Problem

FEW_READINGS = 10
TURN_STEP_DEG = 10.0
FURTHER_DEG = (45.0, 90.0)
WARMER_K = 5.0
SAME_TEMPERATURE_K = 1.0
KNOWN_WELL = 1e-3  # of what is plausible


@dataclass(frozen=True, slots=True)
class Remedy:
    """Something to do, and the problem once it is done."""

    sentence: str
    problem: Problem


def remedies(problem: Problem, z: Array, others: Sequence[str]) -> Iterator[Remedy]:
    """Everything that may help, the most practical first; last, to know one of the `others` beforehand."""
    for sentence, extra in _more_visits(problem):
        yield Remedy(sentence, problem.extended(extra))
    widths = dict(zip(problem.names, problem.widths(z), strict=True))
    for name in others:
        sentence = f"Measure {name} apart and state it with its tolerance in the recipe."
        yield Remedy(sentence, problem.told(name, KNOWN_WELL * widths[name]))


def _more_visits(problem: Problem) -> Iterator[tuple[str, Visits]]:
    visits = problem.visits
    yield from _darks(problem)
    for mount, angles in visits.angle_deg.items():
        if not np.ptp(angles[visits.is_open]):
            yield f"Add a sweep over a full turn of {mount}.", _turn(_usual(visits), mount)
        elif len(visits.angle_deg) > 1:
            for angle_deg in FURTHER_DEG:
                further = {**visits.angle_deg, mount: angles + angle_deg}
                yield f"Repeat the sweep with {mount} {angle_deg:g} deg further.", replace(visits, angle_deg=further)
    yield from _parts_out(problem)
    yield from _other_levels(problem)


def _darks(problem: Problem) -> Iterator[tuple[str, Visits]]:
    """Readings with the beam blocked, on every range on which there are none."""
    visits = problem.visits
    ranges = [visits.levels[d.range_key] for d in problem.asked.detectors if d.range_key in visits.levels]
    place = groups([levels.index for levels in ranges], visits.count)
    missing = [k for k in np.unique(place) if not np.any(~visits.is_open[place == k])]
    if missing:
        first = [int(np.argmax(place == k)) for k in missing]
        dark = _in_the_middle(visits.rows(np.repeat(first, FEW_READINGS)), visits)
        where = " on each range" if np.unique(place).size > 1 else ""
        sentence = f"Add {FEW_READINGS} readings with the beam blocked{where}."
        yield sentence, replace(dark, is_open=np.zeros(dark.count, dtype=bool))


def _usual(visits: Visits) -> Visits:
    """One visit with the beam open, and everything in it if there was such a visit."""
    everything: Flags = np.all([visits.is_open, *visits.present.values()], axis=0)
    one = visits.rows(np.array([np.argmax(everything if np.any(everything) else visits.is_open)]))
    return _in_the_middle(one, visits)


def _in_the_middle(extra: Visits, visits: Visits) -> Visits:
    """Further visits in the middle of the time, so that the drift means the same."""
    return replace(extra, time_h=np.full(extra.count, float(np.median(visits.time_h))))


def _turn(usual: Visits, mount: str) -> Visits:
    dial = np.arange(0.0, 360.0, TURN_STEP_DEG)
    many = usual.rows(np.zeros(dial.size, dtype=np.intp))
    return replace(many, angle_deg={**many.angle_deg, mount: dial})


def _parts_out(problem: Problem) -> Iterator[tuple[str, Visits]]:
    """Each part under test, and whatever else was out before, out of the beam: as it stands, and with turns."""
    visits, train = problem.visits, problem.asked
    tested = {e.name for e in train.elements if any(train.quantities[a].is_unknown for a in e.addresses)}
    for element in train.elements:
        if element.name not in tested | visits.present.keys():
            continue
        few = _usual(visits).rows(np.zeros(FEW_READINGS, dtype=np.intp))
        out = _without(few, element.name)
        yield f"Add {FEW_READINGS} readings with {element.name} out of the beam.", out
        turned = {e.mount for e in train.elements if e is not element and e.mount is not None}
        for mount in sorted(turned):
            sentence = f"Add a sweep over a full turn of {mount} with {element.name} out of the beam."
            yield sentence, _turn(out.rows(np.array([0])), mount)


def _without(visits: Visits, name: str) -> Visits:
    return replace(visits, present={**visits.present, name: np.zeros(visits.count, dtype=bool)})


def _other_levels(problem: Problem) -> Iterator[tuple[str, Visits]]:
    """The same sweep once more: at a level that has no reading yet, or warmer where it was always as warm."""
    visits = problem.visits
    wanted = {q.each for q in problem.asked.quantities.values() if q.each is not None}
    ranges = {d.range_key for d in problem.asked.detectors}
    for key in sorted(wanted - ranges):
        labels = visits.levels[key].labels
        for k in sorted(set(range(len(labels))) - set(visits.levels[key].index[visits.is_open].tolist())):
            moved = Levels(labels, np.full(visits.count, k))
            sentence = f"Repeat the sweep where {key} is {labels[k]}."
            yield sentence, replace(visits, levels={**visits.levels, key: moved})
    for role in sorted({e.warmed_by for e in problem.asked.elements if e.warmed_by is not None}):
        degrees = visits.temperature_c[role]
        if np.ptp(degrees[visits.is_open]) < SAME_TEMPERATURE_K:
            sentence = f"Repeat the sweep with {role} {WARMER_K:g} K warmer."
            yield sentence, replace(visits, temperature_c={**visits.temperature_c, role: degrees + WARMER_K})
