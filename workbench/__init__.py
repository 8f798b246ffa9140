"""Omics layers of one study, from delivered tables to a tested cross-layer network.

``Project`` is the public face; the numerical estimators live in :mod:`workbench.engine`.
"""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from workbench.project import Project

__version__ = "0.1.0"
__all__ = ["Project", "__version__"]


def __getattr__(name: str) -> Any:
    """Load ``Project`` when it is first asked for: the command line's help needs no numerics."""
    if name == "Project":
        from workbench.project import Project

        return Project
    raise AttributeError(f"module 'workbench' has no attribute {name!r}")
