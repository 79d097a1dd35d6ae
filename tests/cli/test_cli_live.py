"""The real commands over real sockets: simulated instruments in one process, the run in another."""

import json
import os
import pty
import select
import signal
import socket
import subprocess
import time
from collections.abc import Iterator
from pathlib import Path

import pytest
from cli_cases import COMMAND, RECIPE, RIG, Twins, polrig, serving, wait_for_visits

from rigctl.record import load_run, verify_run

VISITS = 12
SLOW_RECIPE = RECIPE.replace("time: 100 ms", "time: 2 s")


@pytest.fixture
def twins(tmp_path: Path) -> Iterator[Twins]:
    with serving(tmp_path) as served:
        yield served


def start_run(twins: Twins, path: Path) -> subprocess.Popen[str]:
    arguments = ["run", twins.recipe, "--rig", twins.rig, "--arm", "--out", path]
    return subprocess.Popen(
        [*COMMAND, *map(str, arguments)], stderr=subprocess.PIPE, stdout=subprocess.PIPE, stdin=subprocess.DEVNULL,
        text=True,
    )  # fmt: skip


def test_a_live_run_over_tcp_measures_fits_and_leaves_the_beam_blocked(twins: Twins, tmp_path: Path) -> None:
    done = polrig(
        "run", twins.recipe, "--rig", twins.rig, "--arm", "--out", tmp_path / "run.h5", "--part", "P-7", "--json"
    )

    answer = json.loads(done.stdout)
    assert done.returncode == 0, done.stderr
    assert answer["visits"] == VISITS
    assert [e["name"] for e in answer["fit"]["estimates"] if e["unknown"]] == [
        "part.extinction ratio",
        "part.dial offset",
    ]
    run = load_run(tmp_path / "run.h5")
    assert run.header.part == "P-7"
    assert run.header.is_simulated  # the twins say so of themselves
    assert twins.is_shutter_closed()


def test_a_live_run_and_a_rehearsal_of_one_seed_agree_on_the_truth(twins: Twins, tmp_path: Path) -> None:
    live = polrig("run", twins.recipe, "--rig", twins.rig, "--arm", "--out", tmp_path / "run.h5", "--json")
    rehearsed = polrig("rehearse", twins.recipe, "--rig", twins.original, "--out", tmp_path / "rehearsal.h5", "--json")

    fits = [json.loads(done.stdout)["fit"]["estimates"] for done in (live, rehearsed)]
    for ours, theirs in zip(*fits, strict=True):
        assert ours["value"] == pytest.approx(theirs["value"], abs=5 * theirs["standard_uncertainty"] + 1e-12)


def test_the_written_rig_file_differs_in_its_addresses_only(twins: Twins) -> None:
    ours, theirs = (path.read_text(encoding="utf-8").splitlines() for path in (twins.rig, twins.original))

    differing = [(a, b) for a, b in zip(ours, theirs, strict=True) if a != b]
    assert len(differing) == 3
    assert all("at: tcp://127.0.0.1:" in line for pair in differing for line in pair)


@pytest.mark.parametrize("number", [signal.SIGINT, signal.SIGTERM, signal.SIGHUP])
def test_a_signal_ends_a_run_safely_with_exit_code_6(number: signal.Signals, tmp_path: Path) -> None:
    with serving(tmp_path, SLOW_RECIPE) as twins:
        process = start_run(twins, tmp_path / "run.h5")
        wait_for_visits(tmp_path / "run.h5.journal", 1)
        process.send_signal(number)
        _, told = process.communicate(timeout=20.0)

        assert process.returncode == 6, told
        assert number.name in told
        assert "Traceback" not in told
        assert twins.is_shutter_closed()
    run = load_run(tmp_path / "run.h5")
    assert run.status == "stopped"
    assert 1 <= len(run.visits("data")) < VISITS
    assert verify_run(tmp_path / "run.h5").is_whole


def test_a_signal_ends_the_dwell_under_way_instead_of_waiting_for_it(tmp_path: Path) -> None:
    with serving(tmp_path, RECIPE.replace("time: 100 ms", "time: 20 s")) as twins:
        process = start_run(twins, tmp_path / "run.h5")
        time.sleep(3.0)
        began = time.monotonic()
        process.send_signal(signal.SIGTERM)
        process.communicate(timeout=20.0)

    assert process.returncode == 6
    assert time.monotonic() - began < 5.0


