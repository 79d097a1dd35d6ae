from collections.abc import Callable
from dataclasses import replace
from pathlib import Path
from typing import Any

import h5py
import numpy as np
import pytest
from rehearsal_cases import HEAD, MOUNT, RECIPE, RIG, SHUTTER, VISITS, Meddler, Swallower, make_job

from rigctl.errors import NotSafeError, RecordError
from rigctl.interfaces import Driver, Instrument, Options
from rigctl.links.channel import Channel
from rigctl.links.family import Opening
from rigctl.links.link import Link
from rigctl.plugins import find_drivers
from rigctl.record import load_run, verify_run
from rigctl.runner.person import NobodyThere
from rigctl.runner.run import Job, run_job
from rigctl.timeline import Timeline


def is_shutter_closed(job: Job) -> bool:
    """Ask the twin itself, on a wire of its own."""
    with job.timeline.stop.masked():
        channel = job.open_channel(SHUTTER, Opening())
        channel.discard()
        channel.write(b"ROUTE:CLOSE? (@3)\n", job.timeline.now() + 1.0)
        return channel.readline(job.timeline.now() + 1.0) == b"0\n"


def datasets(path: Path) -> dict[str, Any]:
    found: dict[str, Any] = {}
    with h5py.File(path) as file:
        file.visititems(lambda name, item: found.update({name: item[()]}) if isinstance(item, h5py.Dataset) else None)
    return found


class Wrapped:
    """Wraps the channel of one address and keeps hold of the wrapper."""

    def __init__(self, address: str, make: Callable[[Channel], Meddler]) -> None:
        self.address, self.make = address, make
        self.channels: list[Meddler] = []

    def __call__(self, channel: Channel, _timeline: Timeline) -> Channel:
        if channel.address != self.address:
            return channel
        self.channels.append(self.make(channel))
        return self.channels[-1]

    @property
    def fired(self) -> int:
        return sum(channel.fired for channel in self.channels)


def test_a_run_records_every_visit_and_closes_its_file(tmp_path: Path) -> None:
    job = make_job(tmp_path / "run.h5")

    outcome = run_job(job)

    run = load_run(tmp_path / "run.h5")
    assert (outcome.status, outcome.exit_code, run.status) == ("complete", 0, "complete")
    assert [visit.number for visit in run.visits("data")] == list(range(VISITS))
    assert {dark.when for dark in run.darks} == {"before", "after"}
    assert not (tmp_path / "run.h5.journal").exists()
    assert verify_run(tmp_path / "run.h5").is_whole


def test_the_shutter_is_closed_and_the_mount_stopped_at_the_end(tmp_path: Path) -> None:
    job = make_job(tmp_path / "run.h5")

    outcome = run_job(job)

    assert [(step.role, step.wanted, step.is_confirmed) for step in outcome.safe_steps] == [
        ("shutter", "closed", True),
        ("part mount", "stopped", True),
    ]
    assert is_shutter_closed(job)


def test_one_seed_gives_one_set_of_data(tmp_path: Path) -> None:
    for name in ("a", "b"):
        (tmp_path / name).mkdir()
        run_job(make_job(tmp_path / name / "run.h5"))

    first, second = datasets(tmp_path / "a" / "run.h5"), datasets(tmp_path / "b" / "run.h5")
    assert first.keys() == second.keys()
    for name, value in first.items():
        np.testing.assert_array_equal(value, second[name], err_msg=name)
    assert (tmp_path / "a" / "run.h5").read_bytes() == (tmp_path / "b" / "run.h5").read_bytes()


def test_another_seed_gives_other_data(tmp_path: Path) -> None:
    run_job(make_job(tmp_path / "a.h5", seed=1))
    run_job(make_job(tmp_path / "b.h5", seed=2))

    first, second = datasets(tmp_path / "a.h5"), datasets(tmp_path / "b.h5")
    assert not np.array_equal(first["entry/data/signal"], second["entry/data/signal"])


def test_a_lost_command_costs_an_attempt_not_the_night(tmp_path: Path) -> None:
    wrap = Wrapped(HEAD, lambda channel: Swallower(channel, at=b"FETCH?", nth=15, count=1))

    outcome = run_job(make_job(tmp_path / "run.h5", wrap=wrap))

    run = load_run(tmp_path / "run.h5")
    assert wrap.fired == 1
    assert outcome.exit_code == 0
    assert len(run.visits("data")) == VISITS
    assert [a.status for a in run.attempts].count("failed") == 1
    assert max(visit.attempt for visit in run.visits("data")) == 2


