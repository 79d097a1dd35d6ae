"""Limits that nothing passes: every setpoint of a source or controller goes through here.

It owns which limit is the tightest of the diode's, the rig's and the instrument's, and the only objects through
which the runner may set a current or a temperature. A driver that ignores its own limit cannot get past them: what
is asked for is compared before it is sent, and what was set is compared as read back.
"""

from collections.abc import Iterator, Mapping
from contextlib import suppress
from dataclasses import dataclass

from rigctl.errors import InstrumentError, LimitError
from rigctl.files.recipe import Recipe
from rigctl.files.rig import Diode, InstrumentEntry, Rig
from rigctl.interfaces import (
    ControllerCapabilities,
    ControllerConditions,
    CurrentSource,
    Driver,
    SourceCapabilities,
    SourceConditions,
    TemperatureController,
)
from rigctl.runner.room import lowest_setpoint_c


@dataclass(frozen=True, slots=True)
class Bound:
    """A limit and who sets it."""

    value: float
    owner: str


@dataclass(frozen=True, slots=True)
class SourceLimits:
    """What a source may do to the diode on it."""

    current_a: Bound
    compliance_v: Bound


@dataclass(frozen=True, slots=True)
class ControllerLimits:
    """Between which temperatures a controller may be set, degC."""

    low_c: Bound
    high_c: Bound


def diodes_on(rig: Rig, entry: InstrumentEntry) -> list[Diode]:
    """Return the diodes that stand on a source."""
    return [diode for diode in rig.diodes.values() if diode.on == entry.name]


def cooled_diodes(recipe: Recipe, rig: Rig, role: str) -> list[Diode]:
    """Return the diodes whose temperature a controller keeps."""
    if role != recipe.source.cooled_by or recipe.source.driven_by is None:
        return []
    entry = rig.entry(recipe.source.driven_by)
    return [] if entry is None else diodes_on(rig, entry)


def source_limits(rig: Rig, entry: InstrumentEntry, able: SourceCapabilities) -> SourceLimits:
    """Return the tightest limits of a source."""
    current = [Bound(able.current_a, f"the instrument '{entry.name}'")]
    compliance = [Bound(able.compliance_v, f"the instrument '{entry.name}'")]
    if "current" in entry.limits:
        current.append(Bound(_one(entry.limits["current"]), f"the rig's limit of '{entry.name}'"))
    if "compliance" in entry.limits:
        compliance.append(Bound(_one(entry.limits["compliance"]), f"the rig's limit of '{entry.name}'"))
    for diode in diodes_on(rig, entry):
        current.append(Bound(diode.current_a, f"the diode '{diode.name}'"))
        if diode.compliance_v is not None:
            compliance.append(Bound(diode.compliance_v, f"the diode '{diode.name}'"))
    return SourceLimits(min(current, key=_value), min(compliance, key=_value))


def controller_limits(
    rig: Rig, entry: InstrumentEntry, able: ControllerCapabilities, *, cooled: list[Diode]
) -> ControllerLimits:
    """Return the tightest limits of a controller.

    Parameters
    ----------
    cooled
        The diodes whose temperature it keeps.
    """
    low = [Bound(able.span_c[0], f"the instrument '{entry.name}'")]
    high = [Bound(able.span_c[1], f"the instrument '{entry.name}'")]
    spans = [(diode.temperature_c, f"the diode '{diode.name}'") for diode in cooled if diode.temperature_c]
    if "temperature" in entry.limits:
        spans.append((_two(entry.limits["temperature"]), f"the rig's limit of '{entry.name}'"))
    for span_c, owner in spans:
        low.append(Bound(span_c[0], owner))
        high.append(Bound(span_c[1], owner))
    if rig.room is not None:
        dew_c = lowest_setpoint_c(rig.room.temperature_c, rig.room.humidity)
        low.append(Bound(dew_c, "the dew point of the room, and 3 K above it"))
    return ControllerLimits(max(low, key=_value), min(high, key=_value))


def _value(bound: Bound) -> float:
    return bound.value


def _one(limit: float | tuple[float, float]) -> float:
    return limit if isinstance(limit, float) else limit[1]


def _two(limit: float | tuple[float, float]) -> tuple[float, float]:
    return (-273.15, limit) if isinstance(limit, float) else limit


