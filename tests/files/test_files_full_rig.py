"""What a rig file with a driven diode becomes, and how its mistakes are told."""

import pytest
from files_cases import Changes, told
from full_cases import BENCH, bench

from rigctl.errors import FileError
from rigctl.files.rig import Diode, Room
from rigctl.thermistor import Beta

LIMITS = "{current: 45 mA, power: 40 mW, compliance: 2.5 V, temperature: 10 degC to 40 degC}"
SOURCE = "source 1: {driver: scpi-current-source, at: tcp://10.0.0.8:5025, channel: 1}"


def mistake(changes: Changes) -> tuple[str, str, str, str]:
    """Return the text at the place of the only mistake, what, expected and nearest."""
    with pytest.raises(FileError) as caught:
        bench(changes)
    (only,) = caught.value.mistakes
    text = BENCH
    for old, new in changes.items():
        text = text.replace(old, new, 1)
    return text.splitlines()[only.line - 1][only.column - 1 :], only.what, only.expected, only.nearest


def test_a_diode_stands_on_a_source_with_its_limits_and_the_class_on_its_label() -> None:
    assert bench().diodes == {"D-118": Diode("D-118", "source 1", 0.045, 0.04, 2.5, (10.0, 40.0), label_class="3B")}


def test_a_diode_needs_no_more_than_a_largest_current() -> None:
    assert bench({LIMITS: "{current: 45 mA}"}).diodes["D-118"] == Diode(
        "D-118", "source 1", 0.045, None, None, None, label_class="3B"
    )


def test_a_role_leads_to_the_diode_on_its_source() -> None:
    diode = bench().diode("diode")

    assert diode is not None
    assert diode.name == "D-118"


@pytest.mark.parametrize("role", ["signal", "monitor"])
def test_a_role_without_a_diode_leads_to_none(role: str) -> None:
    assert bench().diode(role) is None


def test_what_controllers_do_at_the_end_is_by_role() -> None:
    assert bench({"regulating}": "regulating, oven: switch off}"}).on_stop == {
        "diode tec": "keep regulating",
        "oven": "switch off",
    }


def test_the_room_has_humidity_and_temperature_where_they_are_known() -> None:
    room = bench({"rig: bench 2\n": "rig: bench 2\nroom: {humidity: 45 %, temperature: 21 degC}\n"}).room

    assert room == Room(0.45, 21.0)
    assert bench().room is None


@pytest.mark.parametrize(
    ("instrument", "old", "limits", "expected"),
    [
        ("head 7", "limits: {power: 5 mW}", "limits: {power: 5 mW}", {"power": 5e-3}),
        ("source 1", "channel: 1}", "channel: 1, limits: {current: 60 mA}}", {"current": 0.06}),
        (
            "source 1",
            "channel: 1}",
            "channel: 1, limits: {current: 60 mA, compliance: 3 V}}",
            {"current": 0.06, "compliance": 3.0},
        ),
        ("tec 1", "channel: 2}", "channel: 2, limits: {temperature: 15 to 35 degC}}", {"temperature": (15.0, 35.0)}),
    ],
)
def test_an_instrument_has_the_limits_of_its_kind(
    instrument: str, old: str, limits: str, expected: dict[str, object]
) -> None:
    assert bench({old: limits}).instruments[instrument].limits == expected


def test_one_instrument_may_fill_the_roles_of_several_recipes() -> None:
    rig = bench({"signal: head 7,": "signal: head 7, detector: head 7,"})

    assert rig.entry("signal") is rig.entry("detector")


def test_a_sensor_s_constants_are_read() -> None:
    rig = bench({"channel: 2}": 'channel: 2, thermistor: "beta 3976 K, 10 kOhm at 25 degC"}'})

    assert rig.instruments["tec 1"].options["thermistor"] == Beta(1e4, 25.0, 3976.0)


def test_several_channels_of_one_instrument_share_its_address() -> None:
    rig = bench()

    assert {rig.instruments[name].at for name in ("source 1", "tec 1", "shutter 1")} == {"tcp://10.0.0.8:5025"}


