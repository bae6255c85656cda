"""Wellshed: water-table maps and capture zones from water levels, by analytic elements.

The public names load on first use, so that ``import wellshed`` and ``wellshed --help`` stay quick.
"""

from importlib import import_module
from typing import Any

__version__ = "0.1.0"

_HOME = {
    "Aquifer": ".elements.aquifer",
    "RegionalFlow": ".elements.regional_flow",
    "PumpingWell": ".elements.well",
    "Stream": ".elements.stream",
    "LakeEdge": ".elements.lake",
    "Outline": ".elements.outline",
    "RechargeArea": ".elements.recharge",
    "FlowField": ".elements.flow_field",
    "solve": ".solver.boundary",
    "trace": ".tracing.pathlines",
    "load": ".scenarios.reading",
    "answer": ".scenarios.answering",
}
__all__ = list(_HOME)


def __getattr__(name: str) -> Any:
    """Load a public name from the module it lives in."""
    if name not in _HOME:
        raise AttributeError(f"module 'wellshed' has no attribute {name!r}")
    return getattr(import_module(_HOME[name], __name__), name)
