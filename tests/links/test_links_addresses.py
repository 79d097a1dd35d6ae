"""Addresses as people write them."""

import pytest
from hypothesis import given
from hypothesis import strategies as st

from rigctl.errors import PlanError, QuantityError
from rigctl.links.addresses import (
    Address,
    HislipAddress,
    SerialAddress,
    TcpAddress,
    VisaAddress,
    parse_address,
)


@pytest.mark.parametrize(
    ("text", "address"),
    [
        ("tcp://10.0.0.7:5025", TcpAddress("10.0.0.7", 5025)),
        ("tcp://meter-7.lab.example:1", TcpAddress("meter-7.lab.example", 1)),
        ("tcp://localhost:65535", TcpAddress("localhost", 65535)),
        ("tcp://[::1]:5025", TcpAddress("::1", 5025)),
        ("TCP://Meter.Example:05025", TcpAddress("meter.example", 5025)),
    ],
)
def test_a_tcp_address_is_host_and_port(text: str, address: TcpAddress) -> None:
    assert parse_address(text) == address


@pytest.mark.parametrize(
    ("text", "address"),
    [
        ("serial:///dev/ttyUSB0?baud=115200", SerialAddress("/dev/ttyUSB0", 115200)),
        ("serial:///dev/ttyS0?format=7E1&baud=9600", SerialAddress("/dev/ttyS0", 9600, "7E1")),
        ("Serial:////dev//ttyS0?BAUD=09600&Format=8n1", SerialAddress("/dev/ttyS0", 9600)),
        (
            "serial:///dev/serial/by-id/usb-Maker_Mount:7-if00?baud=9600",
            SerialAddress("/dev/serial/by-id/usb-Maker_Mount:7-if00", 9600),
        ),
    ],
)
def test_a_serial_address_is_a_path_a_speed_and_a_format(text: str, address: SerialAddress) -> None:
    assert parse_address(text) == address


@pytest.mark.parametrize(("format_", "bits"), [("8N1", 10), ("7N1", 9), ("8E1", 11), ("7O2", 11), ("8N2", 11)])
def test_a_byte_takes_its_start_parity_and_stop_bits_too(format_: str, bits: int) -> None:
    assert SerialAddress("/dev/ttyS0", 9600, format_).byte_s == bits / 9600


@pytest.mark.parametrize(
    ("text", "address"),
    [
        ("visa://TCPIP0::10.0.0.9::hislip0::INSTR", HislipAddress("10.0.0.9", "hislip0")),
        ("visa://tcpip::Oven.Example::HiSLIP1,4881", HislipAddress("oven.example", "hislip1", 4881)),
        ("visa://TCPIP0::10.0.0.9::hislip0,4880::instr", HislipAddress("10.0.0.9", "hislip0")),
        ("visa://TCPIP::10.0.0.9::INSTR", VisaAddress("TCPIP0::10.0.0.9::inst0::INSTR")),
        ("visa://TCPIP::10.0.0.9", VisaAddress("TCPIP0::10.0.0.9::inst0::INSTR")),
        ("visa://TCPIP::gateway::gpib0_7::INSTR", VisaAddress("TCPIP0::gateway::gpib0_7::INSTR")),
        ("visa://gpib::07::INSTR", VisaAddress("GPIB0::7::INSTR")),
        ("visa://GPIB1::30::2", VisaAddress("GPIB1::30::2::INSTR")),
        ("visa://USB::0x957::1234::MY-7::INSTR", VisaAddress("USB0::0x0957::0x04D2::MY-7::INSTR")),
        ("visa://USB0::0x0957::0x1a07::My7::1", VisaAddress("USB0::0x0957::0x1A07::My7::1::INSTR")),
    ],
)
def test_a_visa_address_is_an_instruments_resource(text: str, address: Address) -> None:
    assert parse_address(text) == address


@pytest.mark.parametrize("text", ["", "10.0.0.7:5025", "/dev/ttyUSB0", "GPIB0::7::INSTR"])
def test_what_is_no_address_says_how_to_write_one(text: str) -> None:
    with pytest.raises(QuantityError, match="is no address") as caught:
        parse_address(text)

    assert all(f"{scheme}://" in caught.value.expected for scheme in ("tcp", "serial", "visa"))


@pytest.mark.parametrize(
    "text",
    [
        "tcp://10.0.0.7",
        "tcp://:5025",
        "tcp://10.0.0.7:",
        "tcp://10.0.0.7:x",
        "tcp://10.0.0.7:5025/",
        "tcp://10.0.0.7:5025 ",
        "tcp:// 10.0.0.7:5025",
        "tcp://me@10.0.0.7:5025",
        "tcp://::1:5025",
        "tcp://[::1:5025",
        "tcp://10.0.0.7:٥",
        "tcp://10.0.0.7:5025\n",
    ],
)
def test_what_is_no_tcp_address_says_how_to_write_one(text: str) -> None:
    with pytest.raises(PlanError, match="is no address") as caught:
        parse_address(text)

    assert "tcp://host:port" in str(caught.value)