@pytest.mark.parametrize(
    ("old", "new", "at", "what", "expected", "nearest"),
    [
        (
            "on: source 1",
            "on: sauce 1",
            "sauce 1",
            "no instrument is called 'sauce 1'",
            "a current source, here 'source 1'",
            "source 1",
        ),
        (
            "on: source 1",
            "on: tec 1",
            "tec 1",
            "'tec 1' is a temperature controller",
            "a current source, here 'source 1'",
            "",
        ),
        (
            "diodes:\n",
            "diodes:\n  D-117: {on: source 1, limits: {current: 1 mA}, class on label: 1}\n",
            "source 1",
            "'source 1' drives 'D-117' already",
            "one diode on each source: that which is on the bench",
            "",
        ),
        ("current: 45 mA, ", "", "limits", "the key 'current' of 'limits' is missing", "", ""),
        (
            "current: 45 mA",
            "current: 0 mA",
            "0 mA",
            "'0 mA' is not above zero",
            "a current such as 34 mA",
            "",
        ),
        (
            "compliance: 2.5 V",
            "compliance: 2.5 mA",
            "2.5 mA",
            "'mA' is not a unit of a voltage",
            "one of the units V, mV",
            "",
        ),
        (
            "10 degC to 40 degC",
            "40 degC to 10 degC",
            "40 degC",
            "the span '40 degC to 10 degC' does not go up",
            "the lower end first",
            "",
        ),
        (
            "class on label: 3B",
            "class on label: 3b",
            "3b}",
            "'3b' is not among the choices",
            "1, 1C, 1M, 2, 2M, 3R, 3B, 4, I, II, IIa, IIIa and 2 more",
            "3B",
        ),
        (", class on label: 3B", "", "D-118", "the key 'class on label' of 'D-118' is missing", "", ""),
        (
            "{diode tec: keep regulating}",
            "{diode tek: keep regulating}",
            "diode tek",
            "the rig fills no role 'diode tek'",
            "a role of this rig",
            "diode tec",
        ),
        (
            "{diode tec: keep regulating}",
            "{diode: keep regulating}",
            "diode",
            "the role 'diode' is filled by a current source",
            "a temperature controller: the others are always switched off",
            "",
        ),
        (
            "{diode tec: keep regulating}",
            "{diode tec: keep on}",
            "keep on",
            "'keep on' is not among the choices",
            "keep regulating or switch off",
            "",
        ),
        (
            "rig: bench 2\n",
            "rig: bench 2\nroom: {humidity: 145 %, temperature: 21 degC}\n",
            "145 %",
            "a ratio of 145 % is not between 0 and 1",
            "a ratio such as 1000:1",
            "",
        ),
        (
            "rig: bench 2\n",
            "rig: bench 2\nroom: {humidity: 45 %}\n",
            "room",
            "the key 'temperature' of 'room' is missing",
            "",
            "",
        ),
        (
            "channel: 1}",
            "channel: 1, limits: {power: 5 mW}}",
            "power: 5 mW",
            "a current source has no limit of power",
            "'current' or 'compliance'",
            "",
        ),
        (
            "channel: 1}",
            "channel: 1, limits: {}}",
            "{}",
            "no limit stands here",
            "'current' or 'compliance'",
            "",
        ),
        (
            "limits: {power: 5 mW}",
            "limits: {powr: 5 mW}",
            "powr",
            "unknown key 'powr'",
            "",
            "power",
        ),
        (
            "channel: 3",
            "channel: 3, limits: {power: 5 mW}",
            "limits",
            "a shutter has no limits here",
            "limits at a power meter, current source or temperature controller",
            "",
        ),
        (
            "channel: A",
            "backlash: -0.1 deg",
            "-0.1 deg",
            "'-0.1 deg' is negative",
            "an angle such as 22.5 deg",
            "",
        ),
        (
            "channel: A",
            "resolution: 0 deg",
            "0 deg",
            "'0 deg' is not above zero",
            "an angle such as 22.5 deg",
            "",
        ),
        (
            "channel: 1}",
            "channel: 0}",
            "0}",
            "'0' is not above zero",
            "a number such as 1",
            "",
        ),
    ],
)
def test_a_mistake_in_a_full_rig_file_is_told_at_its_place(
    old: str, new: str, at: str, what: str, expected: str, nearest: str
) -> None:
    text, *rest = mistake({old: new})

    assert text.startswith(at)
    assert rest == [what, expected, nearest]


def test_the_same_channel_twice_is_refused() -> None:
    twice = f"{SOURCE}\n  source 2{SOURCE.removeprefix('source 1')}"

    assert mistake({SOURCE: twice})[1] == "'source 2' is the same as 'source 1'"


def test_a_diode_without_any_source_is_told_so() -> None:
    lines = told(lambda: bench({SOURCE: "source 1: {driver: scpi-relay, at: tcp://10.0.0.8:5025, channel: 1}"}))

    assert any(line.endswith("'source 1' is a relay; expected a current source") for line in lines)


def test_all_mistakes_of_a_full_rig_are_told_at_once() -> None:
    changes = {
        "channel: A": "chanel: A",
        "power: 5 mW": "power: 5",
        "on: source 1": "on: source 2",
        "3B": "3X",
        "keep regulating": "keep",
    }

    assert len(told(lambda: bench(changes))) == len(changes)
