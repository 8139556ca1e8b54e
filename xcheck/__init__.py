"""xcheck: impedance checks of op-amp feedback stages in SPICE decks."""

from xcheck.version import __version__

__all__ = ["__version__"]
