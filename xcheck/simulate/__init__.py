"""ngspice in a worker process: the deck with cuts, run and measured."""

from xcheck.simulate.engine import find_engine
from xcheck.simulate.measure import measure

__all__ = ["find_engine", "measure"]
