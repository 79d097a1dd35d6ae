"""Every place of a recipe that names a role takes roles of its kind, and says when a rig may leave them out."""

import pytest
from files_cases import Changes, told
from full_cases import night

EMPTY = "[{part mount: {turn: 1, step: 10 deg}}]"


@pytest.mark.parametrize(
    ("role", "kind"),
    [
        ("part mount", "rotation stage"),
        ("signal", "power meter"),
        ("diode", "current source"),
        ("diode tec", "temperature controller"),
        ("oven", "temperature controller"),
    ],
)
def test_what_the_recipe_cannot_do_without_is_not_optional(role: str, kind: str) -> None:
    written = f"  {role}:{' ' * max(1, 11 - len(role))}{kind}\n"

    (line,) = told(lambda: night({written: f"  {role}: {{is: {kind}, optional: true}}\n"}))

    assert line.endswith(f"the role '{role}' cannot be optional: the recipe needs it; expected false")


@pytest.mark.parametrize(
    ("changes", "role"),
    [
        ({}, "monitor"),
        ({}, "shutter"),
        (
            {
                "roles:\n": "roles:\n  flip: {is: slide, optional: true}\n",
                "name: part,": "name: part, taken out by: flip,",
            },
            "flip",
        ),
    ],
)
def test_what_a_person_or_nothing_can_stand_in_for_may_be_optional(changes: Changes, role: str) -> None:
    assert night(changes).roles[role].is_optional


@pytest.mark.parametrize(
    ("changes", "role", "kind"),
    [({"by: shutter": "by: hand"}, "shutter", "shutter"), ({"roles:\n": "roles:\n  spare: relay\n"}, "spare", "relay")],
)
def test_a_shutter_or_a_relay_may_stand_by_without_being_named(changes: Changes, role: str, kind: str) -> None:
    assert night(changes).roles[role].kind == kind


@pytest.mark.parametrize("kind", ["rotation stage", "power meter", "current source", "temperature controller", "slide"])
def test_any_other_role_that_nothing_names_is_told(kind: str) -> None:
    (line,) = told(lambda: night({"roles:\n": f"roles:\n  spare: {kind}\n"}))

    assert f"the role 'spare' is a {kind} that nothing in the recipe uses" in line


@pytest.mark.parametrize(
    ("old", "new"),
    [
        ("turned by: part mount", "turned by: nobody"),
        ("warmed by: oven", "warmed by: nobody"),
        ("to: monitor", "to: nobody"),
        ("role: signal", "role: nobody"),
        ("driven by: diode", "driven by: nobody"),
        ("cooled by: diode tec", "cooled by: nobody"),
        ("by: shutter", "by: nobody"),
        ("- diode tec: {to", "- nobody: {to"),
        ("- oven: {values", "- nobody: {values"),
        ("name: part,", "name: part, taken out by: nobody,"),
        ("name: part,", "name: part, taken out by: {nobody: {in: 0 deg, out: 90 deg}},"),
        ("name: part,", "name: part, each: {retardance: nobody},"),
        (EMPTY, "[{nobody: {turn: 1, step: 10 deg}}]"),
    ],
)
def test_a_role_that_is_not_declared_is_told_wherever_it_is_named(old: str, new: str) -> None:
    lines = told(lambda: night({old: new}))

    assert len([line for line in lines if "no role is called 'nobody'" in line]) == 1


def test_a_sweep_must_turn_every_mount_of_an_element_in_the_beam() -> None:
    (line,) = told(lambda: night({"    without: part\n": "", EMPTY: "[{repeat: 3}]"}))

    assert line == (
        "n.yaml:23:5: the sweep leaves out 'part mount', so what it turns has no angle; "
        "expected an entry such as part mount: {turn: 1, step: 5 deg}"
    )
