"""The limits that protect a diode, with instruments that obey, and with instruments that do not."""

import itertools
from collections.abc import Mapping
from dataclasses import dataclass, field

import pytest
from hypothesis import given
from hypothesis import strategies as st

from rigctl.errors import InstrumentError, LimitError
from rigctl.files.places import Places
from rigctl.files.rig import Diode, InstrumentEntry, Rig, Room, SimulatedSection
from rigctl.interfaces import (
    ControllerCapabilities,
    ControllerConditions,
    Identity,
    SourceCapabilities,
    SourceConditions,
)
from rigctl.runner.limits import (
    Bound,
    LimitedController,
    LimitedSource,
    SourceLimits,
    controller_limits,
    source_limits,
)

ABLE = SourceCapabilities(current_a=0.2, compliance_v=5.0, resolution_a=1e-6)
OVEN = ControllerCapabilities(span_c=(-10.0, 90.0), resolution_k=1e-3, typical_rate_k_per_s=0.1)
LIMITS = SourceLimits(Bound(0.045, "the diode 'D-1'"), Bound(2.5, "the diode 'D-1'"))


@dataclass
class Source:
    """A current source that keeps a log; `lie` changes what it reads back."""

    capabilities: SourceCapabilities = ABLE
    lies: Mapping[str, float] = field(default_factory=dict)
    goes_on: bool = True
    log: list[tuple[str, float]] = field(default_factory=list)

    def identify(self) -> Identity:
        return Identity("", "", "", "")

    def settings(self) -> Mapping[str, str | float]:
        return {}

    def set_limit(self, current_a: float) -> float:
        return self._set("limit", current_a)

    def set_compliance(self, voltage_v: float) -> float:
        return self._set("compliance", voltage_v)

    def set_current(self, current_a: float) -> float:
        return self._set("current", current_a)

    def set_output(self, is_on: bool) -> bool:
        self.log.append(("output", float(is_on)))
        return is_on and self.goes_on

    def conditions(self) -> SourceConditions:
        return SourceConditions(0.0, 0.0, False, False, False, False)

    def _set(self, name: str, value: float) -> float:
        self.log.append((name, value))
        return self.lies.get(name, value)


def rig(
    *, diodes: Mapping[str, Diode] | None = None, room: Room | None = None, limits: Mapping[str, object] | None = None
) -> tuple[Rig, InstrumentEntry]:
    entry = InstrumentEntry("source 1", "d", "tcp://127.0.0.1:1", {}, dict(limits or {}))  # type: ignore[arg-type]
    made = Rig(
        title="r",
        instruments={"source 1": entry},
        roles={"diode": "source 1"},
        diodes=dict(diodes or {}),
        on_stop={},
        room=room,
        simulated=SimulatedSection(None, {}, {}),
        text="",
        path="rig.yaml",
        sha256="",
        places=Places(),
    )
    return made, entry


def diode(current_a: float, **more: object) -> Diode:
    values: dict[str, object] = {
        "power_w": None,
        "compliance_v": None,
        "temperature_c": None,
        "label_class": "3B",
        **more,
    }
    return Diode(name="D-1", on="source 1", current_a=current_a, **values)  # type: ignore[arg-type]


@pytest.mark.parametrize(("of_diode", "of_rig", "of_instrument"), list(itertools.permutations([0.03, 0.05, 0.07])))
def test_the_tightest_of_diode_rig_and_instrument_wins(of_diode: float, of_rig: float, of_instrument: float) -> None:
    made, entry = rig(diodes={"D-1": diode(of_diode)}, limits={"current": of_rig})
    able = SourceCapabilities(of_instrument, 5.0, 1e-6)

    bound = source_limits(made, entry, able).current_a

    owners = {
        of_diode: "the diode 'D-1'",
        of_rig: "the rig's limit of 'source 1'",
        of_instrument: "the instrument 'source 1'",
    }
    assert bound == Bound(0.03, owners[0.03])


def test_limits_are_programmed_and_read_back_before_the_output_goes_on_at_zero() -> None:
    source = Source()

    LimitedSource(source, LIMITS, "diode").switch_on()

    assert source.log == [("limit", 0.045), ("compliance", 2.5), ("current", 0.0), ("output", 1.0)]


