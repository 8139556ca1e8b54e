"""Values of R, C and L that a model, a size, a temperature or a factor has a part in.

The formulas are those of the ngspice manual's chapter on elementary devices, each held against ngspice 39 in the tests.
"""

import math
from collections.abc import Callable

from xcheck.circuit.elements import DeviceModel

NOMINAL_CELSIUS = 27.0
MISSING_OHM = 1e-3
"""What ngspice 39 takes for a resistor without a value, or of zero ohm."""
DEFAULT_WIDTH = 1e-5
Get = Callable[[str], float | None]
"""A parameter of the element itself, None where it is not written."""


def value_by_model(kind: str, get: Get, model: DeviceModel) -> float | None:
    """The value of an R (ohm), C (farad) or L (henry) without a number of its own, before temperature; None where
    the model does not give it."""
    if kind == "l":
        return model.get("ind") or None
    width, length = get("w") or model.get("defw", DEFAULT_WIDTH), get("l") or model.get("defl")
    edges = 2 if kind == "r" else 1  # at both ends of a resistor, once for a capacitor (seen on ngspice 39)
    width, length = width - edges * model.get("narrow"), length - edges * model.get("short")
    if kind == "r":
        sheet = model.get("rsh")
        if sheet and get("l"):
            return sheet * length / width if length > 0 and width > 0 else None
        return model.get("r") or model.get("resistance") or MISSING_OHM
    if get("l") and (model.get("cj") or model.get("cjsw")):
        return model.get("cj") * width * length + model.get("cjsw") * 2 * (width + length)
    return model.get("cap") or None


def factor(kind: str, get: Get, model: DeviceModel | None, celsius: float, nominal: float) -> float:
    """What a value is multiplied by: temperature coefficients (the element's own, else its model's), `scale`, `m`.
    celsius, nominal: the deck's temperature and the one that values hold at."""
    values = {} if model is None else dict(model.values)

    def either(key: str) -> float:
        own = get(key)
        return values.get(key, 0.0) if own is None else own

    own_celsius = get("temp")
    here = celsius + (get("dtemp") or 0.0) if own_celsius is None else own_celsius
    delta = here - values.get("tnom", nominal)
    if kind == "r" and either("tce"):
        change = math.pow(1.01, either("tce") * delta)
    else:
        change = 1.0 + either("tc1") * delta + either("tc2") * delta**2
    many = get("m") or 1.0
    return change * (get("scale") or 1.0) * (many if kind == "c" else 1.0 / many)
