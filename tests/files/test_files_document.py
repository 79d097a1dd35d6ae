"""Text, keys and lists with their places; what no file of ours may hold is refused."""

import time
from pathlib import Path

import pytest
from files_cases import told

from rigctl.files.document import LARGEST_BYTES, parse_document, read_document
from rigctl.files.mistakes import Mistakes

STOPPED = "The rest of the file was not looked at: mend this first."


def parse(text: str) -> object:
    mistakes = Mistakes("f.yaml")
    document = parse_document(text, mistakes)
    mistakes.raise_if_any()
    return document.data


def read(path: Path) -> object:
    mistakes = Mistakes("f.yaml")
    document = read_document(path, mistakes)
    mistakes.raise_if_any()
    return document.data


@pytest.mark.parametrize(
    ("text", "data"),
    [
        ("a: on", {"a": "on"}),
        ("a: 'no'", {"a": "no"}),
        ("a: 10:30", {"a": "10:30"}),
        ("a: 0012", {"a": "0012"}),
        ("a: 1e3", {"a": "1e3"}),
        ("a:", {"a": ""}),
        ("a: null", {"a": "null"}),
        ("on: 1", {"on": "1"}),
        ("1: 2", {"1": "2"}),
        ("a: [1, {b: c}]", {"a": ["1", {"b": "c"}]}),
        ("a:\n- b\n- c", {"a": ["b", "c"]}),
        ("a: |\n  two\n  lines\n", {"a": "two\nlines\n"}),
        ("a: b # remark", {"a": "b"}),
        ("---\na: b\n...\n", {"a": "b"}),
        ('{"a": ["b"]}', {"a": ["b"]}),
        ("a: ä°µ", {"a": "ä°µ"}),
        ("\ufeffa: b", {"a": "b"}),
        ("a: b\r\nc: d\r\n", {"a": "b", "c": "d"}),
        ("a: b\rc: d", {"a": "b", "c": "d"}),
    ],
)
def test_every_scalar_stays_text(text: str, data: object) -> None:
    assert parse(text) == data


@pytest.mark.parametrize(
    ("text", "complaint"),
    [
        ("a: &x 1", "f.yaml:1:4: the anchor '&x' is not allowed; expected the value alone"),
        ("a: *x", "f.yaml:1:4: the alias '*x' repeats another part; expected the part written out"),
        ("a: !!int 1", "f.yaml:1:4: the tag '!!int' is not allowed; expected the value alone"),
        ("a: !x {}", "f.yaml:1:4: the tag '!x' is not allowed; expected the value alone"),
        (
            "a: !!python/name:os.system x",
            "f.yaml:1:4: the tag '!!python/name:os.system' is not allowed; expected the value alone",
        ),
        ("a: b\n<<: {c: d}", "f.yaml:2:1: merging with '<<' is not allowed; expected the keys written out"),
        ("a: b\n[c]: d", "f.yaml:2:1: a list or mapping stands in place of a key; expected a word"),
        ("a: b\n? {c: d}\n: e", "f.yaml:2:3: a list or mapping stands in place of a key; expected a word"),
        ("a: b\n'': c", "f.yaml:2:1: a key is missing before ':'; expected a word"),
        ("a: b\nc: d\na: e", "f.yaml:3:1: the key 'a' stands already in line 1"),
        ("a: {b: 1, b: 2}", "f.yaml:1:11: the key 'b' stands already in line 1"),
        ("*x", "f.yaml:1:1: the alias '*x' repeats another part; expected the part written out"),
    ],
)
def test_what_a_reader_could_mistake_is_refused(text: str, complaint: str) -> None:
    assert told(lambda: parse(text)) == [complaint]


def test_mistakes_of_structure_are_told_at_once_and_each_once() -> None:
    assert told(lambda: parse("a: &x 1\nb: *x\na: 2\n? [&y c, c]\n: {d: 1, d: 2}\n")) == [
        "f.yaml:1:4: the anchor '&x' is not allowed; expected the value alone",
        "f.yaml:2:4: the alias '*x' repeats another part; expected the part written out",
        "f.yaml:3:1: the key 'a' stands already in line 1",
        "f.yaml:4:3: a list or mapping stands in place of a key; expected a word",
        "f.yaml:4:4: the anchor '&y' is not allowed; expected the value alone",
    ]


