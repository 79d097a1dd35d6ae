"""The header and its steps."""

import hashlib
from dataclasses import replace
from datetime import datetime
from typing import Any

import pytest
from record_cases import HEADER, PAIR, PLATE, RECIPE

from rigctl.errors import RecordError
from rigctl.record import AxisLayout, Document, Header, StepLayout
from rigctl.record.journal import frame, parse_journal
from rigctl.record.layout import check_header


def test_a_header_comes_back_from_the_journal_as_it_was() -> None:
    line, _ = frame(HEADER.to_record(), 0)

    assert Header.from_record(parse_journal(line).records[0]) == HEADER


def test_a_document_knows_its_digest() -> None:
    assert RECIPE.sha256 == hashlib.sha256(RECIPE.text.encode()).hexdigest()
    assert Document.of("", "empty.yaml").sha256 == hashlib.sha256(b"").hexdigest()


def test_the_shape_of_a_step_has_the_slowest_axis_first() -> None:
    assert PAIR.shape == (2, 3)


def test_a_step_is_found_by_its_name_and_a_wrong_name_lists_the_right_ones() -> None:
    assert HEADER.step("plate") is PLATE

    with pytest.raises(RecordError, match="no step 'plait'") as caught:
        HEADER.step("plait")

    assert "plate, empty pair" in caught.value.do


def test_a_good_header_is_accepted() -> None:
    check_header(HEADER)


@pytest.mark.parametrize(
    ("change", "message"),
    [
        ({"start": datetime(2026, 12, 1)}, "no offset from UTC"),
        ({"steps": ()}, "at least one step"),
        ({"detectors": ()}, "one detector"),
        ({"detectors": ("a", "b", "a")}, "detector 'a'"),
        ({"monitor": "lamp"}, "monitor 'lamp'"),
        ({"monitor": "signal", "detectors": ("signal",)}, "monitor 'signal'"),
        ({"steps": (PLATE, PLATE)}, "step 'plate'"),
        ({"steps": (StepLayout("p", ()),)}, "'p' has no visit"),
        ({"steps": (StepLayout("p", (AxisLayout("a", "m", "deg", ()),)),)}, "'p' has no visit"),
        (
            {"steps": (StepLayout("p", (PLATE.axes[0], PLATE.axes[0])),)},
            "axis of step 'p' 'part_mount_angle'",
        ),
    ],
)
def test_a_header_that_no_file_can_hold_is_refused(change: dict[str, Any], message: str) -> None:
    with pytest.raises(RecordError, match=message):
        check_header(replace(HEADER, **change))
