"""What the watchdog is for: the runner is killed or hangs, and the source goes off all the same."""

import os
import random
import signal
import time
from pathlib import Path

import pytest
from live_bench import RECIPE, LiveBench, live_bench

from rigctl.record import load_run

OFF_WITHIN_S = 2.0
"""The project's goal for a killed runner."""


def note_of(path: Path, *, until: str, timeout_s: float = 20.0) -> str:
    """Return what the watchdog noted beside a run file, once it has come to some words."""
    note, deadline = Path(f"{path}.watchdog"), time.monotonic() + timeout_s
    while not note.exists() or until not in note.read_text(encoding="utf-8"):
        assert time.monotonic() < deadline, note.read_text(encoding="utf-8") if note.exists() else "no note"
        time.sleep(0.05)
    return note.read_text(encoding="utf-8")


@pytest.mark.parametrize("wires", ["tcp", "serial"])
def test_a_run_that_goes_well_emits_and_ends_with_the_source_off_and_no_note(wires: str, tmp_path: Path) -> None:
    with live_bench(tmp_path, wires=wires) as live:
        process = live.start_run(tmp_path / "run.h5")
        live.wait_until(emits=True)
        _, told = process.communicate(timeout=60.0)

        assert process.returncode == 0, told
        assert not live.emits()
    assert not (tmp_path / "run.h5.watchdog").exists()
    assert load_run(tmp_path / "run.h5").status == "complete"


@pytest.mark.parametrize("wires", ["tcp", "serial"])
def test_after_kill_9_the_watchdog_switches_the_source_off_and_notes_it(wires: str, tmp_path: Path) -> None:
    with live_bench(tmp_path, wires=wires) as live:
        process = live.start_run(tmp_path / "run.h5")
        live.wait_until(emits=True)
        process.kill()
        took_s = live.wait_until(emits=False)
        process.communicate()

        assert took_s < OFF_WITHIN_S
        note = note_of(tmp_path / "run.h5", until="confirmed off")
        assert "the runner is gone" in note
        assert "'diode' off" in note
        assert "'shutter' closed" in note


def test_a_runner_that_hangs_is_ended_first_and_then_the_source_goes_off(tmp_path: Path) -> None:
    with live_bench(tmp_path) as live:
        process = live.start_run(tmp_path / "run.h5")
        live.wait_until(emits=True)
        process.send_signal(signal.SIGSTOP)
        took_s = live.wait_until(emits=False, timeout_s=30.0)
        process.communicate(timeout=10.0)

        assert process.returncode == -signal.SIGKILL
        # ten seconds without a heartbeat, as documented, and then at once
        assert 8.0 < took_s < 14.0
        assert "no sign of life" in note_of(tmp_path / "run.h5", until="confirmed off")


def test_ctrl_c_does_not_reach_the_watchdog_and_the_runner_ends_the_run_itself(tmp_path: Path) -> None:
    with live_bench(tmp_path) as live:
        process = live.start_run(tmp_path / "run.h5")
        live.wait_until(emits=True)
        process.send_signal(signal.SIGINT)
        _, told = process.communicate(timeout=20.0)

        assert process.returncode == 6, told
        assert not live.emits()
    assert not (tmp_path / "run.h5.watchdog").exists()


def test_nothing_emits_before_the_watchdog_watches(tmp_path: Path) -> None:
    with live_bench(tmp_path) as live:
        process = live.start_run(tmp_path / "run.h5")
        live.wait_until(emits=True)
        children = Path(f"/proc/{process.pid}/task/{process.pid}/children").read_text(encoding="utf-8").split()
        process.send_signal(signal.SIGTERM)
        process.communicate(timeout=20.0)

    assert len(children) == 1


def test_a_watchdog_that_dies_is_replaced_while_the_run_goes_on(tmp_path: Path) -> None:
    slow = RECIPE.replace("step: 10 deg", "step: 2 deg")
    with live_bench(tmp_path, recipe_text=slow) as live:
        process = live.start_run(tmp_path / "run.h5")
        live.wait_until(emits=True)
        children = Path(f"/proc/{process.pid}/task/{process.pid}/children")
        first = children.read_text(encoding="utf-8").split()
        os.kill(int(first[0]), signal.SIGKILL)
        deadline = time.monotonic() + 10.0
        while (now := children.read_text(encoding="utf-8").split()) in (first, []):
            assert time.monotonic() < deadline
            time.sleep(0.05)
        time.sleep(4.0)  # the new one starts as slowly as any Python program
        assert live.emits()
        process.kill()
        took_s = live.wait_until(emits=False)
        process.communicate()

    assert now != first
    assert took_s < OFF_WITHIN_S


def visits_in(path: Path) -> int:
    """Number of visits that a run has acknowledged."""
    journal = Path(f"{path}.journal")
    return journal.read_bytes().count(b'"kind":"visit"') if journal.exists() else 0


def wait_for_visit(path: Path, timeout_s: float = 30.0) -> None:
    deadline = time.monotonic() + timeout_s
    while not visits_in(path):
        assert time.monotonic() < deadline, "no visit was ever recorded"
        time.sleep(0.005)


def kill_once(live: LiveBench, path: Path, number: int, source: random.Random) -> tuple[str, float]:
    """Kill a run: before it emits, while it is prepared, or among its visits, by turns, each at a random instant.

    Returns
    -------
    The phase that it was in, and how long the source stayed on, s.
    """
    process = live.start_run(path)
    if number % 3 == 1:
        live.wait_until(emits=True)
    elif number % 3 == 2:
        wait_for_visit(path)
    time.sleep(source.uniform(0.0, (3.0, 0.9, 2.0)[number % 3]))
    was_on = live.emits()
    process.kill()
    took_s = live.wait_until(emits=False) if was_on else 0.0
    process.communicate()
    time.sleep(0.3)
    assert not live.emits()
    acknowledged = visits_in(path)
    if path.exists() or acknowledged:
        assert len(load_run(path).visits("data")) == acknowledged
    phase = "before it emits" if not was_on else "among visits" if acknowledged else "being prepared"
    return phase, took_s


@pytest.mark.soak
@pytest.mark.parametrize("wires", ["tcp", "serial"])
def test_kill_9_at_fifty_random_instants_always_ends_with_the_source_off(wires: str, tmp_path: Path) -> None:
    """Fifty on each kind of wire; the seed of the instants is fixed."""
    source, seen = random.Random(2026), []
    for number in range(50):
        folder = tmp_path / str(number)
        folder.mkdir()
        with live_bench(folder, wires=wires) as live:
            seen.append(kill_once(live, folder / "run.h5", number, source))

    times = sorted(took_s for phase, took_s in seen if phase != "before it emits")
    phases = {phase: [p for p, _ in seen].count(phase) for phase, _ in seen}
    median_s, most_s = times[len(times) // 2], times[9 * len(times) // 10]
    off = f"{median_s:.3f} s (median), {most_s:.3f} s (nine of ten), {times[-1]:.3f} s (longest)"
    print(f"{wires}: {phases}; source off after {off}")
    assert len(phases) == 3
    assert times[-1] < OFF_WITHIN_S