def test_after_kill_9_the_next_reader_recovers_every_visit_that_was_acknowledged(tmp_path: Path) -> None:
    with serving(tmp_path, SLOW_RECIPE) as twins:
        process = start_run(twins, tmp_path / "run.h5")
        wait_for_visits(tmp_path / "run.h5.journal", 3)
        process.kill()
        process.communicate(timeout=20.0)

    done = polrig("fit", tmp_path / "run.h5")
    run = load_run(tmp_path / "run.h5")
    assert run.status == "recovered"
    assert len(run.visits("data")) == 3
    assert "recovered" in done.stderr


def test_nobody_listening_is_exit_code_3_and_says_which_address(tmp_path: Path) -> None:
    with socket.create_server(("127.0.0.1", 0)) as closed:
        port = closed.getsockname()[1]
    (tmp_path / "recipe.yaml").write_text(RECIPE, encoding="utf-8")
    (tmp_path / "rig.yaml").write_text(RIG.replace(":5001", f":{port}"), encoding="utf-8")

    done = polrig(
        "run", tmp_path / "recipe.yaml", "--rig", tmp_path / "rig.yaml", "--arm", "--out", tmp_path / "run.h5"
    )

    assert done.returncode == 3
    assert f"tcp://127.0.0.1:{port}" in done.stderr
    assert "Traceback" not in done.stderr


def test_two_runs_on_one_bench_are_refused_while_the_first_goes_on(tmp_path: Path) -> None:
    with serving(tmp_path, SLOW_RECIPE) as twins:
        first = start_run(twins, tmp_path / "first.h5")
        wait_for_visits(tmp_path / "first.h5.journal", 1)
        second = polrig("run", twins.recipe, "--rig", twins.rig, "--arm", "--out", tmp_path / "second.h5")
        first.send_signal(signal.SIGINT)
        first.communicate(timeout=20.0)

        assert second.returncode == 3
        assert f"process {first.pid}" in second.stderr
        assert first.returncode == 6
        assert twins.is_shutter_closed()


def test_darks_by_hand_without_a_terminal_end_at_once_with_exit_code_2_and_nothing_sent(
    tmp_path: Path,
) -> None:
    with socket.create_server(("127.0.0.1", 0)) as listener:
        listener.settimeout(0.1)
        port = listener.getsockname()[1]
        (tmp_path / "recipe.yaml").write_text(RECIPE.replace("by: shutter", "by: hand"), encoding="utf-8")
        (tmp_path / "rig.yaml").write_text(RIG.replace(":5001", f":{port}"), encoding="utf-8")

        done = polrig(
            "run", tmp_path / "recipe.yaml", "--rig", tmp_path / "rig.yaml", "--arm", "--out", tmp_path / "run.h5"
        )

        assert done.returncode == 2
        assert "by hand" in done.stderr
        assert not (tmp_path / "run.h5").exists()
        with pytest.raises(TimeoutError):
            listener.accept()


def read_until(terminal: int, text: bytes, timeout_s: float = 30.0) -> bytes:
    seen, deadline = b"", time.monotonic() + timeout_s
    while text not in seen:
        assert select.select([terminal], [], [], max(deadline - time.monotonic(), 0.0))[0], seen
        seen += os.read(terminal, 4096)
    return seen


def run_at_a_terminal(twins: Twins, path: Path) -> tuple[int, int]:
    """Start a run on a terminal of its own and arm it; its process and the terminal."""
    pid, terminal = pty.fork()
    if pid == 0:
        os.execv(COMMAND[0], [*COMMAND, "run", str(twins.recipe), "--rig", str(twins.rig), "--out", str(path)])
    assert b"CAUTION" in read_until(terminal, b"Type 'arm'")
    os.write(terminal, b"arm\n")
    return pid, terminal