@pytest.mark.parametrize(
    ("text", "complaint"),
    [
        ("a: b: c", "f.yaml:1:5: not readable: mapping values are not allowed here"),
        (
            "a: {b: c\nd: e",
            "f.yaml:2:2: not readable while parsing a flow mapping that begins in line 1: "
            "expected ',' or '}', but got ':'",
        ),
        (
            "a: 'b",
            "f.yaml:1:6: not readable while scanning a quoted scalar that begins in line 1: "
            "found unexpected end of stream",
        ),
        ("a: b\n---\nc: d", "f.yaml:2:1: a second document begins here; expected one document in a file"),
        ("a:\tb", "f.yaml:1:3: a tab stands here; expected spaces"),
        ("a: b\n\tc: d", "f.yaml:2:1: a tab stands here; expected spaces"),
        ("a: b\0", "f.yaml:1:5: the character U+0000 is not text"),
        ("a: b\nc: \x1b[31m", "f.yaml:2:4: the character U+001B is not text"),
        ("a: " + "[" * 20, "f.yaml:1:15: more than 12 levels of keys and lists"),
        ("- a", "f.yaml:1:1: the file does not consist of keys; expected lines such as 'key: value'"),
        ("just words", "f.yaml:1:1: the file does not consist of keys; expected lines such as 'key: value'"),
    ],
)
def test_what_cannot_be_read_on_ends_the_reading_and_says_so(text: str, complaint: str) -> None:
    assert told(lambda: parse(text)) == [complaint, STOPPED]


def test_a_syntax_error_does_not_hide_what_was_found_before_it() -> None:
    assert told(lambda: parse("a: &x 1\nb: c: d")) == [
        "f.yaml:1:4: the anchor '&x' is not allowed; expected the value alone",
        "f.yaml:2:5: not readable: mapping values are not allowed here",
        STOPPED,
    ]


@pytest.mark.parametrize("text", ["", "\n\n", "# a remark\n", "---\n...\n", "\ufeff", " "])
def test_an_empty_file_is_refused_as_a_whole(text: str) -> None:
    assert told(lambda: parse(text)) == ["f.yaml: the file is empty"]


@pytest.mark.parametrize(
    "text",
    [
        "[" * 200_000,
        "{a: " * 200_000,
        "- " * 200_000,
        "a:\n" + "".join(f"{' ' * i}b:\n" for i in range(1, 900)),
    ],
)
def test_nesting_without_end_is_refused_at_once(text: str) -> None:
    began = time.perf_counter()

    lines = told(lambda: parse(text))

    assert lines[-1] == STOPPED
    assert time.perf_counter() - began < 5.0


def test_aliases_that_would_multiply_are_never_followed() -> None:
    bomb = "a0: &a0 [x]\n" + "".join(f"a{i}: &a{i} [*a{i - 1}, *a{i - 1}]\n" for i in range(1, 15))

    lines = told(lambda: parse(bomb))

    assert len(lines) == 15 + 28


def test_a_file_on_disk_is_read_like_a_text(tmp_path: Path) -> None:
    path = tmp_path / "f.yaml"
    path.write_bytes(b"\xef\xbb\xbfa: b\r\n")

    assert read(path) == {"a": "b"}


@pytest.mark.parametrize(
    ("data", "lines"),
    [
        (
            b"a: \xe4\n",
            ["f.yaml:1:4: byte 0xe4 is not UTF-8; expected UTF-8: save it again with that encoding", STOPPED],
        ),
        (
            b"a: b\nc: d\xff\n",
            ["f.yaml:2:5: byte 0xff is not UTF-8; expected UTF-8: save it again with that encoding", STOPPED],
        ),
        (
            "a: b".encode("utf-16"),
            ["f.yaml: is UTF-16 text; expected UTF-8: save it again with that encoding"],
        ),
        (b"#" * (LARGEST_BYTES + 1), ["f.yaml: is larger than 1 MiB; expected a file of a few kilobytes"]),
        (b"", ["f.yaml: the file is empty"]),
    ],
)
def test_a_file_that_is_no_such_text_is_refused(data: bytes, lines: list[str], tmp_path: Path) -> None:
    path = tmp_path / "f.yaml"
    path.write_bytes(data)

    assert told(lambda: read(path)) == lines


def test_a_file_of_the_largest_size_is_read(tmp_path: Path) -> None:
    path = tmp_path / "f.yaml"
    path.write_bytes(b"a: b\n#".ljust(LARGEST_BYTES, b"x"))

    assert read(path) == {"a": "b"}


def test_a_path_without_a_file_is_refused(tmp_path: Path) -> None:
    assert told(lambda: read(tmp_path / "none.yaml")) == ["f.yaml: cannot be read: no such file or directory"]


def test_a_folder_is_refused(tmp_path: Path) -> None:
    assert told(lambda: read(tmp_path)) == ["f.yaml: is a folder, not a file"]


def test_what_is_neither_file_nor_folder_is_refused() -> None:
    assert told(lambda: read(Path("/dev/zero"))) == ["f.yaml: is not an ordinary file"]


def test_a_path_that_cannot_be_one_is_refused() -> None:
    assert told(lambda: read(Path("a\0b"))) == ["f.yaml: cannot be read: embedded null byte"]


def test_a_path_through_a_file_is_refused(tmp_path: Path) -> None:
    (tmp_path / "file").write_text("a: b")

    assert told(lambda: read(tmp_path / "file" / "below"))[0].startswith("f.yaml: cannot be read: ")
