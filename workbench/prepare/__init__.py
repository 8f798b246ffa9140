"""From measured values to values fit for linear methods; one module per kind of values."""

from workbench.prepare.recipe import FittedRecipe, Recipe, recipe_for
from workbench.prepare.tables import MeasuredTable, PreparedTable, StepAccount

__all__ = ["FittedRecipe", "MeasuredTable", "PreparedTable", "Recipe", "StepAccount", "recipe_for"]