def test_at_a_terminal_darks_by_hand_ask_for_the_block_and_wait_for_enter(tmp_path: Path) -> None:
    with serving(tmp_path, RECIPE.replace("by: shutter", "by: hand")) as twins:
        pid, terminal = run_at_a_terminal(twins, tmp_path / "run.h5")
        read_until(terminal, b"Block the beam")
        os.write(terminal, b"\n")
        seen = read_until(terminal, b"Take the block out")
        os.write(terminal, b"\n")
        seen += read_until(terminal, b"Block the beam")
        os.write(terminal, b"\n")
        seen += read_until(terminal, b"chi-squared")
        _, status = os.waitpid(pid, 0)
        os.close(terminal)

    assert b"visits" in seen
    assert os.waitstatus_to_exitcode(status) in (0, 8)
    assert {dark.how for dark in load_run(tmp_path / "run.h5").darks} == {"by hand"}


def test_ctrl_c_while_asked_for_a_block_ends_with_exit_code_6(tmp_path: Path) -> None:
    with serving(tmp_path, RECIPE.replace("by: shutter", "by: hand")) as twins:
        pid, terminal = run_at_a_terminal(twins, tmp_path / "run.h5")
        read_until(terminal, b"Block the beam")
        os.write(terminal, b"\x03")
        read_until(terminal, b"SIGINT")
        _, status = os.waitpid(pid, 0)
        os.close(terminal)

    assert os.waitstatus_to_exitcode(status) == 6


@pytest.mark.parametrize("answer", [b"\n", b"no\n", b"ARM\n"])
def test_at_a_terminal_anything_but_the_word_leaves_the_bench_as_it_is(answer: bytes, tmp_path: Path) -> None:
    with serving(tmp_path) as twins:
        pid, terminal = pty.fork()
        if pid == 0:
            os.execv(COMMAND[0], [*COMMAND, "run", str(twins.recipe), "--rig", str(twins.rig), "--out",
                                  str(tmp_path / "run.h5")])  # fmt: skip
        read_until(terminal, b"Type 'arm'")
        os.write(terminal, answer)
        read_until(terminal, b"nothing was sent")
        _, status = os.waitpid(pid, 0)
        os.close(terminal)

    assert os.waitstatus_to_exitcode(status) == 6
    assert not (tmp_path / "run.h5").exists()


def test_what_may_emit_wants_arming_where_nobody_can_be_asked(tmp_path: Path) -> None:
    with socket.create_server(("127.0.0.1", 0)) as listener:
        listener.settimeout(0.1)
        port = listener.getsockname()[1]
        (tmp_path / "recipe.yaml").write_text(RECIPE, encoding="utf-8")
        (tmp_path / "rig.yaml").write_text(RIG.replace(":5003", f":{port}"), encoding="utf-8")

        done = polrig("run", tmp_path / "recipe.yaml", "--rig", tmp_path / "rig.yaml", "--out", tmp_path / "run.h5")

        assert done.returncode == 2
        assert "--arm" in done.stderr
        assert "no safety function" in done.stderr
        assert not (tmp_path / "run.h5").exists()
        with pytest.raises(TimeoutError):
            listener.accept()


def test_a_bench_without_shutter_and_source_needs_no_arming(tmp_path: Path) -> None:
    """Nothing on it can be switched: somebody lets the light in, and the recipe asks for no dark."""
    recipe = RECIPE.replace("dark: {by: shutter, before: true, after: true}\n", "")
    with serving(tmp_path, recipe, RIG.replace(", shutter: shutter 1", "")) as twins:
        done = polrig("run", twins.recipe, "--rig", twins.rig, "--out", tmp_path / "run.h5")

    assert "CAUTION" not in done.stderr
    assert load_run(tmp_path / "run.h5").status == "complete"


def test_trace_writes_every_byte_both_ways_with_times(twins: Twins, tmp_path: Path) -> None:
    polrig(
        "run",
        twins.recipe,
        "--rig",
        twins.rig,
        "--arm",
        "--out",
        tmp_path / "run.h5",
        "--trace",
        tmp_path / "wire.log",
    )

    lines = (tmp_path / "wire.log").read_text(encoding="ascii").splitlines()
    assert any("-> tcp://" in line and "G0 A" in line for line in lines)
    assert any("<- tcp://" in line and "Idle|MPos" in line for line in lines)
    instants = [float(line.split()[0]) for line in lines]
    assert instants == sorted(instants)