@given(st.floats(min_value=0.045, exclude_min=True, allow_nan=False))
def test_nothing_beyond_the_limit_is_ever_sent(current_a: float) -> None:
    source = Source()
    limited = LimitedSource(source, LIMITS, "diode")

    with pytest.raises(LimitError, match="the diode 'D-1'"):
        limited.set_current(current_a)

    assert source.log == []


@pytest.mark.parametrize("current_a", [float("nan"), -1e-9, float("inf")])
def test_what_is_no_current_is_refused(current_a: float) -> None:
    source = Source()

    with pytest.raises(LimitError):
        LimitedSource(source, LIMITS, "diode").set_current(current_a)

    assert source.log == []


@pytest.mark.parametrize("name", ["limit", "compliance"])
def test_a_driver_that_does_not_program_the_limit_never_gets_its_output_switched_on(name: str) -> None:
    source = Source(lies={name: 99.0})

    with pytest.raises(LimitError, match="reads back as 99"):
        LimitedSource(source, LIMITS, "diode").switch_on()

    assert ("output", 1.0) not in source.log


def test_a_limit_that_reads_back_as_no_number_is_refused() -> None:
    source = Source(lies={"limit": float("nan")})

    with pytest.raises(LimitError):
        LimitedSource(source, LIMITS, "diode").switch_on()

    assert ("output", 1.0) not in source.log


def test_a_driver_that_sets_more_than_asked_gets_its_output_switched_off() -> None:
    source = Source(lies={"current": 0.06})

    with pytest.raises(LimitError, match="switched off"):
        LimitedSource(source, LIMITS, "diode").set_current(0.02)

    assert source.log[-1] == ("output", 0.0)


def test_an_output_that_does_not_go_on_is_told() -> None:
    with pytest.raises(InstrumentError, match="does not go on"):
        LimitedSource(Source(goes_on=False), LIMITS, "diode").switch_on()


def test_the_output_goes_off_before_zero_is_set() -> None:
    source = Source()

    is_on = LimitedSource(source, LIMITS, "diode").switch_off()

    assert not is_on
    assert source.log == [("output", 0.0), ("current", 0.0)]


def test_a_zero_that_cannot_be_set_does_not_hide_that_the_output_is_off() -> None:
    class Broken(Source):
        def set_current(self, current_a: float) -> float:
            raise RuntimeError("a driver's bug")

    source = Broken()

    is_on = LimitedSource(source, LIMITS, "diode").switch_off()

    assert not is_on
    assert source.log == [("output", 0.0)]


def test_a_diode_s_temperature_span_binds_the_controller_that_cools_it() -> None:
    made, entry = rig()
    cooled = [diode(0.04, temperature_c=(10.0, 40.0))]

    limits = controller_limits(made, entry, OVEN, cooled=cooled)

    assert (limits.low_c.value, limits.high_c.value) == (10.0, 40.0)


def test_no_setpoint_below_the_dew_point_plus_three_kelvin_where_humidity_is_known() -> None:
    # 25 degC and 50 %: dew point 13.9 degC (psychrometric tables; from memory, 0.1 K)
    made, entry = rig(room=Room(humidity=0.5, temperature_c=25.0))

    limits = controller_limits(made, entry, OVEN, cooled=[])

    assert limits.low_c.value == pytest.approx(16.9, abs=0.1)
    assert "dew point" in limits.low_c.owner


@dataclass
class Controller:
    capabilities: ControllerCapabilities = OVEN
    log: list[str] = field(default_factory=list)

    def identify(self) -> Identity:
        return Identity("", "", "", "")

    def settings(self) -> Mapping[str, str | float]:
        return {}

    def set_span(self, low_c: float, high_c: float) -> None:
        self.log.append(f"span {low_c} {high_c}")

    def set_temperature(self, temperature_c: float) -> float:
        self.log.append(f"set {temperature_c}")
        return temperature_c

    def set_output(self, is_on: bool) -> bool:
        self.log.append(f"output {is_on}")
        return is_on

    def conditions(self) -> ControllerConditions:
        return ControllerConditions(20.0, 1e4, True, False)


@pytest.mark.parametrize("temperature_c", [-10.1, 90.1, float("inf")])
def test_a_temperature_beyond_its_bounds_is_refused_and_nothing_sent(temperature_c: float) -> None:
    made, entry = rig()
    controller = Controller()
    limited = LimitedController(controller, controller_limits(made, entry, OVEN, cooled=[]), "oven")

    with pytest.raises(LimitError, match="the instrument"):
        limited.set_temperature(temperature_c)

    assert controller.log == []
