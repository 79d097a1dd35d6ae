"""A good recipe, a good rig file and drivers that stand in for real ones."""

import pytest

RECIPE = """\
recipe: sheet polarizer on a turning mount
roles:
  part mount: rotation stage
  signal: power meter
  shutter: {is: shutter, optional: true}
source: {wavelength: 785.2 nm +- 0.3 nm, power: 2 mW +- 30 %}
optics:
  - polarizer: {name: entry polarizer, axis: 0 deg, extinction ratio: 100000:1 +- 30 %}
  - polarizer: {name: part, turned by: part mount, extinction ratio: 1000:1, unknown: [extinction ratio, dial offset]}
  - detector: {role: signal}
sweep: [{part mount: {turn: 1, step: 5 deg, approach: from below, settle: 150 ms}}]
dwell: {time: 400 ms, at least: 4 readings}
dark: {by: shutter, before: true, after: true}
"""


@pytest.fixture
def recipe_text() -> str:
    return RECIPE
