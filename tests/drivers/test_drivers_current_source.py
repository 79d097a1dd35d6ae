"""The current source's bytes on the wire: what is set is read back, and off arrives whatever is wrong."""

import pytest
from scpi_script import NO_ERROR, QUEUE, expect_resync
from scripted_twin import ADDRESS, Bench, with_defaults

from rigctl.errors import (
    DisconnectedError,
    FramingError,
    InstrumentError,
    LinkTimeoutError,
    RefusedError,
    WrongInstrumentError,
)
from rigctl.interfaces import Identity, SourceCapabilities, SourceConditions
from rigctl.links.channel import Channel
from rigctl.links.link import Link
from rigctl_drivers.current_source import DRIVER, ScpiCurrentSource
from rigctl_drivers.scpi_family import SCPI, nonces

END = b";:SYSTEM:ERROR:NEXT?\n"
OK = b';0,"No error"\n'
LEVEL = b"SOURCE1:CURRENT:LEVEL:IMMEDIATE:AMPLITUDE"
LIMIT = b"SOURCE1:CURRENT:LIMIT:AMPLITUDE"
COMPLIANCE = b"SOURCE1:VOLTAGE:PROTECTION:LEVEL"
CONDITIONS = (
    b"MEASURE1:CURRENT?;:MEASURE1:VOLTAGE?;:OUTPUT1:STATE?;:STATUS:QUESTIONABLE:CONDITION?"
    b";:OUTPUT1:PROTECTION:TRIPPED?" + END
)
ON = b"OUTPUT1:STATE ON;:OUTPUT1:STATE?" + END
OFF_AT_ONCE = b"\nOUTPUT1:STATE OFF\n"
OFF = b"OUTPUT1:STATE OFF;:OUTPUT1:STATE?" + END
WELL = b"3.4E-02;1.9E+00;1;0;0" + OK


def make_source(bench: Bench, **options: object) -> ScpiCurrentSource:
    return ScpiCurrentSource(bench.link, with_defaults(dict(DRIVER.options), **options))


def set_to(header: bytes, value: bytes) -> bytes:
    return header + b" " + value + b";:" + header + b"?" + END


def test_identify_asks_for_a_limit_that_only_a_source_has(scpi: Bench) -> None:
    scpi.twin.expect(b"*CLS;*IDN?\n", b"polrig,simulated current source,source 1,1.0\n")
    scpi.twin.expect(LIMIT + b"?" + END, b"4.5E-02" + OK)

    assert make_source(scpi).identify() == Identity("polrig", "simulated current source", "source 1", "1.0")


@pytest.mark.parametrize("code", [b"-113", b"-114"])
def test_another_instrument_or_a_channel_that_is_no_source_is_the_wrong_one(scpi: Bench, code: bytes) -> None:
    scpi.twin.expect(b"*CLS;*IDN?\n", b"polrig,simulated rack,rack 1,1.0\n")
    scpi.twin.expect(b"SOURCE2:CURRENT:LIMIT:AMPLITUDE?" + END, code + b',"Header suffix out of range"\n')
    scpi.twin.expect(QUEUE, NO_ERROR)

    with pytest.raises(WrongInstrumentError, match="'simulated rack', which is no current source") as caught:
        make_source(scpi, channel=2).identify()

    assert caught.value.where == ADDRESS


def test_the_current_is_set_and_read_back_in_one_exchange(scpi: Bench) -> None:
    scpi.twin.expect(set_to(LEVEL, b"0.034"), b"3.400E-02" + OK)

    assert make_source(scpi).set_current(0.034) == 0.034


def test_the_limit_and_the_compliance_are_set_and_read_back(scpi: Bench) -> None:
    scpi.twin.expect(set_to(LIMIT, b"0.045"), b"4.5E-02" + OK)
    scpi.twin.expect(set_to(COMPLIANCE, b"2.5"), b"2.5E+00" + OK)
    source = make_source(scpi)

    assert source.set_limit(0.045) == 0.045
    assert source.set_compliance(2.5) == 2.5


@pytest.mark.parametrize(
    ("asked_a", "sent", "answer"),
    [
        (0.0, b"0", b"0.0E+00"),
        (0.0, b"0", b"4.0E-06"),  # less than half a step
        (0.0001234, b"0.0001234", b"1.2E-04"),
        (0.0347123, b"0.0347123", b"3.471E-02"),
        (0.034715, b"0.034715", b"3.472E-02"),
    ],
)
def test_a_current_read_back_may_be_rounded_to_the_step_of_the_source(
    scpi: Bench, asked_a: float, sent: bytes, answer: bytes
) -> None:
    scpi.twin.expect(set_to(LEVEL, sent), answer + OK)

    assert make_source(scpi).set_current(asked_a) == float(answer)


