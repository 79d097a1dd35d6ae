"""Is a run file whole and unchanged, and what changed."""

from collections.abc import Callable
from pathlib import Path
from typing import Any

import h5py
import numpy as np
import pytest
from record_cases import STATES, finished, killed, records, view_only, write

from rigctl.errors import DamagedFileError, UsageError
from rigctl.record import load_run, verify_run
from rigctl.record.digest import DIGEST


@pytest.fixture
def path(tmp_path: Path) -> Path:
    """A finished run file."""
    finished(tmp_path / "night.h5")
    return tmp_path / "night.h5"


@pytest.mark.parametrize("state", ["finished", "stopped", "killed", "recovered"])
def test_a_file_that_nobody_touched_is_whole(state: str, tmp_path: Path) -> None:
    STATES[state](tmp_path / "night.h5")

    result = verify_run(tmp_path / "night.h5")

    assert result.is_whole
    assert result.findings() == ()
    assert result.checked > 80


@pytest.mark.parametrize(
    "name",
    [
        "/entry/plate/signal",
        "/entry/plate/signal_levels",
        "/entry/plate/part_mount_angle",
        "/entry/plate/status",
        "/entry/empty_pair/visit",
        "/entry/darks/reference_monitor",
        "/entry/acquisition/recipe/data",
        "/entry/acquisition/journal/data",
        "/entry/environment/truth/part.retardance",
        "/entry/instrument/signal/settings/range",
    ],
)
def test_one_changed_value_is_found_and_named(path: Path, name: str) -> None:
    with h5py.File(path, "r+") as file:
        values = np.array(file[name])
        first = (0,) * values.ndim
        values[first] = values[first] + 1
        file[name][...] = values

    result = verify_run(path)

    assert not result.is_whole
    assert result.changed == (name,)
    assert result.findings() == (f"{name} has changed",)


def test_the_last_bit_of_a_power_counts(path: Path) -> None:
    with h5py.File(path, "r+") as file:
        file["/entry/plate/signal"][0] = np.nextafter(file["/entry/plate/signal"][0], 1.0)

    assert verify_run(path).changed == ("/entry/plate/signal",)


def change_units(file: Any) -> None:
    file["/entry/plate/signal"].attrs["units"] = "mW"


def change_signal(file: Any) -> None:
    file["/entry/plate"].attrs["signal"] = "reference_monitor"


def rename_creator(file: Any) -> None:
    file.attrs["creator"] = "polrig"


def change_text(file: Any) -> None:
    file["/entry/sample/name"][()] = np.bytes_("QWP-119")


@pytest.mark.parametrize(
    ("change", "name"),
    [
        (change_units, "/entry/plate/signal"),
        (change_signal, "/entry/plate"),
        (rename_creator, "/"),
        (change_text, "/entry/sample/name"),
    ],
)
def test_changed_units_and_words_are_found_too(path: Path, change: Callable[[Any], None], name: str) -> None:
    with h5py.File(path, "r+") as file:
        change(file)

    assert verify_run(path).changed == (name,)


def test_what_was_taken_away_is_named(path: Path) -> None:
    with h5py.File(path, "r+") as file:
        del file["/entry/darks/time"]

    result = verify_run(path)

    assert result.missing == ("/entry/darks/time",)
    assert result.findings() == ("/entry/darks/time is missing",)


@pytest.mark.parametrize("other", [np.uint64(7), np.array([7]), np.array([[7]])])
def test_the_same_bytes_in_another_type_or_shape_have_changed(path: Path, other: Any) -> None:
    with h5py.File(path, "r+") as file:
        assert file["/entry/environment/seed"][()].tobytes() == other.tobytes()
        del file["/entry/environment/seed"]
        file["/entry/environment"].create_dataset("seed", data=other)

    assert verify_run(path).changed == ("/entry/environment/seed",)


