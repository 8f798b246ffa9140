"""From measured values to values fit for linear methods; one module per kind of values."""

from workbench.prepare.account import Explanation, explain_lines
from workbench.prepare.account_page import PreparedSize, account_page, account_table
from workbench.prepare.effects import DriftEffect, drift_effect
from workbench.prepare.guards import (
    GroupDifference,
    group_account,
    group_cautions,
    group_differences,
    imputed_shares,
)
from workbench.prepare.recipe import FittedRecipe, Recipe, recipe_for
from workbench.prepare.refusal import PrepareRefusal
from workbench.prepare.runs import Runs, RunTable, run_table
from workbench.prepare.tables import MeasuredTable, PreparedTable, StepAccount

__all__ = [
    "DriftEffect",
    "Explanation",
    "FittedRecipe",
    "GroupDifference",
    "MeasuredTable",
    "PrepareRefusal",
    "PreparedSize",
    "PreparedTable",
    "Recipe",
    "RunTable",
    "Runs",
    "StepAccount",
    "account_page",
    "account_table",
    "drift_effect",
    "explain_lines",
    "group_account",
    "group_cautions",
    "group_differences",
    "imputed_shares",
    "recipe_for",
    "run_table",
]
