"""Closed forms written out: in places, and with the numbers of one frequency put in."""

from typing import Any

import numpy as np

from xcheck.circuit.arrays import Complex
from xcheck.notation import engineering
from xcheck.stages.types import AmplifierResponse
from xcheck.topologies.forms import Places


def written(
    side: str, a: AmplifierResponse, x: Places, links: Any, value: Complex, index: int, hertz: float
) -> tuple[str, str]:
    """The formula with absent places dropped, and the same with magnitudes at one frequency (Hz) put in; places that
    are not resistive carry their angle."""
    names = links.names or {}

    def z(admittance: Complex) -> complex:
        y = complex(admittance[index])
        return complex(0.0) if np.isinf(y) else complex(np.inf) if y == 0 else 1.0 / y

    zf, zg, zp, z1 = z(x.yf), z(x.yg), z(x.yp), z(x.y1)
    zid, zo = z(a.y_differential + x.y_across), complex(a.z_output[index])
    zic_n, zic_p = z(a.y_minus), z(a.y_plus)
    gain = -complex(a.gain_minus[index])
    load = z(x.y_load + x.y_out)
    loaded = not np.isinf(load) and zo != 0
    prime = "'" if loaded else ""
    factor = 1.0 / (1.0 + zo / load) if loaded else 1.0
    f_text, f_number = _sum([("Zf", zf), (f"Zo{prime}", zo * factor)])
    pair = _pair(zid, zp, zic_p)
    common = [("1/Zg", zg), ("1/Zic", zic_n), pair] if side != "p" else [("1/Zp", zp), ("1/Zic", zic_p)]
    present = [(t, v) for t, v in common if not np.isinf(v)]
    k = "k " if side != "p" and abs(zp) > 0 and not np.isinf(zid) else ""
    if side == "n":
        bracket = [t for t, _ in present] + [f"(1 + {k}A{prime})/({f_text})"]
        figures = [_over(v, t) for t, v in present] + [f"(1 + {_plain(gain * factor)})/({f_number})"]
        body, numbers = f"1/({' + '.join(bracket)})", f"1/({' + '.join(figures)})"
    elif side == "p":
        bracket = [t for t, _ in present] + ([] if np.isinf(zid) else ["(1 - h)/Zid"])
        figures = [_over(v, t) for t, v in present] + ([] if np.isinf(zid) else [f"(1 - h)/{_ohm(zid)}"])
        body = f"1/({' + '.join(bracket)})" if bracket else "infinite"
        numbers = f"1/({' + '.join(figures)})" if figures else "infinite"
        if not np.isinf(zid):
            body += f", h = (W/Zid + A{prime})/(W/Zid + W/Zn + 1 + A{prime}), W = {f_text}, 1/Zn = 1/Zg + 1/Zic"
    else:
        b = "b" if (zf != 0) else ""
        body = f"1/((1 + {k}A{' b' if b else ''})/Zo + 1/(Zf + Zn))" if b else f"Zo/(1 + {k}A)"
        yn = sum((1.0 / v for _, v in present if v != 0), 0j)
        share = 1.0 / (1.0 + zf * yn)
        numbers = (
            f"1/((1 + {_plain(gain)} * {_plain(share)})/{_ohm(zo)} + 1/({_ohm(zf)} + {_ohm(1 / yn if yn else np.inf)}))"
            if b else f"{_ohm(zo)}/(1 + {_plain(gain)})"
        )  # fmt: skip
        if b:
            body += ", b = Zn/(Zn + Zf), 1/Zn = " + (" + ".join(t for t, _ in present) or "0")
    if side != "output" and abs(z1) > 0:
        body, numbers = f"Z1 + {body}", f"{_ohm(z1)} + {numbers}"
    legend = [f"Z{key} = {text}" for key, text in names.items() if text and f"Z{key}" in body]
    quoted = f"{numbers} = {_ohm(complex(value[index]))} at {engineering(hertz, 'Hz')}"
    return body + (f"; {', '.join(legend)}" if legend else ""), quoted


def _pair(zid: complex, zp: complex, zic: complex) -> tuple[str, complex]:
    """1/(Zid + Zp||Zic) with what is absent left out."""
    if zp == 0:
        return "1/Zid", zid
    y = (0j if np.isinf(zp) else 1.0 / zp) + (0j if np.isinf(zic) else 1.0 / zic)
    return "1/(Zid + Zp||Zic)", zid + (1.0 / y if y else complex(np.inf))


def _sum(terms: list[tuple[str, complex]]) -> tuple[str, str]:
    present = [(t, v) for t, v in terms if v != 0] or terms[-1:]
    return " + ".join(t for t, _ in present), " + ".join(_ohm(v) for _, v in present)


def _over(value: complex, text: str) -> str:
    return f"1/({_ohm(value)})" if text else ""


def _ohm(value: complex) -> str:
    """Magnitude with its angle where that is worth saying."""
    if np.isinf(value):
        return "inf"
    size = engineering(abs(value), "Ohm")
    degrees = float(np.degrees(np.angle(value))) if value else 0.0
    return size if abs(degrees) < 0.5 else f"{size} /{degrees:.0f} deg"


def _plain(value: complex) -> str:
    degrees = float(np.degrees(np.angle(value))) if value else 0.0
    return f"{abs(value):.4g}" if abs(degrees) < 0.5 else f"{abs(value):.4g} /{degrees:.0f} deg"
