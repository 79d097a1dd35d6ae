"""The open bench: which instruments are opened, on which links, and that every link is closed."""

from dataclasses import replace
from pathlib import Path

import pytest
from rehearsal_cases import HEAD, MOUNT, RECIPE, RIG, SHUTTER, make_job
from runner_cases import TWO_AXES, TWO_MOUNTS, Ear, opened

from rigctl.errors import DisconnectedError, PlanError
from rigctl.interfaces import MeterCapabilities, ShutterCapabilities, StageCapabilities
from rigctl.links.channel import Channel
from rigctl.runner.bench import declared_capabilities, filled_roles, identify_all
from rigctl.runner.run import run_job
from rigctl.timeline import Timeline


def test_every_role_is_filled_with_its_instrument_and_link(tmp_path: Path) -> None:
    with opened(make_job(tmp_path / "run.h5")) as bench:
        assert list(bench.stages) == ["part mount"]
        assert list(bench.meters) == ["signal"]
        assert bench.shutter_role == "shutter"
        assert {role: bench.link(role).address for role in bench.entries} == {
            "part mount": MOUNT,
            "signal": HEAD,
            "shutter": SHUTTER,
        }


def test_the_shutter_is_asked_first_who_it_is(tmp_path: Path) -> None:
    with opened(make_job(tmp_path / "run.h5")) as bench:
        assert list(identify_all(bench)) == ["shutter", "part mount", "signal"]


def test_roles_that_the_recipe_does_not_use_or_the_rig_does_not_fill_are_left_out(tmp_path: Path) -> None:
    rig = RIG.replace(", shutter: shutter 1", ", monitor: head 2").replace(
        "  shutter 1", "  head 2: {driver: scpi-power-meter, at: tcp://127.0.0.1:5008}\n  shutter 1"
    )
    job = make_job(tmp_path / "run.h5", rig=rig)

    assert set(filled_roles(job.recipe, job.rig)) == {"part mount", "signal"}
    with opened(job) as bench:
        assert bench.shutter is None
        assert set(bench.links) == {MOUNT, HEAD}


def test_what_instruments_can_do_is_told_from_the_rig_file_alone(tmp_path: Path) -> None:
    job = make_job(tmp_path / "run.h5", rig=RIG.replace("channel: 3", "channel: 3, moves in: 80 ms"))

    found = declared_capabilities(job.recipe, job.rig, job.drivers)

    assert isinstance(found["part mount"], StageCapabilities)
    assert isinstance(found["signal"], MeterCapabilities)
    assert found["shutter"] == ShutterCapabilities(moves_in_s=0.08)


def test_opening_the_bench_sends_nothing(tmp_path: Path) -> None:
    ear = Ear()

    with opened(make_job(tmp_path / "run.h5", wrap=ear)):
        pass

    assert ear.heard == []


def test_instruments_that_share_an_address_share_one_link(tmp_path: Path) -> None:
    ear = Ear()
    job = make_job(tmp_path / "run.h5", recipe=TWO_MOUNTS, rig=TWO_AXES, wrap=ear)

    with opened(job) as bench:
        identify_all(bench)
        assert bench.link("analyser") is bench.link("part mount")

    assert [channel.address for channel in ear.channels] == [MOUNT, HEAD]


def test_another_language_at_the_same_address_is_refused_by_name(tmp_path: Path) -> None:
    good = make_job(tmp_path / "run.h5")
    instruments = dict(good.rig.instruments)
    instruments["head 1"] = replace(instruments["head 1"], at=MOUNT)
    job = replace(good, rig=replace(good.rig, instruments=instruments))

    with pytest.raises(PlanError, match="'head 1' speaks another language") as told, opened(job):
        pass

    assert told.value.where == "rig.yaml"
    assert "its own address" in told.value.do


def test_a_run_that_cannot_be_opened_sends_nothing_and_ends_with_exit_code_2(tmp_path: Path) -> None:
    ear = Ear()
    good = make_job(tmp_path / "run.h5", wrap=ear)
    instruments = dict(good.rig.instruments)
    instruments["head 1"] = replace(instruments["head 1"], at=MOUNT)

    outcome = run_job(replace(good, rig=replace(good.rig, instruments=instruments)))

    assert (outcome.status, outcome.exit_code) == ("failed", 2)
    assert ear.heard == []


def test_every_link_is_closed_after_an_error(tmp_path: Path) -> None:
    ear = Ear()

    def fail_amid_a_run() -> None:
        with opened(make_job(tmp_path / "run.h5", wrap=ear)) as bench:
            identify_all(bench)
            raise ZeroDivisionError("a bug")

    with pytest.raises(ZeroDivisionError):
        fail_amid_a_run()

    assert [channel.address for channel in ear.channels] == [SHUTTER, MOUNT, HEAD]
    assert [channel.closings for channel in ear.channels] == [1, 1, 1]


def test_a_link_that_cannot_be_opened_leaves_none_of_the_others_open(tmp_path: Path) -> None:
    ear = Ear()

    def wrap(channel: Channel, timeline: Timeline) -> Channel:
        if channel.address == HEAD:
            raise DisconnectedError("nobody listens", address=channel.address)
        return ear(channel, timeline)

    outcome = run_job(make_job(tmp_path / "run.h5", recipe=RECIPE, wrap=wrap))

    assert outcome.exit_code == 3
    assert HEAD in outcome.why
    assert {channel.address for channel in ear.channels} == {SHUTTER, MOUNT}
    assert all(channel.closings for channel in ear.channels)


def test_each_instrument_says_that_it_is_simulated_under_its_own_name(tmp_path: Path) -> None:
    with opened(make_job(tmp_path / "run.h5")) as bench:
        found = identify_all(bench)

    assert all(identity.is_simulated for identity in found.values())
    assert {role: identity.serial for role, identity in found.items()} == {
        "shutter": "shutter 1",
        "part mount": "mount 1",
        "signal": "head 1",
    }
