"""What a run file says of itself, and what makes a rehearsal a rehearsal and a real run real."""

import socket
import uuid
from collections.abc import Iterator
from dataclasses import dataclass, field, replace
from datetime import UTC, datetime, timedelta
from pathlib import Path

import numpy
import pytest
from rehearsal_cases import HEAD, RECIPE, RIG, make_job
from runner_cases import TWO_AXES, TWO_MOUNTS, TWO_STEPS

from rigctl import __version__
from rigctl.links.channel import Channel, Twin
from rigctl.links.family import Opening
from rigctl.links.tcp import TcpChannel
from rigctl.plugins import find_bench_factory
from rigctl.record import Header
from rigctl.runner.hardware import real_job
from rigctl.runner.header import make_header
from rigctl.runner.person import NobodyThere
from rigctl.runner.progress import Silent
from rigctl.runner.rehearsal import FIRST_EVENING, SimulatedPerson
from rigctl.runner.run import Job
from rigctl.timeline import StopRequest, Timeline, VirtualTimeline

START = datetime(2026, 3, 1, 12, 0, tzinfo=UTC)


@pytest.fixture
def stop() -> Iterator[StopRequest]:
    request = StopRequest()
    yield request
    request.close()


def header(path: Path, recipe: str = RECIPE, rig: str = RIG) -> Header:
    job = make_job(path, recipe=recipe, rig=rig)
    return make_header(job.recipe, job.rig, start=START, identifier="7", operator="J. Doe", part="P-7")


def live(rehearsal: Job, stop: StopRequest) -> Job:
    return real_job(
        rehearsal.recipe,
        rehearsal.rig,
        drivers=rehearsal.drivers,
        path=rehearsal.path,
        person=NobodyThere(),
        progress=Silent(),
        stop=stop,
        operator="J. Doe",
        part="P-7",
    )


def test_a_header_keeps_recipe_and_rig_verbatim_with_their_digests(tmp_path: Path) -> None:
    found = header(tmp_path / "run.h5")

    assert (found.recipe.text, found.recipe.file_name) == (RECIPE, "recipe.yaml")
    assert (found.rig.text, found.rig.file_name) == (RIG, "rig.yaml")
    assert found.recipe == type(found.recipe).of(RECIPE, "recipe.yaml")
    assert found.rig == type(found.rig).of(RIG, "rig.yaml")


def test_a_header_says_when_who_which_part_and_with_which_versions(tmp_path: Path) -> None:
    found = header(tmp_path / "run.h5")

    assert (found.uuid, found.start, found.operator, found.part) == ("7", START, "J. Doe", "P-7")
    assert found.title == "short sweep of a sheet polarizer"
    assert found.versions["polrig"] == __version__
    assert found.versions["numpy"] == numpy.__version__
    assert set(found.versions) == {"polrig", "python", "numpy", "h5py"}


def test_detectors_are_the_power_meters_of_the_recipe_in_its_order(tmp_path: Path) -> None:
    recipe = RECIPE.replace("signal: power meter", "monitor: power meter, signal: power meter").replace(
        "  - detector: {role: signal}", "  - detector: {role: signal}\n  - detector: {role: monitor}"
    )
    rig = RIG.replace("  shutter 1", "  head 2: {driver: scpi-power-meter, at: tcp://127.0.0.1:5008}\n  shutter 1")

    found = header(tmp_path / "run.h5", recipe, rig.replace("signal: head 1", "signal: head 1, monitor: head 2"))

    assert found.detectors == ("monitor", "signal")


def test_steps_stand_in_the_header_in_the_order_of_the_recipe(tmp_path: Path) -> None:
    steps = header(tmp_path / "run.h5", TWO_STEPS).steps

    assert [(step.name, step.shape) for step in steps] == [("up", (12,)), ("down", (3,))]
    assert header(tmp_path / "run.h5", TWO_MOUNTS, TWO_AXES).steps[0].shape == (3, 2)


def test_one_seed_gives_one_identifier_and_one_start(tmp_path: Path) -> None:
    first, again = (make_job(tmp_path / name, seed=7).header for name in ("a.h5", "b.h5"))

    assert first == again
    assert first.start == FIRST_EVENING + timedelta(days=7)
    assert uuid.UUID(first.uuid).version == 5


def test_another_seed_recipe_or_rig_gives_another_identifier(tmp_path: Path) -> None:
    path = tmp_path / "run.h5"
    jobs = [
        make_job(path, seed=7),
        make_job(path, seed=8),
        make_job(path, seed=7, recipe=RECIPE + "# a remark\n"),
        make_job(path, seed=7, rig=RIG + "# a remark\n"),
    ]

    assert len({job.header.uuid for job in jobs}) == len(jobs)


