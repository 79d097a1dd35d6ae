"""What a good rig file becomes, and how its mistakes are told."""

import hashlib
from datetime import date
from pathlib import Path

import pytest
from files_cases import DRIVERS, RIG, Changes, StubBench, replaced, rig, told

from rigctl.errors import FileError
from rigctl.files import load_rig, parse_rig
from rigctl.files.rig import Calibration, InstrumentEntry, SimulatedSection


def test_an_instrument_s_keys_are_read_by_its_driver_s_table() -> None:
    assert rig().instruments["mount 1"] == InstrumentEntry(
        "mount 1",
        "turner",
        "tcp://10.0.0.5:23",
        {"channel": "B", "positive": "clockwise", "travel": (-10.0, 400.0), "backlash": 0.1},
        {},
    )


def test_an_instrument_may_have_limits_and_a_calibration() -> None:
    entry = rig().instruments["head 7"]

    assert (entry.options, entry.limits) == ({"ranges": (20e-6, 2e-3)}, {"power": 5e-3})
    assert entry.calibration == Calibration("K-2291", date(2027, 3, 1), 0.03, 2.0)


def test_one_entry_of_a_list_may_stand_without_it() -> None:
    assert rig({"[20 uW, 2 mW]": "2 mW"}).instruments["head 7"].options == {"ranges": (2e-3,)}


def test_keys_that_are_left_out_have_their_defaults() -> None:
    options = rig({"channel: B, positive: clockwise, travel: -10 to 400 deg": "backlash: 0.5 deg"}).instruments

    assert options["mount 1"].options == {
        "channel": "A",
        "positive": "counter-clockwise",
        "travel": (-3600.0, 3600.0),
        "backlash": 0.5,
    }


def test_a_role_leads_to_the_instrument_that_fills_it() -> None:
    entry = rig().entry("signal")

    assert entry is not None
    assert entry.name == "head 7"


def test_a_role_that_nothing_fills_leads_nowhere() -> None:
    assert rig().entry("monitor") is None


def test_the_simulated_section_is_read_by_the_bench_s_tables() -> None:
    assert rig().simulated == SimulatedSection(
        7, {"room light": 2e-6, "drift": None}, {"mount 1": {}, "head 7": {"offset": 30e-9}, "shutter 1": {}}
    )


def test_without_a_simulated_section_the_bench_is_a_good_one() -> None:
    section = rig({"simulated: {seed: 7, room light: 2 uW, head 7: {offset: 30 nW}}\n": ""}).simulated

    assert (section.seed, section.bench["room light"], section.instruments["head 7"]) == (
        None,
        0.0,
        {"offset": 0.0},
    )


def test_without_a_simulator_only_the_seed_is_looked_at() -> None:
    text = replaced(RIG, {"room light": "no such key"})

    assert parse_rig(text, "b.yaml", DRIVERS, None).simulated == SimulatedSection(7, {}, {})


def test_two_channels_of_one_instrument_may_share_its_address() -> None:
    second = "\n  mount 2: {driver: turner, at: 'tcp://10.0.0.5:23', channel: C}\n  head 7"

    assert rig({"\n  head 7": second}).instruments["mount 2"].at == rig().instruments["mount 1"].at


def test_a_rig_keeps_its_text_and_where_it_came_from(tmp_path: Path) -> None:
    path = tmp_path / "b.yaml"
    path.write_text(RIG)

    read = load_rig(path, DRIVERS, StubBench())

    assert (read.title, read.text, read.path) == ("bench 2", RIG, str(path))
    assert read.sha256 == hashlib.sha256(RIG.encode()).hexdigest()


def test_a_rig_knows_where_its_addresses_stand() -> None:
    line, column = rig().place("instruments", "head 7", "at")

    assert RIG.splitlines()[line - 1][column - 1 :].startswith("tcp://10.0.0.7:5025")


def mistake(changes: Changes) -> tuple[str, str, str, str]:
    """Return place, what, expected and nearest of the only mistake."""
    with pytest.raises(FileError) as caught:
        rig(changes)
    (only,) = caught.value.mistakes
    return f"{only.line}:{only.column}", only.what, only.expected, only.nearest


