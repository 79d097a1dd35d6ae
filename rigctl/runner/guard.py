"""The runner's side of the watchdog: starts it, beats for it, and releases it when the bench is safe."""

import os
import subprocess
import sys
from pathlib import Path
from typing import IO, Protocol, cast

from rigctl.errors import InstrumentError
from rigctl.files.recipe import Recipe
from rigctl.files.rig import Rig
from rigctl.runner.watchdog import BEAT, DONE, Charge
from rigctl.timeline import Timeline

BEAT_EVERY_S = 0.5
START_S = 30.0
"""How long its start may take on a slow computer; usually it is under a second."""


class Guard(Protocol):
    """Whoever makes the bench safe when this process cannot."""

    def start(self) -> None:
        """Have it watch; returns once it does."""

    def beat(self) -> None:
        """Tell it that this process lives; cheap, to be called often."""

    def release(self) -> None:
        """Tell it that the bench is safe."""


class NoGuard:
    """For a rehearsal: nothing can be harmed."""

    def start(self) -> None:
        """Do nothing."""

    def beat(self) -> None:
        """Do nothing."""

    def release(self) -> None:
        """Do nothing."""


class WatchdogGuard:
    """A watchdog process."""

    def __init__(self, recipe: Recipe, rig: Rig, run_path: Path, timeline: Timeline) -> None:
        self._charge = Charge(
            recipe_text=recipe.text,
            recipe_path=recipe.path,
            rig_text=rig.text,
            rig_path=rig.path,
            note_path=f"{run_path}.watchdog",
            runner_pid=os.getpid(),
        )
        self._process: subprocess.Popen[bytes] | None = None
        self._timeline = timeline
        self._next_beat_s = 0.0

    @property
    def pid(self) -> int | None:
        """Process number of the watchdog, while there is one."""
        return None if self._process is None else self._process.pid

    def start(self) -> None:
        """Start the process in a session of its own and wait until it is ready."""
        self._process = subprocess.Popen(
            [sys.executable, "-m", "rigctl.runner.watchdog"],
            stdin=subprocess.PIPE,
            stdout=subprocess.PIPE,
            stderr=subprocess.DEVNULL,
            start_new_session=True,
        )
        pipe = self._pipe()
        pipe.write(self._charge.to_line())
        pipe.flush()
        os.set_blocking(pipe.fileno(), False)
        answer = cast(IO[bytes], self._process.stdout).readline()
        if answer != b"ready\n":
            raise InstrumentError("the watchdog does not start", do="Nothing was switched on; report this.")

    def beat(self) -> None:
        """Beat at most twice a second; a watchdog that died is replaced."""
        if self._process is None or (now_s := self._timeline.now()) < self._next_beat_s:
            return
        self._next_beat_s = now_s + BEAT_EVERY_S
        try:
            os.write(self._pipe().fileno(), BEAT)
        except BlockingIOError:  # it is asleep with a full pipe: alive as far as one can tell
            return
        except BrokenPipeError:
            self._process.wait()
            self.start()

    def release(self) -> None:
        """End the watchdog."""
        process, self._process = self._process, None
        if process is None:
            return
        try:
            os.write(cast(IO[bytes], process.stdin).fileno(), DONE)
        except OSError:
            return
        finally:
            cast(IO[bytes], process.stdin).close()
            cast(IO[bytes], process.stdout).close()
            process.wait(START_S)

    def _pipe(self) -> IO[bytes]:
        assert self._process is not None
        return cast(IO[bytes], self._process.stdin)