def test_huge_seeds_have_an_evening_too(tmp_path: Path) -> None:
    assert make_job(tmp_path / "run.h5", seed=2**63).header.start > FIRST_EVENING


def test_a_rehearsal_says_that_it_is_one_and_keeps_its_seed_and_truth(tmp_path: Path) -> None:
    job = make_job(tmp_path / "run.h5", seed=7)

    bench = find_bench_factory().build(job.recipe, job.rig, 7)
    assert job.header.is_simulated
    assert job.header.seed == 7
    assert job.header.truth == bench.truth()
    assert {"part.extinction ratio", "part.dial offset", "source.power"} <= set(job.header.truth)
    assert not job.is_durable


@dataclass
class BenchWithHand:
    """A bench that keeps what a hand did."""

    done: list[tuple[str, bool, float]] = field(default_factory=list)

    def twin(self, address: str) -> Twin:
        raise AssertionError(f"nobody asks for {address}")

    def truth(self) -> dict[str, float]:
        return {}

    def emits(self, now_s: float) -> bool:
        return False

    def block_by_hand(self, is_blocked: bool, now_s: float) -> None:
        self.done.append(("block", is_blocked, now_s))

    def cap_by_hand(self, is_capped: bool, now_s: float) -> None:
        self.done.append(("caps", is_capped, now_s))

    def take_out_by_hand(self, element: str, is_out: bool, now_s: float) -> None:
        self.done.append((element, is_out, now_s))


def test_the_simulated_person_acts_at_once_at_the_virtual_instant(stop: StopRequest) -> None:
    bench, timeline = BenchWithHand(), VirtualTimeline(START, stop)
    person = SimulatedPerson(bench, timeline)

    person.block_beam()
    timeline.wait_until(5.0)
    person.clear_beam()
    person.cap_detectors()
    person.take_out("part")
    timeline.wait_until(7.0)
    person.put_in("part")
    person.uncap_detectors()

    assert bench.done == [
        ("block", True, 0.0),
        ("block", False, 5.0),
        ("caps", True, 5.0),
        ("part", True, 5.0),
        ("part", False, 7.0),
        ("caps", False, 7.0),
    ]


def test_a_real_run_keeps_its_records_at_once_and_has_no_truth(tmp_path: Path, stop: StopRequest) -> None:
    job = live(make_job(tmp_path / "run.h5"), stop)

    assert job.is_durable
    assert not job.timeline.is_virtual
    assert (job.header.is_simulated, job.header.seed, job.header.truth) == (False, None, {})
    assert (job.header.operator, job.header.part) == ("J. Doe", "P-7")


def test_every_real_run_has_an_identifier_of_its_own_and_starts_now(tmp_path: Path, stop: StopRequest) -> None:
    rehearsal = make_job(tmp_path / "run.h5")

    first, second = (live(rehearsal, stop).header for _ in range(2))

    assert first.uuid != second.uuid
    assert abs(datetime.now(UTC) - first.start) < timedelta(seconds=10)


def test_a_real_run_reaches_its_instruments_over_the_network_through_the_tap(tmp_path: Path, stop: StopRequest) -> None:
    rehearsal, tapped = make_job(tmp_path / "run.h5"), list[Channel]()

    def tap(channel: Channel, _timeline: Timeline) -> Channel:
        tapped.append(channel)
        return channel

    with socket.create_server(("127.0.0.1", 0)) as listener:
        address = f"tcp://127.0.0.1:{listener.getsockname()[1]}"
        job = real_job(
            rehearsal.recipe,
            replace(rehearsal.rig, text=rehearsal.rig.text.replace(HEAD, address)),
            drivers=rehearsal.drivers,
            path=rehearsal.path,
            person=NobodyThere(),
            progress=Silent(),
            stop=stop,
            wrap=tap,
        )
        assert tapped == []
        channel = job.open_channel(address, Opening())
        channel.close()

    assert isinstance(channel, TcpChannel)
    assert tapped == [channel]


@pytest.mark.parametrize("ask", ["block_beam", "clear_beam", "cap_detectors", "uncap_detectors"])
def test_asking_for_hands_where_nobody_is_there_is_a_bug(ask: str) -> None:
    with pytest.raises(AssertionError, match="nobody is there"):
        getattr(NobodyThere(), ask)()


@pytest.mark.parametrize("ask", ["take_out", "put_in"])
def test_asking_for_an_element_to_be_moved_where_nobody_is_there_is_a_bug(ask: str) -> None:
    with pytest.raises(AssertionError, match="nobody is there"):
        getattr(NobodyThere(), ask)("part")
