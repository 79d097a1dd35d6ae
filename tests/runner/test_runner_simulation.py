"""The rig file of a simulated bench: other addresses, and not one other letter."""

from collections.abc import Mapping

import pytest

from rigctl.files import parse_rig
from rigctl.files.rig import Rig
from rigctl.plugins import find_bench_factory, find_drivers
from rigctl.runner.simulation import rig_text_with_addresses

MOUNT, HEAD, LONGER = "tcp://10.0.0.7:50", "tcp://10.0.0.8:5025", "tcp://127.0.0.1:49152"
BLOCK = f"""# tcp://10.0.0.7:50 is on the window side
rig: bench 2   # "quoted" and 'quoted'

instruments:
    mount 1:
        driver: gcode-rotary
        at:   "{MOUNT}"      # {MOUNT}, the left plug
    head 1: {{at: '{HEAD}', driver: scpi-power-meter}}
roles: {{part mount: mount 1, signal: head 1}}
"""
FLOW = (
    f"{{rig: bench, instruments: {{mount 1: {{at: {MOUNT}, driver: gcode-rotary}}, "
    f"head 1: {{driver: scpi-power-meter, at: {HEAD}}}}}, roles: {{part mount: mount 1, signal: head 1}}}}"
)
SHARED = f"""rig: one controller
instruments:
  axis 1: {{driver: gcode-rotary, at: {MOUNT}, channel: A}}
  axis 2: {{driver: gcode-rotary, at: {MOUNT}, channel: B}}
roles: {{analyser: axis 1, part mount: axis 2}}
"""
BELOW = f"""rig: the address below its key
instruments:
  mount 1:
    driver: gcode-rotary
    at:
      {MOUNT}
roles: {{part mount: mount 1}}
"""


def parsed(text: str) -> Rig:
    return parse_rig(text, "rig.yaml", find_drivers(), find_bench_factory())


def written(text: str, addresses: Mapping[str, str]) -> str:
    return rig_text_with_addresses(parsed(text), addresses)


def test_comments_quotes_blanks_and_order_stay_as_they_were() -> None:
    text = written(BLOCK, {MOUNT: "tcp://127.0.0.1:1", HEAD: "tcp://127.0.0.1:2"})

    assert text == BLOCK.replace(f'"{MOUNT}"', '"tcp://127.0.0.1:1"').replace(HEAD, "tcp://127.0.0.1:2")


def test_a_comment_that_mentions_an_address_keeps_it() -> None:
    text = written(BLOCK, {MOUNT: LONGER, HEAD: LONGER})

    assert text.count(MOUNT) == 2
    assert f"# {MOUNT}, the left plug" in text


@pytest.mark.parametrize("first", [LONGER, "tcp://h:1"])
def test_a_rig_on_a_single_line_gets_every_address_in_its_place(first: str) -> None:
    """The first address grows or shrinks, and must not shift where the second is looked for."""
    text = written(FLOW, {MOUNT: first, HEAD: "tcp://127.0.0.1:2"})

    assert text == FLOW.replace(MOUNT, first).replace(HEAD, "tcp://127.0.0.1:2")


def test_instruments_at_one_address_get_one_new_address() -> None:
    assert written(SHARED, {MOUNT: LONGER}) == SHARED.replace(MOUNT, LONGER)


def test_addresses_may_be_exchanged() -> None:
    rig = parsed(written(BLOCK, {MOUNT: HEAD, HEAD: MOUNT}))

    assert {entry.name: entry.at for entry in rig.instruments.values()} == {"mount 1": HEAD, "head 1": MOUNT}


def test_an_address_on_a_line_of_its_own_is_found() -> None:
    assert written(BELOW, {MOUNT: LONGER}) == BELOW.replace(MOUNT, LONGER)


@pytest.mark.parametrize("end", ["\r\n", "\n"])
def test_line_ends_stay_as_they_were(end: str) -> None:
    text = SHARED.replace("\n", end)

    assert written(text, {MOUNT: LONGER}) == text.replace(MOUNT, LONGER)


@pytest.mark.parametrize("text", [BLOCK, FLOW, SHARED, BELOW])
def test_the_new_file_says_the_same_of_every_instrument_but_where_it_is(text: str) -> None:
    old = parsed(text)

    new = parsed(rig_text_with_addresses(old, {MOUNT: LONGER, HEAD: "tcp://127.0.0.1:2"}))

    assert new.roles == old.roles
    for name, entry in old.instruments.items():
        assert new.instruments[name].options == entry.options
        assert new.instruments[name].at == {MOUNT: LONGER, HEAD: "tcp://127.0.0.1:2"}[entry.at]
