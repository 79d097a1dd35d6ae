"""Which group of the run file holds what."""

import hashlib
from collections.abc import Iterator
from dataclasses import replace
from pathlib import Path
from typing import Any

import h5py
import numpy as np
import pytest
from full_bench_cases import FULL_BENCH
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st
from record_cases import HEADER, RECIPE, finished, records, small_header, small_visit, stopped

from rigctl.record import Header, Run, StepLayout, create_run
from rigctl.record.journal import parse_journal
from rigctl.record.view import view_image


@pytest.fixture
def file(tmp_path: Path) -> Iterator[Any]:
    """A finished run file, open."""
    finished(tmp_path / "night.h5")
    with h5py.File(tmp_path / "night.h5", "r") as opened:
        yield opened


def text(dataset: Any) -> str:
    """The text of a dataset."""
    return bytes(dataset[()]).decode("ascii")


def test_the_entry_says_what_when_who_and_with_what(file: Any) -> None:
    entry = file["entry"]

    assert text(entry["title"]) == "?/4 plate at 22 ?C"
    assert entry["title"].attrs["text"] == HEADER.title
    assert text(entry["start_time"]) == "2026-12-01T04:20:00.250000+05:30"
    assert text(entry["end_time"]) == "2026-12-01T04:20:42.250000+05:30"
    assert entry["duration"][()] == 42
    assert text(entry["entry_identifier_uuid"]) == HEADER.uuid
    assert entry["program_name"].attrs["version"] == "0.1.0"
    assert entry["user/name"].attrs["text"] == "Jürgen 李"
    assert text(entry["sample/name"]) == "QWP-118"


def test_the_recipe_and_the_rig_are_kept_verbatim_with_their_digests(file: Any) -> None:
    note = file["/entry/acquisition/recipe"]

    assert bytes(note["data"][()]).decode() == RECIPE.text
    assert note["data"].dtype == np.uint8
    assert note["data"].attrs["sha256"] == RECIPE.sha256
    assert note["file_name"].attrs["text"] == "λ quarter.yaml"
    assert bytes(file["/entry/acquisition/rig/data"][()]).decode() == HEADER.rig.text


def test_every_attempt_stays_in_the_copy_of_the_journal(file: Any) -> None:
    data = bytes(file["/entry/acquisition/journal/data"][()])

    content = parse_journal(data)

    assert content.tail == b""
    assert list(content.records[1:-1]) == records()
    assert file["/entry/acquisition/journal/data"].attrs["sha256"] == hashlib.sha256(data).hexdigest()


def test_events_are_readable_lines(file: Any) -> None:
    said = bytes(file["/entry/acquisition/events/data"][()]).decode()

    assert said == "30.000 s info: the lamp was switched off — at last\n"


def test_an_instrument_is_described_under_its_role(file: Any) -> None:
    head = file["/entry/instrument/signal"]

    assert head.attrs["NX_class"] == "NXdetector"
    assert text(head["description"]) == "signal: head 7"
    assert text(head["fabrication/serial_number"]) == "0012"
    assert text(head["identity/firmware"]) == "1.4"
    assert head["settings/range"][()] == 2e-3
    assert text(head["settings/averaging"]) == "off"
    assert head["settings/zero"].attrs["name"] == "zéro"
    assert text(head["calibration/certificate"]) == "K-2291"


def test_every_role_that_is_moved_read_or_identified_has_its_group(file: Any) -> None:
    classes = {name: group.attrs["NX_class"] for name, group in file["/entry/instrument"].items()}

    assert classes == {
        "part_mount": "NXpositioner",
        "analyser": "NXpositioner",
        "signal": "NXdetector",
        "reference_monitor": "NXdetector",
        "shutter": "NXcollection",
    }