def test_a_group_added_later_is_told_and_is_no_damage(path: Path) -> None:
    with h5py.File(path, "r+") as file:
        file.create_dataset("/entry/remark/text", data=np.bytes_("cleaned the part"))

    result = verify_run(path)

    assert result.is_whole
    assert result.added == ("/entry/remark", "/entry/remark/text")


def test_a_list_of_digests_that_was_edited_is_itself_named(path: Path) -> None:
    with h5py.File(path, "r+") as file:
        file[f"{DIGEST}/data"][40] ^= 1

    assert verify_run(path).changed == (DIGEST,)


def test_bytes_flipped_under_the_library_never_pass_unseen(path: Path) -> None:
    whole = path.read_bytes()
    with h5py.File(path, "r") as file:
        place = file["/entry/plate/signal"].id.get_offset()

    for offset in range(0, 32, 5):
        damaged = bytearray(whole)
        damaged[place + offset] ^= 0x40
        path.write_bytes(bytes(damaged))

        assert verify_run(path).changed == ("/entry/plate/signal",)


def test_compressed_data_that_cannot_be_read_count_as_changed(path: Path) -> None:
    with h5py.File(path, "r+") as file:
        stored = file["/entry/acquisition/journal/data"].id.get_chunk_info(0)
    with path.open("r+b") as raw:
        raw.seek(stored.byte_offset + 5)
        raw.write(b"\xff" * 40)

    assert verify_run(path).changed == ("/entry/acquisition/journal/data",)


@pytest.mark.parametrize("share", [0.0, 0.2, 0.6, 0.99])
def test_a_truncated_file_is_damaged(path: Path, share: float) -> None:
    whole = path.read_bytes()
    path.write_bytes(whole[: int(share * len(whole))])

    with pytest.raises(DamagedFileError, match="cannot be read"):
        verify_run(path)


def test_another_file_is_no_run_file(tmp_path: Path) -> None:
    (tmp_path / "notes.txt").write_text("no data")

    with pytest.raises(DamagedFileError, match="cannot be read"):
        verify_run(tmp_path / "notes.txt")


def test_another_hdf5_file_is_no_run(tmp_path: Path) -> None:
    with h5py.File(tmp_path / "other.h5", "w") as file:
        file["x"] = 1.0

    assert not verify_run(tmp_path / "other.h5").is_whole
    with pytest.raises(DamagedFileError, match="no record of a run"):
        load_run(tmp_path / "other.h5")


def test_a_file_that_is_not_there_is_a_mistake_of_the_command_line(tmp_path: Path) -> None:
    with pytest.raises(UsageError, match="no such run file"):
        verify_run(tmp_path / "nothing.h5")
    with pytest.raises(UsageError, match="no such run file"):
        load_run(tmp_path / "nothing.h5")


def test_a_run_under_way_is_not_whole_yet(tmp_path: Path) -> None:
    with write(tmp_path / "night.h5", durable=True):
        result = verify_run(tmp_path / "night.h5")

    assert (result.is_live, result.is_whole) == (True, False)
    assert result.findings() == ("it is being recorded now",)


def test_a_copy_made_during_a_run_is_told_as_never_closed(tmp_path: Path) -> None:
    view_only(tmp_path / "night.h5")

    result = verify_run(tmp_path / "night.h5")

    assert not result.is_whole
    assert result.findings() == ("it was never closed: a copy made during its run",)


def test_verifying_an_interrupted_run_folds_it_first(tmp_path: Path) -> None:
    killed(tmp_path / "night.h5")

    assert verify_run(tmp_path / "night.h5").is_whole
    assert not (tmp_path / "night.h5.journal").exists()


def test_a_changed_copy_of_the_journal_is_never_read_as_a_run(path: Path) -> None:
    with h5py.File(path, "r+") as file:
        data = file["/entry/acquisition/journal/data"]
        data[data.shape[0] // 2] ^= 1

    with pytest.raises(DamagedFileError, match=r"only \d+ records can be read") as caught:
        load_run(path)

    assert "polrig verify" in caught.value.do
    assert len(records()) > 5
