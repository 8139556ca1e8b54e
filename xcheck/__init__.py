"""xcheck: checks the input and output impedance of op-amp feedback stages in SPICE decks.

    import xcheck
    outcome = xcheck.review("netlists/well_level.cir")
    outcome.table()                      # a pandas DataFrame, one row a port and frequency
    outcome.decks[0].evidence.answers    # ports with all their numbers

The names below are the public interface; they are loaded when first used, so that importing costs nothing.
"""

from typing import TYPE_CHECKING, Any

from xcheck.version import __version__

if TYPE_CHECKING:
    from xcheck.finding import Finding
    from xcheck.options import Options
    from xcheck.reviewed import Outcome
    from xcheck.reviewing import review

__all__ = ["Finding", "Options", "Outcome", "__version__", "review"]

_HOME = {
    "Finding": "xcheck.finding",
    "Options": "xcheck.options",
    "Outcome": "xcheck.reviewed",
    "review": "xcheck.reviewing",
}


def __getattr__(name: str) -> Any:
    if name not in _HOME:
        raise AttributeError(f"module 'xcheck' has no attribute {name!r}")
    from importlib import import_module

    return getattr(import_module(_HOME[name]), name)
