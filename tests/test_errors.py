import inspect
import re

import pytest

from rigctl import errors
from rigctl.errors import FileError, LinkTimeoutError, Mistake, PolrigError, RefusedError


def drawn_tree() -> dict[str, tuple[str, int]]:
    """Class name -> (parent, exit code), read from the tree drawn in the module's docstring."""
    assert errors.__doc__ is not None
    found: dict[str, tuple[str, int]] = {}
    parents = ["Exception"]
    for line in errors.__doc__.splitlines():
        match = re.match(r" {4}([│├└─ ]*)(\w+Error)\s+(\d+)", line)
        if match:
            depth = len(match[1]) // 4
            parents[depth + 1 :] = [match[2]]
            found[match[2]] = (parents[depth], int(match[3]))
    return found


def real_tree() -> dict[str, tuple[str, int]]:
    classes = [c for _, c in inspect.getmembers(errors, inspect.isclass) if issubclass(c, PolrigError)]
    return {c.__name__: (c.__bases__[0].__name__, c.exit_code) for c in classes}


def test_the_tree_drawn_in_the_docstring_is_the_tree_that_exists() -> None:
    assert drawn_tree() == real_tree()


def test_a_message_says_where_what_and_what_to_do() -> None:
    error = PolrigError("it broke", where="head 7", do="Look at it.")

    assert str(error) == "head 7: it broke\n  Look at it."


def test_a_mistake_is_told_with_its_place_what_was_expected_and_the_nearest_word() -> None:
    mistake = Mistake("a.yaml", 3, 5, "swep", "unknown key 'swep'", "a key of a recipe", "sweep")

    assert str(FileError([mistake])) == (
        "a.yaml:3:5: unknown key 'swep'; expected a key of a recipe; did you mean 'sweep'?"
    )


@pytest.mark.parametrize(
    "error",
    [
        LinkTimeoutError("late", address="tcp://a:1", partial=b"1.2"),
        RefusedError("no", address="tcp://a:1", code=-222, text="Data out of range"),
    ],
)
def test_instrument_errors_keep_their_address_as_a_field(error: LinkTimeoutError | RefusedError) -> None:
    assert error.address == "tcp://a:1"
    assert error.exit_code == 3
