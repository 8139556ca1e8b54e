"""Questions that several topologies ask of a sketch."""

from xcheck.topologies.branches import Branch
from xcheck.topologies.sketch import Sketch, is_capacitive

LEAST_SHARE = 0.1
"""A reference counts as one of several voltages that are added where it has a tenth of a signal's weight or more;
with less it sets a bias."""


def only_one_n(s: Sketch) -> bool:
    """Whether one signal alone reaches the inverting input and none the other; a reference there does not count."""
    return not s.signal_p and len(s.signal_n) == 1 and not s.reference_n and not s.current_n


def current_alone(s: Sketch) -> bool:
    """Whether a current into the inverting input is the only signal."""
    return s.current_n and not s.signal_n and not s.signal_p


def single(s: Sketch) -> Branch:
    """The branch of the one signal at the inverting input."""
    return next(iter(s.signal_n.values()))


def capacitive_feedback(s: Sketch) -> bool:
    """Whether the feedback behaves as a capacitor at mid band."""
    return s.feedback is not None and is_capacitive(s.feedback)


def one_capacitive_source(s: Sketch) -> bool:
    """Whether one capacitive branch alone leads to the inverting input."""
    return only_one_n(s) and is_capacitive(single(s))


def added_at_p(s: Sketch) -> int:
    """How many voltages are added at the non-inverting input."""
    if s.direct_p:
        return 1
    weights = [abs(branch.admittance[0]) for branch in s.signal_p.values()]
    coupled = any(branch.blocking for branch in s.signal_p.values())
    added = [b for b in s.reference_p.values() if abs(b.admittance[0]) >= LEAST_SHARE * max(weights, default=0.0)]
    return len(s.signal_p) + (0 if coupled else len(added))
