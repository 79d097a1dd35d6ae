"""Strategies that damage a good text."""

import re

from hypothesis import strategies as st

PIECES = st.one_of(
    st.sampled_from(
        [
            "&a ",
            "*a",
            "!!str ",
            "<<: ",
            "---\n",
            "\t",
            "\0",
            "\r",
            "\ufeff",
            "{",
            "}",
            "[",
            "]",
            ": ",
            ", ",
            "- ",
        ]
    ),
    st.sampled_from(["nan", "-", "0", "1e999", "%", "+-", "deg", "'", '"', "|", ">", "#", "? ", "\n", "  ", "°"]),
    st.sampled_from(["polarizer", "retarder", "detector", "turn", "values: [1 deg]", "unknown", "steps", "dark"]),
    st.sampled_from(["pick-off", "repeat: 3", "segments", "oven", "diode", "without", "each", "steady", "A", "degC"]),
    st.text(max_size=5),
)


@st.composite
def edits(draw: st.DrawFn, text: str) -> str:
    """A good text after one to four random edits."""
    for _ in range(draw(st.integers(min_value=1, max_value=4))):
        at = draw(st.integers(min_value=0, max_value=len(text)))
        until = min(len(text), at + draw(st.integers(min_value=0, max_value=12)))
        text = text[:at] + draw(PIECES) + text[until:]
    return text


@st.composite
def shuffled_lines(draw: st.DrawFn, text: str) -> str:
    """A good text with lines left out, repeated and moved."""
    lines = text.splitlines(keepends=True)
    return "".join(draw(st.lists(st.sampled_from(lines), max_size=20)))


VALUES = (
    "5 deg",
    "0.1 mrad",
    "-3 °",
    "22 degC",
    "300 K",
    "0.5 K",
    "1e-3 A",
    "+5 mA",
    ".5 waves",
    "5. nm",
    "30 dB",
    "1:1000",
    "2",
    "2.0",
    "0012",
    "4 %",
    "1 mW +- 10 %",
    "1 mW ± 1 uW (k=2)",
    "0.04 +/- 0.002",
    "0 to 90 deg",
    "0 deg to 90 deg",
    "yes",
    "no",
    "on",
    "true",
    "null",
    "~",
    "2027-03-01",
    "10:30",
    "hand",
    "from above",
    "as written",
    "shuffled  7",
    "go on",
    "part",
    "step",
    "[]",
    "{}",
    "[part]",
    "'5 deg'",
)
"""Ways of writing values: most fit somewhere."""


@st.composite
def replacements(draw: st.DrawFn, text: str) -> str:
    """A good text with one to three of its values replaced."""
    for _ in range(draw(st.integers(min_value=1, max_value=3))):
        places = [match.span(1) for match in re.finditer(r": ([^\s{\[][^,}\]\n]*)", text)]
        start, end = draw(st.sampled_from(places))
        text = text[:start] + draw(st.sampled_from(VALUES)) + text[end:]
    return text