@pytest.mark.parametrize("answer", [b"3.402E-02", b"3.4E-03", b"0", b"4.5E-02"])
def test_another_current_read_back_is_refused_with_both_values(scpi: Bench, answer: bytes) -> None:
    scpi.twin.expect(set_to(LEVEL, b"0.034"), answer + OK)

    with pytest.raises(RefusedError, match=rf"AMPLITUDE was set to 0\.034 but reads back {answer.decode()}"):
        make_source(scpi).set_current(0.034)


def test_a_coarser_step_that_the_rig_file_gives_is_allowed_for(scpi: Bench) -> None:
    scpi.twin.expect(set_to(LEVEL, b"0.0347"), b"3.5E-02" + OK)

    assert make_source(scpi, resolution=1e-3).set_current(0.0347) == 0.035


def test_a_current_beyond_the_instrument_s_own_limit_is_refused_with_its_words(scpi: Bench) -> None:
    scpi.twin.expect(set_to(LEVEL, b"0.05"), b'3.4E-02;-222,"Data out of range"\n')
    scpi.twin.expect(QUEUE, NO_ERROR)

    with pytest.raises(RefusedError) as caught:
        make_source(scpi).set_current(0.05)

    assert (caught.value.code, caught.value.text) == (-222, "Data out of range")


def test_every_command_goes_to_the_channel_of_the_rig_file(scpi: Bench) -> None:
    source = make_source(scpi, channel=3)
    scpi.twin.expect(set_to(LEVEL.replace(b"1", b"3"), b"0.01"), b"1E-02" + OK)
    scpi.twin.expect(ON.replace(b"1", b"3"), b"1" + OK)
    scpi.twin.expect(CONDITIONS.replace(b"1", b"3"), WELL)
    scpi.twin.expect(OFF_AT_ONCE.replace(b"1", b"3"))
    scpi.twin.expect(OFF.replace(b"1", b"3"), b"0" + OK)

    source.set_current(0.01)
    source.set_output(True)
    source.conditions()
    source.set_output(False)


def test_the_output_goes_on_and_reads_back(scpi: Bench) -> None:
    scpi.twin.expect(ON, b"1" + OK)

    assert make_source(scpi).set_output(True) is True


@pytest.mark.parametrize("refusal", [b"0" + OK, b'0;-221,"Settings conflict"\n'])
@pytest.mark.parametrize(
    ("conditions", "words", "remedy"),
    [
        (b"0;0;0;512;0", "the interlock is open", "close it"),
        (b"0;0;0;513;1", "the interlock is open", "close it"),
        (b"0;0;0;1;1", "a protection has tripped", "clear the trip at the instrument"),
    ],
)
def test_an_output_that_stays_off_is_told_in_words_with_what_to_do(
    scpi: Bench, refusal: bytes, conditions: bytes, words: str, remedy: str
) -> None:
    scpi.twin.expect(ON, refusal)
    if b"-221" in refusal:
        scpi.twin.expect(QUEUE, NO_ERROR)
    scpi.twin.expect(CONDITIONS, conditions + OK)

    with pytest.raises(InstrumentError, match=words) as caught:
        make_source(scpi).set_output(True)

    assert caught.value.where == f"{ADDRESS}, channel 1"
    assert remedy in caught.value.do


def test_an_output_that_stays_off_without_a_reason_is_told_so(scpi: Bench) -> None:
    scpi.twin.expect(ON, b"0" + OK)
    scpi.twin.expect(CONDITIONS, b"0;0;0;0;0" + OK)

    with pytest.raises(InstrumentError, match="does not go on") as caught:
        make_source(scpi).set_output(True)

    assert "key" in caught.value.do


def test_a_refusal_that_the_conditions_do_not_explain_stays_the_instrument_s_own(scpi: Bench) -> None:
    scpi.twin.expect(ON, b'0;-203,"Command protected"\n')
    scpi.twin.expect(QUEUE, NO_ERROR)
    scpi.twin.expect(CONDITIONS, b"0;0;0;0;0" + OK)

    with pytest.raises(RefusedError, match="Command protected"):
        make_source(scpi).set_output(True)


