"""nodal: the transfer function of a voltage-measuring chain, from a text description of it.

`load` and `loads` read a design; see `nodal.design` for what can be asked of it. The public names are
imported on first use, so that importing the package costs nothing.
"""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from nodal.design import Design, load, loads
    from nodal.language.diagnostics import DesignError

__version__ = "0.1.0"
__all__ = ["Design", "DesignError", "__version__", "load", "loads"]


def __getattr__(name: str) -> Any:
    if name in ("Design", "load", "loads"):
        from nodal import design

        return getattr(design, name)
    if name == "DesignError":
        from nodal.language.diagnostics import DesignError

        return DesignError
    raise AttributeError(f"module 'nodal' has no attribute {name!r}")