def test_settings_read_back_later_take_the_place_of_earlier_ones(tmp_path: Path) -> None:
    run = Run(HEADER, is_live=False)
    again = {"kind": "settings", "instrument": "head 7", "values": {"range": 2e-4}}
    for record in [*records(), again]:
        run.keep(record, run.parse(record))

    with opened(run, tmp_path) as file:
        assert file["/entry/instrument/signal/settings/range"][()] == 2e-4
        assert text(file["/entry/instrument/signal/settings/averaging"]) == "off"


def test_the_environment_keeps_seed_truth_versions_and_how_the_run_ended(tmp_path: Path) -> None:
    stopped(tmp_path / "night.h5")

    with h5py.File(tmp_path / "night.h5", "r") as file:
        environment = file["/entry/environment"]
        assert text(environment["run_status"]) == "stopped"
        assert environment["exit_code"][()] == 6
        assert text(environment["why"]) == "stopped by the operator"
        assert environment["seed"][()] == 7
        assert environment["truth/part.dial_offset"][()] == 1.25
        assert environment["truth/part.dial_offset"].attrs["name"] == "part.dial offset"
        assert text(environment["versions/numpy"]) == "2.4.6"


def test_a_simulated_run_says_so_at_the_root(file: Any) -> None:
    assert file.attrs["creator"] == "polrig (simulated bench)"
    assert file["/entry/environment/simulated"][()] == 1
    assert file["/entry/plate/signal"].attrs["simulated"] == 1


def test_a_measured_run_has_no_word_of_simulation(tmp_path: Path) -> None:
    header = replace(HEADER, is_simulated=False, seed=None, truth={}, operator="", part="")

    with opened(Run(header, is_live=False), tmp_path) as file:
        assert file.attrs["creator"] == "polrig"
        assert file["/entry/environment/simulated"][()] == 0
        assert not {"seed", "truth"} & set(file["/entry/environment"])
        assert not {"user", "sample"} & set(file["/entry"])


def test_a_run_without_darks_has_no_group_of_them(tmp_path: Path) -> None:
    with opened(Run(HEADER, is_live=False), tmp_path) as file:
        assert "darks" not in file["entry"]


def test_a_step_called_like_one_of_our_groups_gets_out_of_its_way(tmp_path: Path) -> None:
    steps = (StepLayout("darks", HEADER.steps[0].axes), StepLayout("instrument", HEADER.steps[0].axes))

    with opened(Run(replace(HEADER, steps=steps), is_live=False), tmp_path) as file:
        assert {"darks_2", "instrument_2"} <= set(file["entry"])
        assert file["entry"].attrs["default"] == "darks_2"


def test_steps_whose_names_no_group_can_bear_are_found_under_plain_ones_with_their_name_beside(tmp_path: Path) -> None:
    with opened(FULL_BENCH.run(), tmp_path) as file:
        titles = {name: file["entry"][name].attrs["title"] for name in FULL_BENCH.groups.values()}

    assert titles == {group: step for step, group in FULL_BENCH.groups.items()}


def test_steps_that_differ_by_a_comma_only_have_groups_of_their_own(tmp_path: Path) -> None:
    axes = HEADER.steps[0].axes
    steps = (StepLayout("pair, again", axes), StepLayout("pair again", axes), StepLayout("pair; again", axes))

    with opened(Run(replace(HEADER, steps=steps), is_live=False), tmp_path) as file:
        found = {file["entry"][name].attrs["title"]: name for name in file["entry"] if name.startswith("pair")}

    assert found == {"pair, again": "pair_again", "pair again": "pair_again_2", "pair; again": "pair_again_3"}


def test_what_a_controller_said_over_the_run_is_a_log_with_its_start(tmp_path: Path) -> None:
    with opened(FULL_BENCH.run(), tmp_path) as file:
        log = file["/entry/environment/logs/oven_temperature"]

        assert log.attrs["NX_class"] == "NXlog"
        assert log["time"].attrs["start"] == HEADER.start.isoformat()
        assert (log["time"].attrs["units"], log["value"].attrs["units"]) == ("s", "degC")
        assert log["value"][:2].tolist() == [21.5, 21.9]
        assert log["value"].dims[0][0] == log["time"]


