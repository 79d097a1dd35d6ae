"""The watchdog: a small process of its own that makes the bench safe when the runner dies or hangs.

It is started before anything may emit. It hears the runner's heartbeat on its standard input; when the runner is
gone, or silent for `HANG_S`, it ends the runner, opens the source and the shutter itself, makes them safe with the
same steps as the runner would, and notes what it did beside the run file. It never measures and never writes the run
file. It is an addition to the hardware interlock, never its replacement.
"""

import json
import os
import select
import signal
import sys
from dataclasses import asdict, dataclass
from datetime import UTC, datetime

from rigctl.errors import PolrigError
from rigctl.runner.safe import SafeStep, is_beam_off, make_safe
from rigctl.timeline import StopRequest, WallTimeline

HANG_S = 10.0
"""No heartbeat for so long means that the runner hangs; it beats twice a second, also while it waits for a reply."""
BEAT, DONE = b".", b"d"
TRY_AGAIN_S = 1.0
TRIES = 60
"""An instrument may hold on to the dead runner's connection for a while; a minute of tries outlasts it."""


@dataclass(frozen=True, slots=True)
class Charge:
    """What a watchdog is told at its start, as one line of JSON."""

    recipe_text: str
    recipe_path: str
    rig_text: str
    rig_path: str
    note_path: str
    runner_pid: int
    hang_s: float = HANG_S

    def to_line(self) -> bytes:
        """Return the charge as the line that `from_line` reads."""
        return json.dumps(asdict(self)).encode() + b"\n"

    @classmethod
    def from_line(cls, line: bytes) -> "Charge":
        """Read a charge."""
        return cls(**json.loads(line))


def why_to_act(charge: Charge, stdin_fd: int) -> str:
    """Listen to the runner; return why the bench must be made safe, or nothing when the run ended by itself."""
    poller = select.poll()
    poller.register(stdin_fd, select.POLLIN)
    while poller.poll(charge.hang_s * 1e3):
        heard = os.read(stdin_fd, 4096)
        if DONE in heard:
            return ""
        if not heard:
            return "the runner is gone"
    return f"the runner gave no sign of life for {charge.hang_s:.0f} s"


def end_runner(charge: Charge) -> None:
    """Kill the runner, if it still is the process that started this one."""
    if os.getppid() == charge.runner_pid:
        os.kill(charge.runner_pid, signal.SIGKILL)


def note(charge: Charge, text: str) -> None:
    """Add a line with its time to the note beside the run file."""
    line = f"{datetime.now(UTC).isoformat(timespec='milliseconds')} {text}\n"
    with open(charge.note_path, "a", encoding="utf-8") as stream:
        stream.write(line)
        stream.flush()
        os.fsync(stream.fileno())


class Watchdog:
    """Holds everything that it may need before it is needed."""

    def __init__(self, charge: Charge) -> None:
        from rigctl.files import parse_recipe, parse_rig
        from rigctl.plugins import find_bench_factory, find_drivers

        self.charge = charge
        self.timeline = WallTimeline(StopRequest())
        self.drivers = find_drivers()
        self.recipe = parse_recipe(charge.recipe_text, charge.recipe_path)
        self.rig = parse_rig(charge.rig_text, charge.rig_path, self.drivers, find_bench_factory())

    def act(self, why: str) -> bool:
        """Make the bench safe; return whether that was confirmed. Tries again until it is, or a minute is over."""
        end_runner(self.charge)
        self._note(f"{why}: making the bench safe")
        for attempt in range(1, TRIES + 1):
            steps = self._attempt()
            is_off = bool(steps) and is_beam_off(steps)
            if is_off or attempt in (1, TRIES):
                for step in steps:
                    self._note(str(step))
            if is_off:
                self._note("the beam is confirmed off")
                return True
            self.timeline.wait_until(self.timeline.now() + TRY_AGAIN_S)
        self._note("THE BEAM COULD NOT BE CONFIRMED OFF. Treat it as on: go and look.")
        return False

    def _attempt(self) -> tuple[SafeStep, ...]:
        from rigctl.runner.bench import emitting_roles, open_bench
        from rigctl.runner.hardware import channel_opener

        try:
            with open_bench(
                self.recipe,
                self.rig,
                self.drivers,
                open_channel=channel_opener(self.timeline),
                timeline=self.timeline,
                only=emitting_roles(self.recipe, self.rig),
            ) as bench:
                return make_safe(bench, self.timeline, is_success=False)
        except PolrigError as error:
            self._note(f"cannot open the bench: {error}")
            return ()

    def _note(self, text: str) -> None:
        """Note, but never let a full disk keep the source on."""
        try:
            note(self.charge, text)
        except OSError:
            return


def main() -> int:
    """Run as a process: the charge on standard input, then heartbeats; `ready` on standard output."""
    for number in (signal.SIGINT, signal.SIGTERM, signal.SIGHUP):
        signal.signal(number, signal.SIG_IGN)
    fd = sys.stdin.fileno()
    line = b""
    while not line.endswith(b"\n"):
        if not (byte := os.read(fd, 1)):
            return 0
        line += byte
    watchdog = Watchdog(Charge.from_line(line))
    os.write(sys.stdout.fileno(), b"ready\n")
    why = why_to_act(watchdog.charge, fd)
    if not why:
        return 0
    return 0 if watchdog.act(why) else 7


if __name__ == "__main__":
    sys.exit(main())
