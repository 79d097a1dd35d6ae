"""The real commands over a terminal, HiSLIP and a network port at once."""

import json
from pathlib import Path

from cli_cases import RIG, polrig, serving

from rigctl.record import load_run

MIXED_RIG = RIG.replace("at: tcp://127.0.0.1:5001", 'at: "serial:///dev/ttyUSB0?baud=115200"').replace(
    "at: tcp://127.0.0.1:5002", "at: visa://TCPIP0::10.0.0.9::hislip0::INSTR"
)


def test_a_live_run_over_three_kinds_of_address_measures_and_leaves_the_beam_blocked(tmp_path: Path) -> None:
    with serving(tmp_path, rig_text=MIXED_RIG) as twins:
        done = polrig("run", twins.recipe, "--rig", twins.rig, "--arm", "--out", tmp_path / "run.h5", "--json")

        assert done.returncode == 0, done.stderr
        assert json.loads(done.stdout)["visits"] == 12
        assert twins.is_shutter_closed()
    assert load_run(tmp_path / "run.h5").status == "complete"


def test_the_simulated_addresses_are_of_the_kinds_that_the_rig_names(tmp_path: Path) -> None:
    with serving(tmp_path, rig_text=MIXED_RIG) as twins:
        text = twins.rig.read_text(encoding="utf-8")

    assert "serial:///dev/pts/" in text
    assert "?baud=115200" in text
    assert "visa://TCPIP0::127.0.0.1::hislip0," in text
    assert "tcp://127.0.0.1:" in text
