"""Which elements stand in the beam: by a slide, a second mount, or somebody's hands.

It owns who moves an element, and whether that was confirmed.
"""

from collections.abc import Mapping

from rigctl.errors import PlanError
from rigctl.files.recipe import OpticalElement, Recipe, Step
from rigctl.files.rig import Rig
from rigctl.runner.bench import OpenBench
from rigctl.runner.person import Person
from rigctl.runner.polling import complete
from rigctl.timeline import Timeline


def movable(recipe: Recipe) -> dict[str, OpticalElement]:
    """Return the elements that any step takes out, by name."""
    names = {name for step in recipe.steps for name in step.without}
    return {part.name: part for part in recipe.optics if part.name in names}


def needs_hands(part: OpticalElement, rig: Rig) -> bool:
    """Whether only a person can move an element on this rig."""
    return part.taken_out_by is None or rig.entry(part.taken_out_by) is None


def refuse_without_hands(recipe: Recipe, rig: Rig) -> None:
    """Refuse a recipe that needs hands for its elements, where there are none.

    Errors
    ------
    `PlanError` naming each step that would need them and does not say `unattended: go on`.
    """
    parts = movable(recipe)
    for step in recipe.steps:
        by_hand = [name for name in step.without if needs_hands(parts[name], rig)]
        if by_hand and not step.goes_on_unattended:
            raise PlanError(
                f"step '{step.name}' needs somebody to take out {', '.join(by_hand)}, and nobody can be asked",
                where=recipe.path,
                do="Run it at a terminal, give the rig a slide, or let the step say `unattended: go on`.",
            )


class Presence:
    """Puts elements in and out for each step."""

    def __init__(self, bench: OpenBench, timeline: Timeline, person: Person) -> None:
        self.bench, self.timeline, self.person = bench, timeline, person
        self._parts = movable(bench.recipe)
        # what a person moves stands where the recipe has it; a slide may have been left anywhere
        self._is_in = {name: True if needs_hands(part, bench.rig) else None for name, part in self._parts.items()}

    def arrange(self, step: Step) -> bool:
        """Bring every element where a step wants it; return whether that was confirmed."""
        is_confirmed = True
        for name, part in self._parts.items():
            is_wanted_in = name not in step.without
            if self._is_in[name] == is_wanted_in:
                continue
            if needs_hands(part, self.bench.rig) and not self.person.is_there:
                is_confirmed = False
                continue
            self._move(part, is_wanted_in)
            self._is_in[name] = is_wanted_in
        return is_confirmed

    def state(self, step: Step) -> Mapping[str, bool]:
        """Return what a step wants in the beam, of the elements that move."""
        return {name: name not in step.without for name in self._parts}

    def _move(self, part: OpticalElement, is_in: bool) -> None:
        role = part.taken_out_by
        if role is not None and role in self.bench.slides:
            complete(self.timeline, {role: self.bench.slides[role].begin_set(is_in)})
        elif role is not None and role in self.bench.stages:
            target_deg = part.in_deg if is_in else part.out_deg
            assert target_deg is not None
            complete(self.timeline, {role: self.bench.stages[role].begin_move(target_deg)})
        elif is_in:
            self.person.put_in(part.name)
        else:
            self.person.take_out(part.name)
