"""Addresses as people write them."""

import pytest
from hypothesis import given
from hypothesis import strategies as st

from rigctl.errors import PlanError
from rigctl.links.addresses import TcpAddress, parse_address


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
    "text",
    [
        "",
        "10.0.0.7:5025",
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
def test_what_is_no_address_says_how_to_write_one(text: str) -> None:
    with pytest.raises(PlanError, match="is no address") as caught:
        parse_address(text)

    assert "tcp://10.0.0.7:5025" in str(caught.value)


@pytest.mark.parametrize("port", ["0", "65536", "99999"])
def test_a_port_outside_its_range_is_refused(port: str) -> None:
    with pytest.raises(PlanError, match=f"names port {port}") as caught:
        parse_address(f"tcp://10.0.0.7:{port}")

    assert "1 to 65535" in str(caught.value)


@pytest.mark.parametrize(
    ("text", "scheme"),
    [
        ("serial:///dev/ttyUSB0?baud=115200", "serial"),
        ("visa://TCPIP0::10.0.0.9::hislip0::INSTR", "visa"),
        ("http://10.0.0.7:80", "http"),
    ],
)
def test_another_way_to_an_instrument_is_named(text: str, scheme: str) -> None:
    with pytest.raises(PlanError, match=f"no instruments by '{scheme}'"):
        parse_address(text)


@given(
    st.one_of(st.ip_addresses().map(str), st.from_regex(r"[a-z][a-z0-9-]{0,8}(\.[a-z]{1,5})?", fullmatch=True)),
    st.integers(min_value=1, max_value=65535),
)
def test_an_address_written_out_reads_back_the_same(host: str, port: int) -> None:
    address = TcpAddress(host, port)

    assert parse_address(str(address)) == address
