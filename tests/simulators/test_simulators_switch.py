"""The simulated relay card and the shutters behind it."""

import pytest
from twin_wire import Wire, torn, whole

from rigctl_sim.scpi.twin import ScpiTwin
from rigctl_sim.switch import Mover, SimulatedSwitch
from rigctl_sim.trajectory import Trajectory

MOVES_IN_S = 0.02


def make_shutter(*, opens_at_rest: bool = False) -> Mover:
    return Mover(Trajectory(float(opens_at_rest)), opens_at_rest, MOVES_IN_S)


def make_twin(shutters: dict[int, Mover] | None = None) -> ScpiTwin:
    return ScpiTwin(SimulatedSwitch(8, shutters or {}), identity="polrig,simulated switch,switch 1,0")


@pytest.fixture
def shutter() -> Mover:
    return make_shutter()


@pytest.fixture
def wire(shutter: Mover) -> Wire:
    return Wire(make_twin({3: shutter}))


def test_all_relays_are_open_after_power_on(wire: Wire) -> None:
    assert wire.ask(b"ROUTE:CLOSE? (@1:8)") == "0,0,0,0,0,0,0,0"
    assert wire.ask(b"ROUTE:CLOSE:STATE?") == "(@)"


def test_a_relay_is_closed_and_opened(wire: Wire) -> None:
    assert wire.ask(b"ROUTE:CLOSE (@3);:ROUTE:CLOSE? (@3);:SYSTEM:ERROR:NEXT?") == '1;0,"No error"'
    assert wire.ask(b"ROUTE:OPEN (@3);:ROUTE:CLOSE? (@3);:SYSTEM:ERROR:NEXT?") == '0;0,"No error"'


def test_both_questions_tell_the_same_state(wire: Wire) -> None:
    assert wire.ask(b"CLOS (@3);:CLOS? (@2:4);:OPEN? (@2:4)") == "0,1,0;1,0,1"


def test_several_relays_are_closed_at_once(wire: Wire) -> None:
    assert wire.ask(b"CLOS (@1,5:7);:CLOS:STAT?") == "(@1,5,6,7)"


def test_all_relays_are_opened_at_once(wire: Wire) -> None:
    assert wire.ask(b"CLOS (@1,5);:OPEN:ALL;:CLOS:STAT?") == "(@)"


@pytest.mark.parametrize(
    ("message", "code"),
    [(b"CLOS (@9)", -222), (b"CLOS (@0)", -222), (b"CLOS 3", -104), (b"CLOS", -109), (b"CLOS (@x)", -170)],
)
def test_a_channel_that_is_none_is_refused(wire: Wire, message: bytes, code: int) -> None:
    wire.send(message + b"\n")

    assert wire.ask(b"SYST:ERR?;:CLOS:STAT?").startswith(f"{code},")


def test_the_shutter_opens_within_its_time(wire: Wire, shutter: Mover) -> None:
    wire.send(b"ROUTE:CLOSE (@3)\n", at_s=1.0)

    assert shutter.place(1.0) == 0.0
    assert shutter.place(1.0 + MOVES_IN_S / 2) == pytest.approx(0.5)
    assert shutter.place(1.0 + MOVES_IN_S) == 1.0


def test_another_relay_moves_no_shutter(wire: Wire, shutter: Mover) -> None:
    wire.send(b"ROUTE:CLOSE (@1,2,4)\n", at_s=1.0)

    assert shutter.place(9.0) == 0.0


def test_closing_a_relay_again_does_not_start_the_shutter_again(wire: Wire, shutter: Mover) -> None:
    wire.send(b"ROUTE:CLOSE (@3)\n", at_s=1.0)

    wire.send(b"ROUTE:CLOSE (@3)\n", at_s=1.0 + MOVES_IN_S / 2)

    assert shutter.place.rests_from_s == 1.0 + MOVES_IN_S


def test_a_shutter_may_turn_back_on_its_way(wire: Wire, shutter: Mover) -> None:
    wire.send(b"ROUTE:CLOSE (@3)\n", at_s=1.0)
    wire.send(b"ROUTE:OPEN (@3)\n", at_s=1.0 + MOVES_IN_S / 2)

    assert shutter.place(9.0) == 0.0
    assert shutter.place(1.0 + MOVES_IN_S) == pytest.approx(0.25)


def test_a_shutter_that_is_open_at_rest_closes_with_its_relay() -> None:
    shutter = make_shutter(opens_at_rest=True)
    wire = Wire(make_twin({1: shutter}))

    wire.send(b"ROUTE:CLOSE (@1)\n", at_s=1.0)

    assert (shutter.place(1.0), shutter.place(2.0)) == (1.0, 0.0)


def test_a_reset_brings_every_shutter_to_rest(wire: Wire, shutter: Mover) -> None:
    wire.send(b"ROUTE:CLOSE (@3)\n", at_s=1.0)

    wire.send(b"*RST\n", at_s=2.0)

    assert shutter.place(3.0) == 0.0


def test_two_shutters_on_one_card_are_two() -> None:
    first, second = make_shutter(), make_shutter()
    wire = Wire(make_twin({1: first, 2: second}))

    wire.send(b"ROUTE:CLOSE (@2)\n", at_s=1.0)

    assert (first.place(2.0), second.place(2.0)) == (0.0, 1.0)


@pytest.mark.parametrize(
    "data", [b"CLOS (@3);:CLOS? (@1:4)\nOPEN (@3)\n*IDN?\n", b"CLOS (@3\nSYST:ERR?\nCLOS? (@3)\r\n"]
)
def test_torn_bytes_give_the_same_answers_as_whole_ones(data: bytes) -> None:
    assert whole(make_twin(), data, at_s=1.0) == torn(make_twin(), data, at_s=1.0)
