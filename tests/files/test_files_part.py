"""A part of a file may be looked at whatever else is wrong with the file."""

from files_cases import told

from rigctl.files.document import parse_document
from rigctl.files.mistakes import Mistakes
from rigctl.files.part import Part

TEXT = """\
a: one
b: [two, three]
c: {d: four, e: {}}
"""


def whole() -> tuple[Part, Mistakes]:
    mistakes = Mistakes("f.yaml")
    return Part.whole(parse_document(TEXT, mistakes), mistakes), mistakes


def part(*keys: str) -> Part:
    found, _ = whole()
    for key in keys:
        found = found.at(key)
    return found


def test_a_text_is_its_own_and_everything_else_has_none() -> None:
    assert [part("a").text, part("b").text, part("c").text, part("x").text] == ["one", None, None, None]


def test_what_is_not_there_can_be_looked_into_all_the_same() -> None:
    nothing = part("x", "y", "z")

    assert (nothing.is_there, nothing.text, nothing.items(), nothing.entries(), nothing.words()) == (
        False,
        None,
        {},
        [],
        [],
    )


def test_what_stands_empty_is_there() -> None:
    assert part("c", "e").is_there


def test_the_parts_of_a_mapping_are_by_key_and_those_of_a_list_in_order() -> None:
    assert {key: one.text for key, one in part("c").items().items()} == {"d": "four", "e": None}
    assert [one.text for one in part("b").entries()] == ["two", "three"]


def test_a_text_may_stand_for_a_list_of_one() -> None:
    assert [one.text for one in part("a").words()] == ["one"]
    assert [one.text for one in part("b").words()] == ["two", "three"]


def test_the_key_is_the_last_that_is_a_word() -> None:
    assert (part("c", "d").key, part("b").entries()[0].key, part().key) == ("d", "b", "")


def test_a_text_may_stand_in_for_nothing_but_for_nothing_else() -> None:
    assert part("x").otherwise("five").text == "five"
    assert part("a").otherwise("five").text == "one"
    assert part("x").otherwise("five").keys == ("x",)


def test_a_slip_for_a_key_is_seen() -> None:
    assert part("c").has_slip_for("dd") is True
    assert part("c").has_slip_for("d", "e") is False
    assert part("c").has_slip_for("zebra") is False


def test_mistakes_stand_at_the_value_the_key_or_the_owner() -> None:
    owner, mistakes = whole()
    owner.at("c").at("d").wrong("the value")
    owner.at("c").at("d").wrong_key("the key", expected="another", nearest="e")
    owner.at("c").missing("something", expected="a key")

    assert told(mistakes.raise_if_any) == [
        "f.yaml:3:1: something; expected a key",
        "f.yaml:3:5: the key; expected another; did you mean 'e'?",
        "f.yaml:3:8: the value",
    ]


def test_a_mistake_at_what_is_not_there_stands_at_what_is_around_it() -> None:
    owner, mistakes = whole()
    owner.at("c").at("x").wrong("no value")

    assert told(mistakes.raise_if_any) == ["f.yaml:3:4: no value"]
