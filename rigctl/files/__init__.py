"""Files that people write: recipes and rig files, read into checked values.

Every mistake of a file is told at once, with its place.
"""

from rigctl.files.matching import match
from rigctl.files.recipe_reading import load_recipe, parse_recipe
from rigctl.files.rig_reading import load_rig, parse_rig

__all__ = ["load_recipe", "load_rig", "match", "parse_recipe", "parse_rig"]
