import pytest
from hypothesis import given
from hypothesis import strategies as st

from rigctl.runner.room import dew_point_c, lowest_setpoint_c


@pytest.mark.parametrize(
    ("temperature_c", "humidity", "dew_c"),
    # psychrometric tables as commonly printed, to 0.1 K; from memory
    [(20.0, 0.5, 9.3), (25.0, 0.6, 16.7), (30.0, 0.8, 26.2), (21.0, 0.45, 8.6)],
)
def test_dew_points_are_those_of_common_tables(temperature_c: float, humidity: float, dew_c: float) -> None:
    assert dew_point_c(temperature_c, humidity) == pytest.approx(dew_c, abs=0.15)


@given(st.floats(-20, 50))
def test_saturated_air_has_its_dew_point_at_its_own_temperature(temperature_c: float) -> None:
    assert dew_point_c(temperature_c, 1.0) == pytest.approx(temperature_c, abs=1e-9)


@given(st.floats(-20, 50), st.floats(0.05, 0.95))
def test_the_lowest_setpoint_rises_with_humidity(temperature_c: float, humidity: float) -> None:
    assert lowest_setpoint_c(temperature_c, humidity) < lowest_setpoint_c(temperature_c, humidity + 0.05)
