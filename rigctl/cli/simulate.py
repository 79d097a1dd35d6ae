"""`polrig simulate`: the twins of a rig on ports of this computer, in real time, until stopped."""

from pathlib import Path
from typing import Annotated

import typer

from rigctl.errors import UsageError

NAME = "simulate"


def command(
    rig: Annotated[Path, typer.Argument(metavar="RIG", help="The rig whose instruments are simulated.")],
    recipe: Annotated[Path, typer.Option(help="The recipe whose optics stand on the bench.")],
    write: Annotated[Path, typer.Option(help="The rig file to write: the same, with the twins' addresses.")],
    seed: Annotated[int | None, typer.Option(min=0, help="Which bench and which noise.")] = None,
) -> int:
    """Serve a rig's simulated instruments here.

    Each address of the rig gets one of its own kind on this computer, in real time, until stopped (Ctrl-C): a
    network port for tcp://, a terminal as slow as the line for serial://, a HiSLIP port for visa://. The rig file that
    is written differs from the given one in its addresses only.
    """
    from rigctl.cli.console import say
    from rigctl.cli.loading import load
    from rigctl.cli.rehearse import DEFAULT_SEED
    from rigctl.cli.signals import stopping_on_signals
    from rigctl.links.serve import TwinServer
    from rigctl.runner.simulation import rig_text_with_addresses
    from rigctl.timeline import StopRequest, WallTimeline

    loaded = load(recipe, rig)
    chosen = next(number for number in (seed, loaded.rig.simulated.seed, DEFAULT_SEED) if number is not None)
    bench = loaded.factory.build(loaded.recipe, loaded.rig, chosen)
    addresses = {entry.at for entry in loaded.rig.instruments.values()}
    stop = StopRequest()
    with stopping_on_signals(stop):
        twins = {address: bench.twin(address) for address in sorted(addresses)}
        with TwinServer(twins, WallTimeline(stop)) as server:
            _write_new(write, rig_text_with_addresses(loaded.rig, server.addresses))
            say(f"ready: {len(twins)} simulated instruments; their rig file is {write}")
            server.serve()
    return 0


def _write_new(path: Path, text: str) -> None:
    try:
        with path.open("x", encoding="utf-8") as stream:
            stream.write(text)
    except OSError as error:
        raise UsageError(f"{path} cannot be written: {error.strerror}", do="Give another --write.") from error
