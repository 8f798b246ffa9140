"""From measured values to values fit for linear methods; one module per kind of values."""

from workbench.prepare.recipe import FittedRecipe, Recipe, recipe_for
from workbench.prepare.runs import Runs, RunTable, run_table
from workbench.prepare.tables import MeasuredTable, PreparedTable, StepAccount

__all__ = [
    "FittedRecipe",
    "MeasuredTable",
    "PreparedTable",
    "Recipe",
    "RunTable",
    "Runs",
    "StepAccount",
    "recipe_for",
    "run_table",
]