@pytest.mark.parametrize(
    "text",
    [
        "serial://ttyUSB0?baud=9600",
        "serial:///dev/ttyUSB0?baud=9600 ",
        "serial:///dev/ttyUSB0?baud=9600#1",
        "serial:///dev/ttyUSB0?baud=9600&format=9N1",
        "serial:///dev/ttyUSB0?baud=9600&format=8N1.5",
        "serial:///dev/ttyUSB0?baud=9600&speed=1",
        "serial:///dev/ttyUSB0?baud=9600&baud=9600&baud=9600",
        "serial:///dev/ttyUSB0?baud=9600&",
        "serial:///dev/tty USB0?baud=9600",
    ],
)
def test_what_is_no_serial_address_says_how_to_write_one(text: str) -> None:
    with pytest.raises(QuantityError, match="is no address") as caught:
        parse_address(text)

    assert "serial:///path?baud=rate" in caught.value.expected


@pytest.mark.parametrize(
    "query", ["", "?", "?baud=", "?baud=fast", "?baud=49", "?baud=-9600", "?baud=٩٦٠٠", "?format=8N1"]
)
def test_a_serial_port_without_a_speed_is_refused(query: str) -> None:
    with pytest.raises(QuantityError, match="does not say how fast the line is") as caught:
        parse_address(f"serial:///dev/ttyUSB0{query}")

    assert "baud=115200" in caught.value.expected


@pytest.mark.parametrize(
    "resource",
    [
        "",
        "TCPIP0",
        "TCPIP0::::INSTR",
        "TCPIP0::10.0.0.9::inst0,1024::INSTR",
        "TCPIP0::10.0.0.9::hislip0::INSTR::INSTR",
        "TCPIP0::10.0.0.9 ::hislip0",
        "GPIB0::INSTR",
        "GPIB0::31::INSTR",
        "GPIB0::7::99::INSTR",
        "USB0::0x0957::INSTR",
        "USB0::0x0957::0x1A07::INSTR",
        "PXI0::3::INSTR",
        "USB0::0x0957::0x1A07::My7::RAW",
    ],
)
def test_what_is_no_instruments_resource_says_how_to_write_one(resource: str) -> None:
    with pytest.raises(QuantityError, match="is no address") as caught:
        parse_address(f"visa://{resource}")

    assert "visa://TCPIP0::10.0.0.9::hislip0::INSTR" in caught.value.expected


@pytest.mark.parametrize(
    ("resource", "what", "scheme"),
    [
        ("TCPIP0::10.0.0.7::5025::SOCKET", "a plain socket, which needs no VISA", "tcp://host:port"),
        ("tcpip::10.0.0.7::5025::socket", "a plain socket, which needs no VISA", "tcp://host:port"),
        ("ASRL/dev/ttyUSB0::INSTR", "a serial port, which needs no VISA", "serial:///path?baud=rate"),
        ("ASRL3::INSTR", "a serial port, which needs no VISA", "serial:///path?baud=rate"),
    ],
)
def test_what_needs_no_visa_is_sent_to_its_own_scheme(resource: str, what: str, scheme: str) -> None:
    with pytest.raises(QuantityError, match=what) as caught:
        parse_address(f"visa://{resource}")

    assert scheme in caught.value.expected


@pytest.mark.parametrize(
    "text", ["tcp://10.0.0.7:{}", "visa://TCPIP0::10.0.0.7::hislip0,{}::INSTR"], ids=["tcp", "hislip"]
)
@pytest.mark.parametrize("port", ["0", "65536", "99999"])
def test_a_port_outside_its_range_is_refused(text: str, port: str) -> None:
    with pytest.raises(PlanError, match=f"names port {port}") as caught:
        parse_address(text.format(port))

    assert "1 to 65535" in str(caught.value)


def test_another_way_to_an_instrument_is_named() -> None:
    with pytest.raises(PlanError, match="no instruments by 'http'"):
        parse_address("http://10.0.0.7:80")


hosts = st.one_of(st.ip_addresses(v=4).map(str), st.from_regex(r"[a-z][a-z0-9-]{0,8}(\.[a-z]{1,5})?", fullmatch=True))
ports = st.integers(min_value=1, max_value=65535)
addresses: st.SearchStrategy[Address] = st.one_of(
    st.builds(TcpAddress, st.one_of(hosts, st.ip_addresses(v=6).map(str)), ports),
    st.builds(
        SerialAddress,
        st.from_regex(r"(/[A-Za-z0-9_.:-]*[A-Za-z0-9_:-]){1,3}", fullmatch=True),
        st.integers(min_value=50, max_value=4_000_000),
        st.from_regex(r"[78][NEO][12]", fullmatch=True),
    ),
    st.builds(HislipAddress, hosts, st.sampled_from(["hislip0", "hislip12"]), ports),
)


@given(addresses)
def test_an_address_written_out_reads_back_the_same(address: Address) -> None:
    assert parse_address(str(address)) == address


@given(st.text(max_size=40))
def test_whatever_is_written_is_an_address_or_a_mistake_of_the_plan(text: str) -> None:
    for scheme in ("", "tcp://h", "serial:///dev/", "visa://TCPIP0::", "visa://GPIB0::", "visa://USB0::"):
        try:
            address = parse_address(scheme + text)
        except QuantityError:
            continue
        assert parse_address(str(address)) == address
