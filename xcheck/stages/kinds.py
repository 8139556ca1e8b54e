"""What kind of amplifier a linear model is, told by what its pins do at DC.

Current feedback: the inverting input is the output of a buffer that follows the non-inverting one, so the current into
it is set by both voltages while the non-inverting input takes none. Transconductance: the output is a current, of a
transconductance that a bias sets (below 0.1 S), into a resistance that no load on a board comes near.
"""

from xcheck.circuit.elements import GROUND
from xcheck.stages.model import LinearModel
from xcheck.stages.types import OpenLoop

LOW_OHM = 1e3
"""An inverting input of a current-feedback amplifier has less, mostly some tens of ohms (common practice)."""
FOLLOWS = 0.2
HIGH_OHM = 1e6
MOST_SIEMENS = 0.1


def kind_of(loop: OpenLoop) -> str:
    """The kind of an amplifier; without a linear model it is taken for one of voltage feedback."""
    model = loop.model
    if not isinstance(model, LinearModel):
        return "voltage-feedback"
    if GROUND not in (model.plus, model.minus) and _feeds_back_current(model):
        return "current-feedback"
    gain, ohm = loop.values["gain"].value, loop.values["output_resistance_ohm"].value
    if isinstance(gain, float) and isinstance(ohm, float) and ohm > HIGH_OHM and gain / ohm < MOST_SIEMENS:
        return "transconductance"
    return "voltage-feedback"


def _feeds_back_current(model: LinearModel) -> bool:
    into = model.into_pins()
    own, by_other, other = into["minus", "minus"], into["minus", "plus"], into["plus", "plus"]
    return own > 1 / LOW_OHM and abs(by_other + own) < FOLLOWS * own and abs(other) < FOLLOWS * own