@pytest.mark.parametrize(
    ("old", "new", "place", "what", "expected", "nearest"),
    [
        (
            "driver: turner",
            "driver: tuner",
            "3:21",
            "no driver is called 'tuner'",
            "one that is installed: flap, meter or turner",
            "turner",
        ),
        ("channel: B", "chanel: B", "3:54", "unknown key 'chanel' of the driver turner", "", "channel"),
        (
            "channel: B",
            "foo: B",
            "3:54",
            "unknown key 'foo' of the driver turner",
            "'channel', 'positive', 'travel', 'backlash', 'driver', 'at', 'limits' or 'calibration'",
            "",
        ),
        (
            "positive: clockwise",
            "positive: clockwize",
            "3:76",
            "'clockwize' is not among the choices",
            "clockwise or counter-clockwise",
            "clockwise",
        ),
        (
            "-10 to 400 deg",
            "400 deg",
            "3:95",
            "'400 deg' is not a span",
            "two ends, for example 0 to 22.5 deg",
            "",
        ),
        (
            "-10 to 400 deg",
            "-10 to 400",
            "3:95",
            "'400' has no unit",
            "one of the units deg, rad, mrad, arcmin, arcsec",
            "400 deg",
        ),
        (
            "[20 uW, 2 mW]",
            "[20 uW, 2 mA]",
            "4:68",
            "'mA' is not a unit of a power",
            "one of the units W, mW, uW, nW, pW",
            "",
        ),
        ("[20 uW, 2 mW]", "[]", "4:60", "an empty list stands here", "a list with at least one entry", ""),
        ("[20 uW, 2 mW]", "{a: b}", "4:60", "a mapping stands here", "a list with at least one entry", ""),
        ("[20 uW, 2 mW]", "[[1 W]]", "4:61", "a list stands here", "a single value", ""),
        ("channel: 3", "channel: 3.5", "6:63", "'3.5' is no whole number", "a number such as 7", ""),
        ("channel: B", "channel: [B]", "3:63", "a list stands here", "a single value", ""),
        ("channel: B", "channel:", "3:62", "nothing is written here", "a word", ""),
        (
            "tcp://10.0.0.7:5025",
            "10.0.0.7",
            "4:31",
            "'10.0.0.7' is no address",
            "tcp://host:port, serial:///path?baud=rate or visa://resource",
            "",
        ),
        (
            "tcp://10.0.0.7:5025",
            "tcp://10.0.0.7:99999",
            "4:31",
            "'tcp://10.0.0.7:99999' names port 99999",
            "tcp://host:port, the port from 1 to 65535",
            "",
        ),
        (
            "tcp://10.0.0.7:5025",
            "usb:///dev/ttyUSB0",
            "4:31",
            "'usb:///dev/ttyUSB0': this version reaches no instruments by 'usb'",
            "tcp://host:port, serial:///path?baud=rate or visa://resource",
            "",
        ),
        (
            "tcp://10.0.0.7:5025",
            "tcp://HEAD-7:05025",
            "4:31",
            "'tcp://HEAD-7:05025' is an unusual spelling",
            "small letters and no leading zeros",
            "tcp://head-7:5025",
        ),
        (
            "limits: {power: 5 mW}",
            "limits: {power: -5 mW}",
            "4:91",
            "'-5 mW' is not above zero",
            "a power such as 2 mW",
            "",
        ),
        (
            "limits: {power: 5 mW}",
            "limits: 5 mW",
            "4:83",
            "'5 mW' stands here",
            "a mapping with keys such as 'power', 'current', 'compliance' or 'temperature'",
            "",
        ),
        (
            "channel: B",
            "limits: {power: 5 mW}",
            "3:54",
            "a rotation stage has no limits here",
            "limits at a power meter, current source or temperature controller",
            "",
        ),
        (
            "due: 2027-03-01",
            "due: 1.3.2027",
            "5:52",
            "'1.3.2027' is no date",
            "year, month and day such as 2027-03-01",
            "",
        ),
        (
            "coverage factor: 2",
            "coverage factor: 0",
            "5:108",
            "'0' is not above zero",
            "a number such as 2",
            "",
        ),
        (
            "expanded uncertainty: 3 %",
            "expanded uncertainty: 300 %",
            "5:86",
            "a ratio of 300 % is not between 0 and 1",
            "a ratio such as 1000:1",
            "",
        ),
        ("certificate: K-2291, ", "", "5:12", "the key 'certificate' of 'calibration' is missing", "", ""),
        ("certificate: K-2291", "certificate:", "5:38", "nothing is written here", "a word", ""),
        (
            "signal: head 7,",
            "signal: head 8,",
            "7:38",
            "no instrument is called 'head 8'",
            "one of 'mount 1', 'head 7' or 'shutter 1'",
            "head 7",
        ),
        ("seed: 7", "seed: x", "8:19", "'x' is no whole number", "a number such as 7", ""),
        (
            "room light: 2 uW",
            "room ligt: 2 uW",
            "8:22",
            "unknown key 'room ligt' of the simulated bench",
            "",
            "room light",
        ),
        ("offset: 30 nW", "ofset: 30 nW", "8:49", "unknown key 'ofset' of a simulated meter", "", "offset"),
        (
            "head 7: {offset: 30 nW}",
            "head 8: {offset: 30 nW}",
            "8:40",
            "unknown key 'head 8' of the simulated bench",
            "",
            "head 7",
        ),
        ("head 7: {offset: 30 nW}", "head 7: 30 nW", "8:48", "no keys stand here", "a mapping", ""),
        (
            "head 7: {offset: 30 nW}",
            "mount 1: {offset: 30 nW}",
            "8:50",
            "unknown key 'offset' of a simulated turner",
            "none: a simulated turner has no keys",
            "",
        ),
        ('at: "tcp://10.0.0.5:23", ', "", "3:3", "the key 'at' of 'mount 1' is missing", "", ""),
        ("driver: turner, ", "", "3:3", "the key 'driver' of 'mount 1' is missing", "", ""),
        ("rig: bench 2", "rig:", "1:5", "the title is empty or too long", "1 to 200 characters", ""),
        (
            "roles: {part mount: mount 1, signal: head 7, shutter: shutter 1}\n",
            "",
            "1:1",
            "the key 'roles' is missing",
            "",
            "",
        ),
    ],
)
def test_a_mistake_in_a_rig_file_is_told(
    old: str, new: str, place: str, what: str, expected: str, nearest: str
) -> None:
    assert mistake({old: new}) == (place, what, expected, nearest)


