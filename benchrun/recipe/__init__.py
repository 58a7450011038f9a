"""The recipe: what is asked for, validated, in SI, with line numbers kept."""

from benchrun.recipe.load import files_named, load_recipe, recipe_source
from benchrun.recipe.model import Recipe, Step, Sweep

__all__ = ["Recipe", "Step", "Sweep", "files_named", "load_recipe", "recipe_source"]
