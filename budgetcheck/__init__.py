"""Is a household's planned consumption affordable over its whole life? See `assess`."""

from typing import TYPE_CHECKING, Any

from .version import VERSION as __version__

if TYPE_CHECKING:
    from .assessment import Assessment
    from .findings import BudgetcheckError, Finding, InputRefused, NotAffordable
    from .pipeline import assess

__all__ = ["Assessment", "BudgetcheckError", "Finding", "InputRefused", "NotAffordable", "__version__", "assess"]

_HOMES = {"Assessment": "assessment", "assess": "pipeline"}


def __getattr__(name: str) -> Any:
    """Import on first use: `budgetcheck --version` should not load numpy."""
    if name not in __all__:
        raise AttributeError(f"module 'budgetcheck' has no attribute {name!r}")
    from importlib import import_module

    return getattr(import_module(f"budgetcheck.{_HOMES.get(name, 'findings')}"), name)