def test_a_repeated_visit_is_approached_from_the_far_side_again(tmp_path: Path) -> None:
    lines: list[bytes] = []

    class Listener(Meddler):
        def write(self, data: bytes, deadline_s: float) -> None:
            lines.append(data)
            super().write(data, deadline_s)

    def wrap(channel: Channel, _timeline: Timeline) -> Channel:
        if channel.address == MOUNT:
            return Listener(channel, lambda: None, at=b"never", nth=1)
        if channel.address == HEAD:
            # five darks, then the fourth visit
            return Swallower(channel, at=b"FETCH?", nth=9, count=1)
        return channel

    run_job(make_job(tmp_path / "run.h5", wrap=wrap))

    moves = [line for line in lines if b"G0" in line]
    fourth = [b"A90.000" in move for move in moves]
    again = fourth.index(True) + 1
    assert b"A89.800" in moves[again]
    assert fourth[again + 1]


def test_a_meter_that_stays_silent_ends_the_run_safely_with_exit_code_3(tmp_path: Path) -> None:
    wrap = Wrapped(HEAD, lambda channel: Swallower(channel, at=b"FETCH?", nth=15, count=10**9))
    job = make_job(tmp_path / "run.h5", wrap=wrap)

    outcome = run_job(job)

    assert wrap.fired >= 3
    assert (outcome.status, outcome.exit_code) == ("failed", 3)
    assert HEAD in outcome.why
    assert is_shutter_closed(job)
    assert load_run(tmp_path / "run.h5").status == "failed"


@pytest.mark.parametrize(
    ("address", "at", "nth"),
    [
        (MOUNT, b"$I", 1),
        (HEAD, b"TRIGGER:COUNT", 1),
        (HEAD, b"FETCH?", 2),
        (SHUTTER, b"ROUTE:CLOSE (@3)", 1),
        (MOUNT, b"G0", 2),
        (MOUNT, b"?", 9),
        (HEAD, b"INITIATE", 14),
        (HEAD, b"FETCH?", 17),
        (HEAD, b"FETCH?", 21),
    ],
)
def test_a_stop_at_any_moment_ends_with_exit_code_6_and_the_beam_blocked(
    tmp_path: Path, address: str, at: bytes, nth: int
) -> None:
    jobs: list[Job] = []
    wrap = Wrapped(address, lambda c: Meddler(c, lambda: jobs[0].timeline.stop.request("SIGTERM"), at=at, nth=nth))
    jobs.append(make_job(tmp_path / "run.h5", wrap=wrap))

    outcome = run_job(jobs[0])

    assert wrap.fired == 1
    assert (outcome.status, outcome.exit_code) == ("stopped", 6)
    assert all(step.is_confirmed for step in outcome.safe_steps)
    assert is_shutter_closed(jobs[0])
    assert load_run(tmp_path / "run.h5").status == "stopped"
    assert verify_run(tmp_path / "run.h5").is_whole


def test_a_shutter_that_cannot_be_read_back_closed_is_exit_code_7(tmp_path: Path) -> None:
    wrap = Wrapped(SHUTTER, lambda channel: Swallower(channel, at=b"ROUTE:OPEN", nth=4, count=10**9))

    outcome = run_job(make_job(tmp_path / "run.h5", wrap=wrap))

    assert wrap.fired >= 1
    assert outcome.exit_code == NotSafeError.exit_code
    assert not outcome.safe_steps[0].is_confirmed
    assert outcome.safe_steps[1].is_confirmed


def test_an_overloaded_meter_goes_to_its_next_range_and_repeats_the_visit(tmp_path: Path) -> None:
    recipe = RECIPE.replace("power: 2 mW +- 20 %", "power: 0.2 mW")
    rig = RIG + "simulated: {power: 2 mW}\n"
    job = make_job(tmp_path / "run.h5", recipe=recipe, rig=rig)

    outcome = run_job(job)

    run = load_run(tmp_path / "run.h5")
    assert outcome.exit_code == 0
    overloaded = [attempt for attempt in run.attempts if attempt.status == "saturated"]
    assert len(run.visits("data")) == VISITS
    assert overloaded
    assert overloaded[0].dwells["signal"].range_w < run.visits("data")[-1].dwells["signal"].range_w


class Clumsy:
    """An instrument with a bug in one method; everything else is the real driver's."""

    def __init__(self, real: Instrument) -> None:
        self._real = real

    def __getattr__(self, name: str) -> Any:
        return getattr(self._real, name)

    def begin_dwell(self) -> None:
        raise ZeroDivisionError("a bug")


