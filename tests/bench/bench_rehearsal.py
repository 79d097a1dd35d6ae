"""Visits a second of a rehearsal, exchanges a visit, its ratio to bare exchanges, and where the time goes."""

import cProfile
import io
import pstats
import tempfile
import time
from pathlib import Path

from rigctl.files import load_recipe, match, parse_rig
from rigctl.links.channel import Channel
from rigctl.links.family import Opening
from rigctl.links.loopback import LoopbackChannel
from rigctl.links.tap import TappedChannel
from rigctl.plugins import find_bench_factory, find_drivers
from rigctl.runner.progress import Silent
from rigctl.runner.rehearsal import rehearsal_job
from rigctl.runner.run import Job, run_job
from rigctl.timeline import Timeline

RECIPE = Path(__file__).resolve().parents[2] / "recipes" / "quarter-wave-plate.yaml"
VISITS = 3600


def make_job(folder: Path, seed: int, sink: io.StringIO | None = None) -> Job:
    text = RECIPE.read_text(encoding="utf-8").replace("step: 5 deg", "step: 0.1 deg")
    (folder / "bench.yaml").write_text(text, encoding="utf-8")
    drivers, factory = find_drivers(), find_bench_factory()
    recipe = load_recipe(folder / "bench.yaml")
    rig = parse_rig(factory.default_rig({n: r.kind for n, r in recipe.roles.items()}), "default", drivers, factory)
    match(recipe, rig, drivers)

    def wrap(channel: Channel, timeline: Timeline) -> Channel:
        return channel if sink is None else TappedChannel(channel, timeline, sink)

    return rehearsal_job(
        recipe,
        rig,
        drivers=drivers,
        factory=factory,
        seed=seed,
        path=folder / f"run-{seed}.h5",
        progress=Silent(),
        wrap=wrap,
    )


def bare_exchanges_per_second(folder: Path) -> float:
    """One status query after another on the twin's loopback, with nothing around it."""
    job = make_job(folder, 99)
    channel = job.open_channel(job.rig.instruments[job.rig.roles["signal"]].at, Opening())
    assert isinstance(channel, LoopbackChannel)
    began_s = time.perf_counter()
    for _ in range(20_000):
        channel.write(b"SENSE:POWER:RANGE:UPPER?\n", job.timeline.now() + 1.0)
        channel.readline(job.timeline.now() + 1.0)
    return 20_000 / (time.perf_counter() - began_s)


def main() -> None:
    with tempfile.TemporaryDirectory() as name:
        folder = Path(name)
        sink = io.StringIO()
        run_job(make_job(folder, 1, sink))
        exchanges = sink.getvalue().count(" -> ") / VISITS
        rates = []
        for seed in (2, 3, 4):
            job = make_job(folder, seed)
            began_s = time.perf_counter()
            outcome = run_job(job)
            rates.append(VISITS / (time.perf_counter() - began_s))
            assert outcome.exit_code == 0, outcome.why
        bare = bare_exchanges_per_second(folder)
        best = max(rates)
        print(f"rehearsal: {best:,.0f} visits/s (three runs: {', '.join(f'{r:,.0f}' for r in rates)})")
        print(
            f"{exchanges:.2f} exchanges a visit; bare exchanges {bare:,.0f}/s, so {bare / exchanges / best:.1f} times"
        )
        print("slower than its exchanges alone")
        profile = cProfile.Profile()
        job = make_job(folder, 5)
        profile.enable()
        run_job(job)
        profile.disable()
        text = io.StringIO()
        pstats.Stats(profile, stream=text).sort_stats("tottime").print_stats(12)
        print("\n".join(line for line in text.getvalue().splitlines()[6:] if line.strip()))


if __name__ == "__main__":
    main()
