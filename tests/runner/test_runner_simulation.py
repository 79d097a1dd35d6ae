"""The rig file of a simulated bench: other addresses, and not one other character."""

import pytest

from rigctl.files import parse_rig
from rigctl.files.rig import Rig
from rigctl.plugins import find_bench_factory, find_drivers
from rigctl.runner.simulation import rig_text_with_addresses

METER, OVEN, LINE = "tcp://10.0.0.7:5025", "visa://TCPIP0::10.0.0.9::hislip0::INSTR", "serial:///dev/ttyUSB0?baud=9600"
SERVED = {
    METER: "tcp://127.0.0.1:40001",
    OVEN: "visa://TCPIP0::127.0.0.1::hislip0,40002::INSTR",
    LINE: "serial:///dev/pts/7?baud=9600",
}


def rig_of(meters: str) -> Rig:
    text = f"rig: bench  # a remark with {METER}\ninstruments:\n{meters}roles: {{}}\n"
    return parse_rig(text, "rig.yaml", find_drivers(), find_bench_factory())


def written(quote: str, address: str, *, is_flow: bool) -> str:
    at = f"{quote}{address}{quote}"
    if is_flow:
        return f"  head 1: {{driver: scpi-power-meter, at: {at}}}  # by the door\n"
    return f"  head 1:\n    driver: scpi-power-meter\n    at: {at}\n"


@pytest.mark.parametrize("is_flow", [True, False], ids=["flow", "block"])
@pytest.mark.parametrize("quote", ["", "'", '"'], ids=["plain", "single", "double"])
@pytest.mark.parametrize("address", SERVED)
def test_only_the_address_changes_and_the_file_still_reads(quote: str, address: str, is_flow: bool) -> None:
    if address == LINE and is_flow and not quote:
        pytest.skip("no value between braces: YAML wants quotes round a question mark there")
    rig = rig_of(written(quote, address, is_flow=is_flow))

    text = rig_text_with_addresses(rig, SERVED)

    again = parse_rig(text, "twins.yaml", find_drivers(), find_bench_factory())
    assert again.instruments["head 1"].at == SERVED[address]
    needed = '"' if address == OVEN and not quote else quote
    assert text == rig_of(written(needed, SERVED[address], is_flow=is_flow)).text


def test_several_addresses_on_one_line_each_get_their_own() -> None:
    rig = rig_of(f"  {{a: {{driver: scpi-power-meter, at: {METER}}}, b: {{driver: scpi-power-meter, at: '{LINE}'}}}}\n")

    text = rig_text_with_addresses(rig, SERVED)

    again = parse_rig(text, "twins.yaml", find_drivers(), find_bench_factory())
    assert [entry.at for entry in again.instruments.values()] == [SERVED[METER], SERVED[LINE]]