def test_all_mistakes_of_a_rig_file_are_told_at_once() -> None:
    changes = {
        "channel: B": "chanel: B",
        "due: 2027-03-01": "due: soon",
        "seed: 7": "seed: x",
        "{offset": "{ofset",
    }

    lines = told(lambda: rig(changes))

    assert [line.split(": ")[0] for line in lines] == [
        "b.yaml:3:54",
        "b.yaml:5:52",
        "b.yaml:8:19",
        "b.yaml:8:49",
    ]


def test_two_languages_at_one_address_are_refused() -> None:
    assert mistake({"tcp://10.0.0.8:5025": "tcp://10.0.0.7:5025"})[1] == (
        "'shutter 1' and 'head 7' share an address but not a language"
    )


def test_the_same_instrument_twice_is_refused() -> None:
    twice = "channel: 3}\n  shutter 2: {driver: flap, at: tcp://10.0.0.8:5025, channel: 3}"

    assert mistake({"channel: 3}": twice})[1] == "'shutter 2' is the same as 'shutter 1'"


def test_without_any_driver_none_can_be_named() -> None:
    lines = told(lambda: parse_rig(RIG, "b.yaml", {}, None))

    assert lines[0] == "b.yaml:3:21: no driver is called 'turner'; expected an installed driver; there is none"


def test_a_message_offers_a_few_words_of_many() -> None:
    spare = "".join(f"  spare {i}: {{driver: turner, at: 'tcp://h{i}:1'}}\n" for i in range(100))

    _, _, expected, _ = mistake({"instruments:\n": f"instruments:\n{spare}", "signal: head 7": "signal: lamp"})

    assert expected.startswith("one of 'spare 0', 'spare 1', ")
    assert expected.endswith("'spare 11' and 91 more")


def test_a_role_that_no_recipe_can_have_is_told() -> None:
    text = "rig: r\ninstruments:\n  m: {driver: turner, at: tcp://127.0.0.1:1}\nroles: {p&a mount: m}\n"

    with pytest.raises(FileError, match=r"r\.yaml:4:9: 'p&a mount' is no name of a role"):
        parse_rig(text, "r.yaml", DRIVERS, None)
