"""The dark of a reading: on its range, at its instant."""

import math

import numpy as np
import pytest
from correction_cases import at_dark, at_visit, level, run_of
from hypothesis import given
from hypothesis import strategies as st
from numpy.testing import assert_allclose, assert_array_equal
from record_cases import dwell

from rigctl.interfaces import Flag
from rigctl.record import dwell_record
from rigctl.record.correction import DarkTrack, dark_tracks
from rigctl.record.table import step_table


def test_a_dark_between_two_is_linear_in_time() -> None:
    darks = [at_dark(0.0, signal=level(1e-9, 0.0)), at_dark(40.0, when="after", signal=level(5e-9, 40.0))]

    table = step_table(run_of([darks[0], at_visit(0, 10.0, signal=level(1e-6, 10.0)), darks[1]]), "line")

    assert table["signal_dark"][0] == pytest.approx(2e-9, rel=1e-12)
    assert table["signal_corrected"][0] == pytest.approx(0.998e-6, rel=1e-12)
    assert table["signal"][0] == pytest.approx(1e-6, rel=1e-12)


def test_before_the_first_and_after_the_last_the_nearest_dark_counts() -> None:
    visits = [at_visit(n, t_s, signal=level(1e-6, t_s)) for n, t_s in ((0, 5.0), (1, 15.0), (2, 95.0))]
    darks = [at_dark(t_s, when="during", signal=level(w, t_s)) for t_s, w in ((10.0, 1e-9), (20.0, 3e-9))]

    table = step_table(run_of([visits[0], darks[0], visits[1], darks[1], visits[2]]), "line")

    assert_allclose(table["signal_dark"], [1e-9, 2e-9, 3e-9], rtol=1e-12)


def test_dwells_of_one_dark_are_averaged_and_darks_with_visits_between_them_are_not() -> None:
    together = [at_dark(t_s, when="during", signal=level(w, t_s)) for t_s, w in ((1.0, 1e-9), (3.0, 3e-9))]
    apart = at_dark(10.0, when="during", signal=level(9e-9, 10.0))

    run = run_of([*together, at_visit(0, 6.0, signal=level(1e-6, 6.0)), apart])

    (track,) = dark_tracks(run, "signal").values()
    assert_allclose(track.times_s, [2.0, 10.0])
    assert_allclose(track.means_w, [2e-9, 9e-9])


def test_a_dark_after_one_step_and_one_before_the_next_stay_two() -> None:
    after = at_dark(1.0, when="after", signal=level(1e-9, 1.0))

    run = run_of([after, at_dark(3.0, when="before", signal=level(3e-9, 3.0))])

    assert len(dark_tracks(run, "signal")[2e-3].times_s) == 2


def test_each_range_has_its_own_dark_and_a_range_without_one_is_not_corrected() -> None:
    darks = [
        at_dark(0.0, signal=level(1e-9, 0.0, range_w=2e-3)),
        at_dark(1.0, signal=level(7e-12, 1.0, range_w=2e-5)),
    ]
    visits = [
        at_visit(number, 10.0 + number, signal=level(1e-6, 10.0 + number, range_w=range_w))
        for number, range_w in enumerate((2e-3, 2.0000001e-5, 2e-4))
    ]

    table = step_table(run_of([*darks, *visits]), "line")

    assert_allclose(table["signal_dark"], [1e-9, 7e-12, np.nan], rtol=1e-12)
    assert np.isnan(table["signal_corrected"]).tolist() == [False, False, True]
    assert np.isfinite(table["signal"]).all()


def test_a_background_stands_in_where_the_beam_was_never_blocked() -> None:
    background = at_dark(0.0, what="background", signal=level(2e-9, 0.0))

    table = step_table(run_of([background, at_visit(0, 9.0, signal=level(1e-6, 9.0))]), "line")

    assert table["signal_dark"][0] == pytest.approx(2e-9)


def test_a_blocked_beam_is_taken_before_a_background() -> None:
    darks = [at_dark(0.0, what="background", signal=level(2e-9, 0.0)), at_dark(1.0, signal=level(4e-9, 1.0))]

    table = step_table(run_of([*darks, at_visit(0, 9.0, signal=level(1e-6, 9.0))]), "line")

    assert table["signal_dark"][0] == pytest.approx(4e-9)


def test_a_capped_detector_says_nothing_of_the_room_and_is_not_subtracted() -> None:
    zero = at_dark(0.0, what="zero", signal=level(2e-9, 0.0))

    table = step_table(run_of([zero, at_visit(0, 9.0, signal=level(1e-6, 9.0))]), "line")

    assert np.isnan(table["signal_dark"]).all()
    assert np.isnan(table["signal_corrected"]).all()


def test_a_dark_that_overloaded_does_not_count() -> None:
    darks = [
        at_dark(0.0, signal=level(1e-9, 0.0)),
        at_dark(1.0, signal=level(1e-3, 1.0, flags=Flag.OVERLOAD)),
    ]

    assert dark_tracks(run_of(darks), "signal")[2e-3].means_w.tolist() == pytest.approx([1e-9])
    assert dark_tracks(run_of(darks[1:]), "signal") == {}


def test_one_reading_of_dark_corrects_but_leaves_the_uncertainty_open() -> None:
    single = dwell_record(dwell(1e-9, began_s=0.0, levels=1))

    table = step_table(run_of([at_dark(0.0, signal=single), at_visit(0, 9.0, signal=level(1e-6, 9.0))]), "line")

    assert table["signal_corrected"][0] == pytest.approx(0.999e-6)
    assert math.isnan(table["signal_corrected_errors"][0])


def test_the_darks_own_uncertainty_counts_less_between_two_of_them() -> None:
    darks = [
        at_dark(t_s, when="during", signal=level(1e-9, t_s, spread_w=1e-10 * math.sqrt(3.0))) for t_s in (0.0, 20.0)
    ]
    visits = [at_visit(0, 10.0, signal=level(1e-6, 10.0, spread_w=0.0)), at_visit(1, 30.0, signal=level(1e-6, 30.0))]

    table = step_table(run_of([darks[0], visits[0], darks[1], visits[1]]), "line")

    assert_allclose(table["signal_dark_errors"], [1e-10 / math.sqrt(2.0), 1e-10, np.nan], rtol=1e-6)
    assert table["signal_corrected_errors"][0] == pytest.approx(1e-10 / math.sqrt(2.0), rel=1e-6)


times = st.lists(st.floats(0.0, 1e5), min_size=2, max_size=9, unique=True).map(sorted)


@given(times, st.floats(-1.0, 1.0), st.floats(-1.0, 1.0), st.floats(0.0, 1.0))
def test_a_dark_that_drifts_steadily_is_found_anywhere_between(
    times_s: list[float], offset_w: float, slope: float, share: float
) -> None:
    instants = np.array(times_s)
    line_w = offset_w + slope * instants / 1e5
    track = DarkTrack(instants, line_w, np.ones_like(instants))
    now_s = times_s[0] + share * (times_s[-1] - times_s[0])

    (found,), (variance,) = track.at(np.array([now_s]))

    assert found == pytest.approx(offset_w + slope * now_s / 1e5, abs=1e-9)
    assert 0.5 - 1e-9 <= variance <= 1.0 + 1e-9


def test_a_single_dark_holds_for_the_whole_run() -> None:
    track = DarkTrack(np.array([5.0]), np.array([1e-9]), np.array([4.0]))

    means_w, variances_w2 = track.at(np.array([0.0, 5.0, 99.0]))

    assert_array_equal(means_w, [1e-9] * 3)
    assert_array_equal(variances_w2, [4.0] * 3)
