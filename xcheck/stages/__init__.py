"""Circuit to amplifiers and stages."""

from xcheck.stages.amplifiers import find_amplifiers
from xcheck.stages.splitting import split

__all__ = ["find_amplifiers", "split"]
