"""The simulated bench: one world, and a twin at each address of the rig.

It owns nothing but the way in. The factory at the end is what the rest of polrig finds it by.
"""

from collections.abc import Mapping

from rigctl.files.recipe import Recipe
from rigctl.files.rig import Rig
from rigctl.interfaces import BenchFactory, Option, RoleKind
from rigctl.links.channel import Twin
from rigctl_sim.assembly import assemble
from rigctl_sim.default_rig import default_rig
from rigctl_sim.keys import BENCH_OPTIONS, TWIN_OPTIONS
from rigctl_sim.wires import entries_by_address, twins_of
from rigctl_sim.world import World


class SimulatedBench:
    """A world with twins around it."""

    def __init__(self, world: World, twins: Mapping[str, Twin], truth: Mapping[str, float]) -> None:
        self._world, self._twins, self._truth = world, dict(twins), dict(truth)

    def twin(self, address: str) -> Twin:
        """Return what stands at an address of the rig file."""
        return self._twins[address]

    def truth(self) -> Mapping[str, float]:
        """Return the hidden value of every quantity of the train, and of each level of those that have levels.

        The source's power is that at instant 0, at the current and the temperature as the recipe prepares them.
        """
        return dict(self._truth)

    def emits(self, now_s: float) -> bool:
        """Whether the bench could harm somebody now: the source on, or light let in where nobody can switch it."""
        return self._world.emits(now_s)

    def block_by_hand(self, is_blocked: bool, now_s: float) -> None:
        """Block the beam at the source by hand, or clear it."""
        self._world.block_by_hand(is_blocked, now_s)

    def cap_by_hand(self, is_capped: bool, now_s: float) -> None:
        """Put a cap on every detector, or take them off."""
        self._world.cap_by_hand(is_capped, now_s)

    def take_out_by_hand(self, element: str, is_out: bool, now_s: float) -> None:
        """Take an element out of the beam by hand, or put it back."""
        self._world.take_out_by_hand(element, is_out, now_s)


class SimulatedBenchFactory:
    """Builds benches; it has no state."""

    def twin_options(self, driver: str) -> Mapping[str, Option]:
        """Keys of the rig file's `simulated:` for an instrument of this driver."""
        return TWIN_OPTIONS.get(driver, {})

    def bench_options(self) -> Mapping[str, Option]:
        """Keys of the rig file's `simulated:` for the bench as a whole."""
        return BENCH_OPTIONS

    def default_rig(self, roles: Mapping[str, RoleKind]) -> str:
        """Return the text of a rig file with a well-behaved instrument for each role."""
        return default_rig(roles)

    def build(self, recipe: Recipe, rig: Rig, seed: int) -> SimulatedBench:
        """Build a bench; the same seed gives the same truth and the same noise."""
        at_address = entries_by_address(rig)
        assembly = assemble(recipe, rig, seed)
        return SimulatedBench(assembly.world, twins_of(assembly, at_address), assembly.truth)


FACTORY: BenchFactory = SimulatedBenchFactory()
