import os
import re
import shutil
import subprocess
import sys
from pathlib import Path

import pytest

from rigctl import errors
from rigctl.cli import app
from rigctl.errors import PolrigError

ROOT = Path(__file__).resolve().parent.parent
README = (ROOT / "README.md").read_text(encoding="utf-8")
DEVELOPERS = (ROOT / "DEVELOPERS.md").read_text(encoding="utf-8")


def blocks(text: str, language: str) -> list[str]:
    return re.findall(rf"```{language}\n(.*?)```", text, re.S)


@pytest.fixture(scope="module")
def clone(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """The files that git tracks or would track, in a folder of their own, with this environment's tools on the path."""
    folder = tmp_path_factory.mktemp("clone")
    names = subprocess.run(
        ["git", "ls-files", "--cached", "--others", "--exclude-standard"],
        cwd=ROOT, capture_output=True, text=True, check=True,
    ).stdout.split("\n")  # fmt: skip
    for name in filter(None, names):
        if (ROOT / name).exists():
            (folder / name).parent.mkdir(parents=True, exist_ok=True)
            shutil.copy2(ROOT / name, folder / name)
    for name in ("pyproject.toml", "requirements.lock"):
        os.utime(folder / name, (0, 0))  # this environment stands in for the one that make would set up: it is ready
    return folder


def shell(script: str, folder: Path) -> subprocess.CompletedProcess[str]:
    tools = Path(sys.executable).parent
    environment = {**os.environ, "PATH": f"{tools}:{os.environ['PATH']}", "VENV": str(tools.parent)}
    return subprocess.run(
        ["bash", "-mec", script],
        cwd=folder,
        env=environment,
        capture_output=True,
        text=True,
        check=False,
        timeout=280,
    )


@pytest.mark.parametrize("number", range(len(blocks(README, "sh"))))
def test_readme_commands_do_what_it_says(number: int, clone: Path) -> None:
    done = shell(blocks(README, "sh")[number], clone)

    assert done.returncode == 0, done.stderr


def test_readme_opens_a_run_file_with_a_stock_reader(clone: Path) -> None:
    if not (clone / "night.h5").exists():
        shell("polrig rehearse recipes/sheet-polarizer.yaml --seed 4 --out night.h5", clone)

    done = subprocess.run(
        [sys.executable, "-c", blocks(README, "python")[0]],
        cwd=clone,
        capture_output=True,
        text=True,
        check=False,
    )

    assert done.returncode == 0, done.stderr
    assert done.stdout.split()[-1] == "W"


def test_readme_s_recipe_is_a_recipe(clone: Path) -> None:
    (clone / "readme.yaml").write_text(blocks(README, "yaml")[0], encoding="utf-8")

    assert shell("polrig check readme.yaml", clone).returncode == 0


def test_readme_lists_every_command() -> None:
    names = {command.name for command in app.registered_commands}

    assert names == set(re.findall(r"^\| `polrig (\w+)", README, re.M))


def test_readme_lists_every_exit_code() -> None:
    classes = [c for c in vars(errors).values() if isinstance(c, type) and issubclass(c, PolrigError)]

    assert {0, *(c.exit_code for c in classes)} == {int(code) for code in re.findall(r"^\| (\d+) \|", README, re.M)}


@pytest.mark.parametrize("target", sorted(set(re.findall(r"`make (\w+)`|^make (\w+)", README + DEVELOPERS, re.M))))
def test_every_make_target_that_is_named_exists(target: tuple[str, str]) -> None:
    done = subprocess.run(["make", "-n", "".join(target)], cwd=ROOT, capture_output=True, text=True, check=False)

    assert done.returncode == 0, done.stderr


@pytest.mark.parametrize("path", sorted(set(re.findall(r"\]\(([^)#:]+)\)", README + DEVELOPERS))))
def test_every_link_leads_somewhere(path: str) -> None:
    assert (ROOT / path).exists()


def test_the_map_names_what_is_there() -> None:
    named = re.findall(r"^ {6}(\w+(?:/|\.py))", DEVELOPERS, re.M)

    assert named
    assert all((ROOT / "rigctl" / name).exists() for name in named)
