"""From measured values to values fit for linear methods; one module per kind of values."""

from workbench.prepare.account import Explanation, explain_lines
from workbench.prepare.guards import GroupDifference, group_cautions, group_differences, imputed_shares
from workbench.prepare.recipe import FittedRecipe, Recipe, recipe_for
from workbench.prepare.refusal import PrepareRefusal
from workbench.prepare.runs import Runs, RunTable, run_table
from workbench.prepare.tables import MeasuredTable, PreparedTable, StepAccount

__all__ = [
    "Explanation",
    "FittedRecipe",
    "GroupDifference",
    "MeasuredTable",
    "PrepareRefusal",
    "PreparedTable",
    "Recipe",
    "RunTable",
    "Runs",
    "StepAccount",
    "explain_lines",
    "group_cautions",
    "group_differences",
    "imputed_shares",
    "recipe_for",
    "run_table",
]
