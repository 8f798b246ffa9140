"""How a feature of a network is named."""

from __future__ import annotations

Key = tuple[str, str]
"""A node: (block, feature)."""