def test_a_bug_in_a_driver_is_exit_code_70_with_the_bench_made_safe_and_the_file_closed(
    tmp_path: Path,
) -> None:
    drivers: dict[str, Driver] = dict(find_drivers())
    meter = drivers["scpi-power-meter"]

    def open_clumsy(link: Link, options: Options) -> Instrument:
        clumsy: Any = Clumsy(meter.open(link, options))
        return clumsy  # type: ignore[no-any-return]

    drivers["scpi-power-meter"] = replace(meter, open=open_clumsy)
    job = make_job(tmp_path / "run.h5", drivers=drivers)

    outcome = run_job(job)

    assert outcome.exit_code == 70
    assert isinstance(outcome.bug, ZeroDivisionError)
    assert is_shutter_closed(job)
    assert load_run(tmp_path / "run.h5").status == "failed"


def test_an_existing_file_is_never_overwritten_and_nothing_is_sent(tmp_path: Path) -> None:
    (tmp_path / "run.h5").write_bytes(b"precious")
    opened: list[str] = []
    job = make_job(tmp_path / "run.h5")

    def open_channel(address: str, opening: Opening) -> Channel:
        opened.append(address)
        return job.open_channel(address, opening)

    with pytest.raises(RecordError, match="never overwritten"):
        run_job(replace(job, open_channel=open_channel))

    assert (tmp_path / "run.h5").read_bytes() == b"precious"
    assert not opened


def test_darks_by_hand_ask_the_person_to_block_and_to_clear(tmp_path: Path) -> None:
    rig = RIG.replace("  shutter 1: {driver: scpi-switch, at: tcp://127.0.0.1:5003, channel: 3}\n", "").replace(
        ", shutter: shutter 1", ""
    )
    job = make_job(tmp_path / "run.h5", rig=rig)
    asked: list[str] = []

    class Listening(NobodyThere):
        is_there = True

        def block_beam(self) -> None:
            asked.append("block")
            job.person.block_beam()

        def clear_beam(self) -> None:
            asked.append("clear")
            job.person.clear_beam()

    outcome = run_job(replace(job, person=Listening()))

    run = load_run(tmp_path / "run.h5")
    dark = [np.mean(dark.dwells["signal"].levels_w) for dark in run.darks]
    lit = [np.mean(visit.dwells["signal"].levels_w) for visit in run.visits("data")]
    assert outcome.exit_code == 0
    assert asked == ["block", "clear", "block"]
    assert {dark.how for dark in run.darks} == {"by hand"}
    assert max(dark) < 0.01 * max(lit)


def test_dwells_are_not_begun_before_the_meter_has_forgotten_the_old_level(tmp_path: Path) -> None:
    """A slow head (0.5 s) after moves: with the settling left out, the null would read a part of the peak."""
    rig = RIG.replace("at: tcp://127.0.0.1:5002}", "at: tcp://127.0.0.1:5002, time constant: 500 ms}")
    job = make_job(tmp_path / "run.h5", rig=rig)

    run_job(job)

    run = load_run(tmp_path / "run.h5")
    truth, lit = run.header.truth, [np.mean(v.dwells["signal"].levels_w) for v in run.visits("data")]
    theta = np.deg2rad([v.read["part mount"] - truth["part.dial offset"] for v in run.visits("data")])
    rho = truth["part.extinction ratio"]
    light = truth["source.power"] / 2 * (np.cos(theta) ** 2 + rho * np.sin(theta) ** 2)
    np.testing.assert_allclose(lit, light + truth["signal.stray light"], atol=2e-3 * max(light))


def test_a_meter_s_certificate_goes_into_the_run_file(tmp_path: Path) -> None:
    certificate = "calibration: {certificate: K-7, due: 2027-03-01, expanded uncertainty: 3 %, coverage factor: 2}"
    rig = RIG.replace("at: tcp://127.0.0.1:5002}", f"at: tcp://127.0.0.1:5002, {certificate}}}")

    run_job(make_job(tmp_path / "run.h5", rig=rig))

    (record,) = load_run(tmp_path / "run.h5").of_kind("calibration")
    assert record["instrument"] == "head 1"
    assert record["values"] == {
        "certificate": "K-7",
        "due": "2027-03-01",
        "expanded_uncertainty": 0.03,
        "coverage_factor": 2.0,
    }
    with h5py.File(tmp_path / "run.h5") as file:
        assert b"K-7" in str(file["entry/instrument/signal"]["calibration/certificate"][()]).encode()