def test_off_is_sent_ahead_of_everything_and_then_again_with_its_read_back(scpi: Bench) -> None:
    scpi.twin.expect(OFF_AT_ONCE)
    scpi.twin.expect(OFF, b"0" + OK)

    assert make_source(scpi).set_output(False) is False


@pytest.mark.parametrize(
    "complaint", [b'-240,"Hardware error;over-current"', b'-102,"Syntax error"', b'515,"Interlock ""A"";open"']
)
def test_off_is_confirmed_whatever_else_a_tripped_source_complains_of(scpi: Bench, complaint: bytes) -> None:
    scpi.twin.expect(OFF_AT_ONCE)
    scpi.twin.expect(OFF, b"0;" + complaint + b"\n")
    scpi.twin.expect(QUEUE, b'-350,"Queue overflow"\n')
    scpi.twin.expect(QUEUE, NO_ERROR)

    assert make_source(scpi).set_output(False) is False
    assert scpi.link.is_in_step


def test_a_source_that_reads_back_on_after_off_raises(scpi: Bench) -> None:
    scpi.twin.expect(OFF_AT_ONCE)
    scpi.twin.expect(OFF, b"1" + OK)

    with pytest.raises(InstrumentError, match="reads back on") as caught:
        make_source(scpi).set_output(False)

    assert "by hand now" in caught.value.do


@pytest.mark.parametrize("answer", [b"OFF" + OK, b"0;0" + OK, b"\n", b"0\n", b"2" + OK])
def test_a_source_whose_output_reads_back_as_nothing_raises(scpi: Bench, answer: bytes) -> None:
    scpi.twin.expect(OFF_AT_ONCE)
    scpi.twin.expect(OFF, answer)

    with pytest.raises(FramingError):
        make_source(scpi).set_output(False)


def test_a_source_that_refuses_to_tell_its_state_raises(scpi: Bench) -> None:
    scpi.twin.expect(OFF_AT_ONCE)
    scpi.twin.expect(OFF, b'-113,"Undefined header"\n')
    scpi.twin.expect(QUEUE, NO_ERROR)

    with pytest.raises(RefusedError, match="-113"):
        make_source(scpi).set_output(False)


def test_off_is_sent_before_the_resync_of_a_link_that_lost_its_step(scpi: Bench) -> None:
    source = make_source(scpi)
    scpi.link.mark_out_of_step()
    scpi.twin.expect(OFF_AT_ONCE)
    expect_resync(scpi, before=b"3.4E-02;1.9\n")
    scpi.twin.expect(QUEUE, NO_ERROR)
    scpi.twin.expect(OFF, b"0" + OK)

    assert source.set_output(False) is False
    assert scpi.twin.heard[0] == OFF_AT_ONCE


def test_off_is_sent_even_where_nothing_answers_any_more(scpi: Bench) -> None:
    source = make_source(scpi)
    scpi.link.mark_out_of_step()
    first, _ = nonces(SCPI.longest_s)
    scpi.twin.expect(OFF_AT_ONCE)
    scpi.twin.expect(f"\n*ESE {first};*ESE?\n".encode())

    with pytest.raises(LinkTimeoutError):
        source.set_output(False)

    assert scpi.twin.heard[0] == OFF_AT_ONCE


def test_off_where_nobody_is_there_raises(scpi: Bench) -> None:
    def refuse() -> Channel:
        raise DisconnectedError("nobody listens", address=ADDRESS)

    link = Link(ADDRESS, refuse, SCPI, scpi.timeline)
    with pytest.raises(DisconnectedError):
        ScpiCurrentSource(link, with_defaults(dict(DRIVER.options))).set_output(False)


def test_conditions_come_in_one_exchange(scpi: Bench) -> None:
    scpi.twin.expect(CONDITIONS, WELL)

    assert make_source(scpi).conditions() == SourceConditions(
        current_a=0.034,
        voltage_v=1.9,
        is_on=True,
        is_interlock_open=False,
        is_at_compliance=False,
        is_tripped=False,
    )


@pytest.mark.parametrize(
    ("answer", "name"),
    [
        (b"0;0;0;512;0", "is_interlock_open"),
        (b"3E-02;2.5;1;1;0", "is_at_compliance"),
        (b"0;0;0;0;1", "is_tripped"),
    ],
)
def test_what_is_wrong_with_the_diode_is_told_by_its_own_name(scpi: Bench, answer: bytes, name: str) -> None:
    scpi.twin.expect(CONDITIONS, answer + OK)

    seen = make_source(scpi).conditions()

    wrong = [flag for flag in ("is_interlock_open", "is_at_compliance", "is_tripped") if getattr(seen, flag)]
    assert wrong == [name]


