"""Measures the code against the project's own limits and prints them; exits 1 where a limit is broken."""

import ast
import re
import statistics
import sys
from collections.abc import Iterator
from pathlib import Path

ROOT = Path(__file__).resolve().parent.parent
SOURCE_DIRS = ("rigctl", "drivers", "simulators")


def python_files(*folders: str) -> list[Path]:
    return sorted(path for folder in folders for path in (ROOT / folder).rglob("*.py"))


def function_lengths(path: Path) -> Iterator[tuple[int, str]]:
    for node in ast.walk(ast.parse(path.read_text(encoding="utf-8"))):
        if isinstance(node, ast.FunctionDef | ast.AsyncFunctionDef):
            assert node.end_lineno is not None
            yield node.end_lineno - node.lineno + 1, f"{path.relative_to(ROOT)}:{node.name}"


def line_count(path: Path) -> int:
    return len(path.read_text(encoding="utf-8").splitlines())


def rows() -> Iterator[tuple[str, float, float, bool, str]]:
    """Yield name, value, limit, whether it holds, and the worst place."""
    sources, tests = python_files(*SOURCE_DIRS), python_files("tests")
    files = sorted((line_count(path), str(path.relative_to(ROOT))) for path in sources)
    functions = sorted(item for path in sources for item in function_lengths(path))
    lengths = [length for length, _ in functions]
    total = sum(lines for lines, _ in files)
    ignores = sum(len(re.findall(r"#\s*type:\s*ignore", path.read_text(encoding="utf-8"))) for path in sources)
    at_most = [
        ("file lines, median", statistics.median(lines for lines, _ in files), 120, ""),
        ("file lines, max", *files[-1][:1], 300, files[-1][1]),
        ("function lines, median", statistics.median(lengths), 7, ""),
        ("function lines, 90th percentile", lengths[int(0.9 * len(lengths))], 25, ""),
        ("function lines, max", *functions[-1][:1], 50, functions[-1][1]),
        ("type: ignore per 1,000 lines", round(1000 * ignores / total, 2), 1, ""),
    ]
    for name, value, limit, place in at_most:
        yield name, value, limit, value <= limit, place
    ratio = round(sum(map(line_count, tests)) / total, 2)
    yield "tests : source", ratio, 1.3, ratio >= 1.3, ""


def main() -> int:
    is_kept = True
    for name, value, limit, holds, place in rows():
        is_kept &= holds
        print(f"{'ok ' if holds else 'NO '} {name:34} {value:>8g}   limit {limit:g}   {place}")
    return 0 if is_kept else 1


if __name__ == "__main__":
    sys.exit(main())
