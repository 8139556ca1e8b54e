"""Questions that several topologies ask of a sketch."""

from xcheck.topologies.network import Joined
from xcheck.topologies.sketch import Sketch, is_capacitive


def inputs(s: Sketch) -> int:
    """How many voltages reach the amplifier's inputs through branches."""
    return len(s.signal_n) + len(s.signal_p) + len(s.reference_n)


def only_one_n(s: Sketch) -> bool:
    """Whether one signal alone reaches the inverting input and none the other; a reference there does not count."""
    return s.positive is None and not s.signal_p and len(s.signal_n) == 1 and not s.reference_n and not s.current_n


def single(s: Sketch) -> Joined:
    """The branch of the one signal at the inverting input."""
    return next(iter(s.signal_n.values()))


def capacitive_feedback(s: Sketch) -> bool:
    """Whether the feedback behaves as a capacitor at mid band."""
    return s.feedback is not None and is_capacitive(s.feedback)


def one_capacitive_source(s: Sketch) -> bool:
    """Whether one capacitive branch alone leads to the inverting input."""
    return only_one_n(s) and is_capacitive(single(s))