@pytest.mark.parametrize("status", [b"16", b"8", b"32767"])
def test_bits_of_other_channels_and_meanings_are_not_taken_for_the_source_s(scpi: Bench, status: bytes) -> None:
    scpi.twin.expect(CONDITIONS, b"3E-02;2;1;" + status + b";0" + OK)

    seen = make_source(scpi).conditions()

    assert seen.is_interlock_open == seen.is_at_compliance == (status == b"32767")


@pytest.mark.parametrize("answer", [b"0;0;0;1;1", b"0;0;0;512;0"])
def test_a_trip_is_seen_although_the_instrument_complains_of_it(scpi: Bench, answer: bytes) -> None:
    scpi.twin.expect(CONDITIONS, answer + b';-240,"Hardware error"\n')
    scpi.twin.expect(QUEUE, NO_ERROR)

    seen = make_source(scpi).conditions()

    assert seen.is_tripped or seen.is_interlock_open
    assert not seen.is_on


def test_a_complaint_that_the_conditions_do_not_explain_is_raised(scpi: Bench) -> None:
    scpi.twin.expect(CONDITIONS, b'3E-02;2;1;0;0;-310,"System error"\n')
    scpi.twin.expect(QUEUE, NO_ERROR)

    with pytest.raises(RefusedError, match="System error"):
        make_source(scpi).conditions()


@pytest.mark.parametrize("values", [b"9.9E37;2", b"3E-02;9.9E37", b"9.91E37;2", b"-9.9E37;2"])
def test_an_output_that_is_on_and_cannot_be_measured_raises(scpi: Bench, values: bytes) -> None:
    scpi.twin.expect(CONDITIONS, values + b";1;0;0" + OK)

    with pytest.raises(InstrumentError, match="cannot measure it") as caught:
        make_source(scpi).conditions()

    assert "leads" in caught.value.do


def test_a_source_that_is_off_need_not_measure_anything(scpi: Bench) -> None:
    scpi.twin.expect(CONDITIONS, b"9.91E37;9.91E37;0;0;0" + OK)

    assert not make_source(scpi).conditions().is_on


@pytest.mark.parametrize(
    "answer",
    [
        b"3E-02;2;1;0" + OK,
        b"3E-02;2;1;0;0;0" + OK,
        b"x;2;1;0;0" + OK,
        b"3E-02;2;ON;0;0" + OK,
        b"3E-02;2;1;-1;0" + OK,
        b"3E-02;2;1;0.5;0" + OK,
        b"3E-02;2;1;32768;0" + OK,
        b"3E-02;2;1;0;-0" + OK,
    ],
)
def test_conditions_that_are_none_are_refused(scpi: Bench, answer: bytes) -> None:
    scpi.twin.expect(CONDITIONS, answer)

    with pytest.raises(FramingError):
        make_source(scpi).conditions()

    assert not scpi.link.is_in_step


def test_conditions_that_are_cut_are_never_taken_for_whole_ones(scpi: Bench) -> None:
    source = make_source(scpi)
    for end in range(len(WELL)):
        scpi.twin.expect(CONDITIONS, WELL[:end])
        expect_resync(scpi, before=b"\n", now_s=scpi.timeline.now() + SCPI.reply_timeout_s)
        scpi.twin.expect(QUEUE, NO_ERROR)
        with pytest.raises(LinkTimeoutError) as caught:
            source.conditions()
        assert caught.value.partial == WELL[:end]


@pytest.mark.parametrize(("state", "word"), [(b"1", "on"), (b"0", "off")])
def test_settings_are_read_back_in_one_exchange_and_in_base_units(scpi: Bench, state: bytes, word: str) -> None:
    scpi.twin.expect(
        LEVEL + b"?;:" + LIMIT + b"?;:" + COMPLIANCE + b"?;:OUTPUT1:STATE?" + END,
        b"3.4E-02;4.5E-02;2.5;" + state + OK,
    )

    assert make_source(scpi).settings() == {
        "setpoint_a": 0.034,
        "limit_a": 0.045,
        "compliance_v": 2.5,
        "output": word,
    }


def test_capabilities_follow_the_rig_file() -> None:
    options = with_defaults(dict(DRIVER.options), largest_current=0.5, largest_compliance=6.0, resolution=1e-6)

    assert DRIVER.capabilities(options) == SourceCapabilities(current_a=0.5, compliance_v=6.0, resolution_a=1e-6)