def test_a_run_without_conditions_has_no_logs(file: Any) -> None:
    assert "logs" not in file["/entry/environment"]


def test_sources_and_controllers_are_sensors_and_a_repeat_is_no_instrument(tmp_path: Path) -> None:
    with opened(FULL_BENCH.run(), tmp_path) as file:
        classes = {name: group.attrs["NX_class"] for name, group in file["/entry/instrument"].items()}
        limit = file["/entry/instrument/oven/settings/limit_c"][()]

    assert classes == {
        **dict.fromkeys(("diode", "diode_tec", "oven"), "NXsensor"),
        **dict.fromkeys(("exit_mount", "part_mount"), "NXpositioner"),
        **dict.fromkeys(("signal", "monitor"), "NXdetector"),
    }
    assert limit == 60.0


def test_the_principal_group_is_the_first_step(file: Any) -> None:
    assert file["entry"].attrs["default"] == "plate"


def test_no_string_dataset_is_other_than_fixed_length_ascii(file: Any) -> None:
    kinds: list[h5py.string_info] = []
    file.visititems(
        lambda _, item: kinds.append(h5py.check_string_dtype(item.dtype)) if hasattr(item, "dtype") else None
    )

    strings = [kind for kind in kinds if kind is not None]
    assert len(strings) > 20
    assert {(kind.encoding, kind.length is None) for kind in strings} == {("ascii", False)}


def test_no_filter_is_used_but_gzip_and_shuffle(tmp_path: Path) -> None:
    header = small_header(2000)
    with create_run(tmp_path / "long.h5", header, durable=False) as writer:
        for number in range(2000):
            writer.append(small_visit(number))
        writer.close("complete", t_s=4000.0)

    with h5py.File(tmp_path / "long.h5", "r") as file:
        signal = file["/entry/data/signal"]
        assert (signal.compression, signal.shuffle) == ("gzip", True)
        assert file["/entry/acquisition/journal/data"].compression == "gzip"
        assert signal[1999] == pytest.approx(2e-3)


def test_the_superblock_is_one_that_old_libraries_read(tmp_path: Path) -> None:
    finished(tmp_path / "night.h5")

    head = (tmp_path / "night.h5").read_bytes()[:9]

    assert head == b"\x89HDF\r\n\x1a\n\x00"


words = st.text(max_size=12)


@settings(max_examples=40, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(
    words,
    words,
    st.dictionaries(words, st.one_of(words, st.floats(), st.booleans(), st.integers(0, 9)), max_size=4),
)
def test_no_words_of_people_or_instruments_break_a_view(
    tmp_path: Path, title: str, role: str, values: dict[str, Any]
) -> None:
    header = replace(HEADER, title=title, operator=title, detectors=("signal", f"{role}2"))
    run = Run(header, is_live=True)
    for record in (
        {
            "kind": "identity",
            "instrument": title,
            "role": role,
            "identity": dict.fromkeys(("maker", "model", "serial", "firmware"), title),
        },
        {"kind": "settings", "instrument": title, "values": values},
        {"kind": "event", "t": 1.0, "text": title + "\udc80", "level": "info"},
    ):
        run.keep(record, run.parse(record))

    with opened(run, tmp_path) as file:
        assert len(file["/entry/instrument"]) >= 4


def opened(run: Run, folder: Path) -> Any:
    """The view of a run, open."""
    path = folder / "view.h5"
    path.write_bytes(view_image(run, b"", tail=b"", is_final=False))
    return h5py.File(path, "r")


def test_a_header_is_enough_for_a_view(tmp_path: Path) -> None:
    bare = Header(
        uuid="u",
        start=HEADER.start,
        title="t",
        recipe=RECIPE,
        rig=RECIPE,
        steps=HEADER.steps[:1],
        detectors=("signal",),
    )

    with opened(Run(bare, is_live=True), tmp_path) as file:
        assert np.isnan(file["/entry/plate/signal"]).all()
        assert text(file["/entry/environment/run_status"]) == "running"
