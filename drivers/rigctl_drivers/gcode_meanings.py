"""What the numbers of G-code motion firmware mean, and what to do about them.

It owns the tables and nothing else. `error:n` refuses one line; `ALARM:n` stops the machine until it is
cleared.

Source: the open documentation of the firmware convention with one-line status reports, from memory.
"""

from collections.abc import Mapping
from dataclasses import dataclass

ERRORS: Mapping[int, str] = {
    1: "a word without its letter",
    2: "a bad number",
    3: "an invalid $ statement",
    4: "a negative value where none may be",
    5: "homing is not enabled",
    6: "the step pulse is too short",
    7: "the settings store was lost, defaults are in use",
    8: "not idle",
    9: "locked by an alarm or a jog",
    10: "soft limits need homing",
    11: "the line is too long",
    12: "the step rate is too high",
    13: "the safety door is open",
    14: "a build or start-up line is too long",
    15: "the jog target is beyond the travel",
    16: "an invalid jog command",
    17: "laser mode needs a spindle output",
    20: "an unsupported command",
    21: "two commands of one modal group",
    22: "no feed rate was set",
    23: "a command needs a whole number",
    24: "two commands want the axis words",
    25: "a repeated word",
    26: "no axis word where one is needed",
    27: "an invalid line number",
    28: "a missing value",
    29: "an unsupported work frame",
    30: "G53 needs G0 or G1",
    31: "unused axis words",
    32: "an arc without axis words in its plane",
    33: "an invalid target",
    34: "a bad radius of an arc",
    35: "an arc without offsets in its plane",
    36: "an unused word",
    37: "a tool offset on the wrong axis",
    38: "a tool number that is too large",
    53: "the setting is disabled",
}
ERROR_NOT_IDLE, ERROR_LOCKED = 8, 9

ALARMS: Mapping[int, str] = {
    1: "a hard limit was hit; the position is lost",
    2: "the target is beyond the soft limits",
    3: "it was reset while it moved; the position is lost",
    4: "the probe was not in its initial state",
    5: "the probe did not touch",
    6: "homing failed: it was reset on the way",
    7: "homing failed: the safety door was opened",
    8: "homing failed: the switch did not let go",
    9: "homing failed: the switch was not found",
    10: "the emergency stop is pressed",
}


@dataclass(frozen=True, slots=True)
class Halt:
    """A state in which a mount does not turn, in words, and what a person does about it."""

    what: str
    do: str


HALTS: Mapping[str, Halt] = {
    "Hold": Halt("it is held", "see who held it and why, then reset the controller"),
    "Door": Halt("its safety door is open", "close the door and resume, or reset the controller"),
    "Check": Halt("it only checks commands and moves nothing", "leave the check mode with $C"),
    "Sleep": Halt("it sleeps and its motors are off", "wake the controller with a reset and home the mount"),
}


def alarm_words(code: int | None) -> str:
    """Say an alarm's number and its meaning; None: the firmware did not say which."""
    if code is None:
        return "an alarm whose number it does not tell"
    return f"alarm {code}: {ALARMS.get(code, 'not in the table of known alarms')}"


def error_words(code: int) -> str:
    """Say the meaning of a refusal."""
    return ERRORS.get(code, "not in the table of known errors")
