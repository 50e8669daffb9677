"""Cross-section tables for model atmospheres from molecular line lists, with the proof inside.

The public names are loaded when they are first used, so that reading a table loads neither numba nor hapi.
"""

from __future__ import annotations

import importlib
from typing import TYPE_CHECKING, Any

from opacity.errors import (
    AssumptionWarning,
    InputError,
    LineListError,
    MoleculeError,
    OpacityError,
    RecipeError,
    ResourceError,
    TableError,
)
from opacity.provenance import VERSION

__version__ = VERSION

if TYPE_CHECKING:
    from opacity.api import build, cross_section, exact_cross_section, plan
    from opacity.arguments import DefaultWidth
    from opacity.check.comparison import Comparison
    from opacity.check.explain import Explanation
    from opacity.chi_factors import CHI_FACTORS
    from opacity.k_coefficient.public import k_coefficients, mix_k
    from opacity.line_list.model import LineList
    from opacity.line_list.read import read_lines
    from opacity.pipeline.compare import compare
    from opacity.pipeline.explain import explain
    from opacity.pipeline.report import report
    from opacity.recipe.load import load_recipe
    from opacity.recipe.model import Cutoff, CutoffStep
    from opacity.tables.k_read import KCoefficientTable
    from opacity.tables.open import open_table
    from opacity.tables.read import Table

_HOMES = {
    "build": "opacity.api",
    "compare": "opacity.pipeline.compare",
    "cross_section": "opacity.api",
    "exact_cross_section": "opacity.api",
    "explain": "opacity.pipeline.explain",
    "k_coefficients": "opacity.k_coefficient.public",
    "mix_k": "opacity.k_coefficient.public",
    "plan": "opacity.api",
    "report": "opacity.pipeline.report",
    "read_lines": "opacity.line_list.read",
    "LineList": "opacity.line_list.model",
    "Comparison": "opacity.check.comparison",
    "Explanation": "opacity.check.explain",
    "DefaultWidth": "opacity.arguments",
    "CHI_FACTORS": "opacity.chi_factors",
    "load_recipe": "opacity.recipe.load",
    "Cutoff": "opacity.recipe.model",
    "CutoffStep": "opacity.recipe.model",
    "open_table": "opacity.tables.open",
    "Table": "opacity.tables.read",
    "KCoefficientTable": "opacity.tables.k_read",
}

__all__ = [
    "CHI_FACTORS",
    "AssumptionWarning",
    "Comparison",
    "Cutoff",
    "CutoffStep",
    "DefaultWidth",
    "Explanation",
    "InputError",
    "KCoefficientTable",
    "LineList",
    "LineListError",
    "MoleculeError",
    "OpacityError",
    "RecipeError",
    "ResourceError",
    "Table",
    "TableError",
    "__version__",
    "build",
    "compare",
    "cross_section",
    "exact_cross_section",
    "explain",
    "k_coefficients",
    "load_recipe",
    "mix_k",
    "open_table",
    "plan",
    "read_lines",
    "report",
]


def __getattr__(name: str) -> Any:
    if name not in _HOMES:
        raise AttributeError(f"module {__name__!r} has no attribute {name!r}")
    return getattr(importlib.import_module(_HOMES[name]), name)


def __dir__() -> list[str]:
    return sorted(__all__)