class LimitedSource:
    """A current source behind its limits; the runner has no other."""

    def __init__(self, source: CurrentSource, limits: SourceLimits, role: str) -> None:
        self.limits, self.role = limits, role
        self._source = source
        self._is_programmed = False
        self.set_a = 0.0
        self.has_been_on = False
        """Whether this run ever told the output to go on."""
        self.is_on = False

    def program(self) -> None:
        """Program current limit and compliance on the instrument, and compare what it reads back."""
        current_a, compliance_v = self.limits.current_a, self.limits.compliance_v
        self._refuse_looser(self._source.set_limit(current_a.value), current_a, "A", what="current limit")
        self._refuse_looser(self._source.set_compliance(compliance_v.value), compliance_v, "V", what="compliance")
        self._is_programmed = True

    def set_current(self, current_a: float) -> None:
        """Set a current that the limits allow.

        Raises
        ------
        LimitError
            When it lies beyond the limit (nothing is sent then), or reads back beyond it (the output goes off).
        """
        self.refuse_beyond(current_a)
        bound = self.limits.current_a
        read_a = self._source.set_current(current_a)
        if read_a > bound.value + self._source.capabilities.resolution_a:
            self._source.set_output(False)
            raise self._beyond(f"{current_a:.6g} A was set and {read_a:.6g} A reads back; the output was switched off",
                               bound, "A")  # fmt: skip
        self.set_a = current_a

    def refuse_beyond(self, current_a: float) -> None:
        """Raise `LimitError` for a current that the limits do not allow; nothing is sent."""
        bound = self.limits.current_a
        if not 0.0 <= current_a <= bound.value:
            raise self._beyond(f"{current_a:.6g} A was asked for", bound, "A")

    def switch_on(self) -> None:
        """Switch the output on at zero current, once the limits stand on the instrument."""
        if not self._is_programmed:
            self.program()
        self.set_current(0.0)
        self.has_been_on = True
        if not self._source.set_output(True):
            raise InstrumentError("the output does not go on", where=self.role, do="Look at its interlock and panel.")
        self.is_on = True

    def switch_off(self) -> bool:
        """Switch the output off, then set zero; return whether it reads back on.

        Off comes first: on a wire that has lost its step, setting zero may wait for many seconds. A zero that cannot
        be set harms nothing, since the output never goes on before it was set again.
        """
        try:
            self.is_on = self._source.set_output(False)
        finally:
            with suppress(Exception):
                self._source.set_current(0.0)
            self.set_a = 0.0
        return self.is_on

    def conditions(self) -> SourceConditions:
        """Read back everything."""
        return self._source.conditions()

    def _refuse_looser(self, read: float, bound: Bound, unit: str, *, what: str) -> None:
        if not read <= bound.value * 1.001 + self._source.capabilities.resolution_a:
            raise self._beyond(f"the {what} reads back as {read:.6g} {unit} after it was programmed", bound, unit)

    def _beyond(self, what: str, bound: Bound, unit: str) -> LimitError:
        return LimitError(
            f"{what}, beyond {bound.value:.6g} {unit} of {bound.owner}",
            where=self.role,
            do="Change the setpoint, or the limit where it is wrong.",
        )


class LimitedController:
    """A temperature controller behind its limits."""

    def __init__(self, controller: TemperatureController, limits: ControllerLimits, role: str) -> None:
        self.limits, self.role = limits, role
        self._controller = controller
        self.set_c: float | None = None

    def program(self) -> None:
        """Program the temperature limits on the instrument; the driver reads them back."""
        self._controller.set_span(self.limits.low_c.value, self.limits.high_c.value)

    def set_temperature(self, temperature_c: float) -> None:
        """Set a temperature that the limits allow, and regulate."""
        for bound, is_beyond in self._bounds(temperature_c):
            if is_beyond:
                raise LimitError(
                    f"{temperature_c:.6g} degC was asked for, beyond {bound.value:.4g} degC of {bound.owner}",
                    where=self.role,
                    do="Change the setpoint, or the limit where it is wrong.",
                )
        self._controller.set_temperature(temperature_c)
        self._controller.set_output(True)
        self.set_c = temperature_c

    def switch_off(self) -> bool:
        """End regulating; return whether it reads back on."""
        return self._controller.set_output(False)

    def conditions(self) -> ControllerConditions:
        """Read temperature, resistance and state."""
        return self._controller.conditions()

    def _bounds(self, temperature_c: float) -> Iterator[tuple[Bound, bool]]:
        yield self.limits.low_c, temperature_c < self.limits.low_c.value
        yield self.limits.high_c, temperature_c > self.limits.high_c.value


def refuse_beyond_limits(recipe: Recipe, rig: Rig, drivers: Mapping[str, Driver]) -> None:
    """Compare every setpoint of a recipe with the tightest limits, from the files alone.

    Errors
    ------
    `LimitError` naming every setpoint that lies beyond; nothing was sent.
    """
    found = (_beyond(recipe, rig, drivers, role=role, value=value) for role, value in _setpoints(recipe))
    beyond = [text for text in found if text]
    if beyond:
        raise LimitError(
            "; ".join(dict.fromkeys(beyond)),
            where=recipe.path,
            do="Nothing was sent. Change the setpoint, or the limit where it is wrong.",
        )


def _setpoints(recipe: Recipe) -> Iterator[tuple[str, float]]:
    for wanted in recipe.preparations:
        yield wanted.role, wanted.to
    for step in recipe.steps:
        for axis in step.sweep:
            if axis.kind in ("temperature", "current"):
                yield from ((axis.role, value) for value in (min(axis.values), max(axis.values)))


def _beyond(recipe: Recipe, rig: Rig, drivers: Mapping[str, Driver], *, role: str, value: float) -> str:
    """Return what is wrong with a setpoint, or nothing."""
    entry = rig.entry(role)
    if entry is None:
        return ""
    able = drivers[entry.driver].capabilities(entry.options)
    if isinstance(able, SourceCapabilities):
        bound = source_limits(rig, entry, able).current_a
        if value > bound.value:
            return f"'{role}' is to go to {value * 1e3:.6g} mA, beyond {bound.value * 1e3:.6g} mA of {bound.owner}"
    if isinstance(able, ControllerCapabilities):
        limits = controller_limits(rig, entry, able, cooled=cooled_diodes(recipe, rig, role))
        bound = limits.low_c if value < limits.low_c.value else limits.high_c
        if not limits.low_c.value <= value <= limits.high_c.value:
            return f"'{role}' is to go to {value:.6g} degC, beyond {bound.value:.4g} degC of {bound.owner}"
    return ""
