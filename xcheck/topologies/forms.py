"""The closed forms of a one-amplifier stage with negative feedback, in places.

Symbols, all ohm over frequency unless said: Z1 the branch from the port to the amplifier's input; Zg all else from the
inverting input to ground (other inputs with their sources, the gain leg); Zp all else from the non-inverting input
to ground; Zf the feedback; Zid between the amplifier's inputs; Zic from each input to ground; Zo, ZL output and load;
A the open-loop gain. With the load on the output, A' = A ZL/(ZL + Zo) and Zo' = Zo || ZL; with the other input's
network, k = Zid/(Zid + Zp || Zic).

Inverting side: Sedra and Smith, Microelectronic Circuits, inverting configuration with finite open-loop gain, extended
by superposition to Zid, Zic, Zo and the load. Non-inverting side: the same circuit solved for the other input.
Tests solve the nodal equations symbolically beside each.
"""

from dataclasses import dataclass

import numpy as np

from xcheck.circuit.arrays import Complex
from xcheck.stages.types import AmplifierResponse

ABSENT = 1e-18
"""Siemens: a place with less is not there (a gigaohm is 1e-9)."""


@dataclass(frozen=True)
class Places:
    """Admittances in siemens, shape (F,): y1 from port to input (inf where the port is the input itself), y_port from
    the port to ground, yg, yp, y_across (between the inputs, added to 1/Zid), yf (inf where output and inverting
    input are one node), y_out from the output to ground inside the stage, y_load outside."""

    y1: Complex
    y_port: Complex
    yg: Complex
    yp: Complex
    y_across: Complex
    yf: Complex
    y_out: Complex
    y_load: Complex


def _z(admittance: Complex) -> Complex:
    with np.errstate(divide="ignore", invalid="ignore"):
        return np.where(np.isinf(admittance), 0.0, 1.0 / admittance).astype(np.complex128)


@dataclass(frozen=True)
class Loaded:
    """The amplifier with its load: gains A'+ and A'- (A' where they are alike), Zo' and the inner terms."""

    plus: Complex
    minus: Complex
    w: Complex
    yd: Complex
    zp: Complex


def _loaded(a: AmplifierResponse, x: Places) -> Loaded:
    loading = 1.0 + a.z_output * (x.y_out + x.y_load)
    yd = a.y_differential + x.y_across
    w = _z(x.yf) + a.z_output / loading
    return Loaded(a.gain_plus / loading, -a.gain_minus / loading, w, yd, _z(x.yp + a.y_plus))


def _effective(gain_plus: Complex, gain_minus: Complex, yd: Complex, zp: Complex) -> tuple[Complex, Complex]:
    """k A and 1/(Zid + Zp || Zic): the gain from the inverting input with the other one following through Zid."""
    follows = _follows(yd, zp)
    return gain_minus - gain_plus * follows, yd * (1.0 - follows)


def _follows(yd: Complex, zp: Complex) -> Complex:
    """V+/V- where the non-inverting input is driven through Zid alone: Zp/(Zid + Zp)."""
    with np.errstate(invalid="ignore"):
        share = yd * zp / (1.0 + yd * zp)
    return np.where(np.isinf(zp), np.where(yd == 0, 0.0, 1.0), share).astype(np.complex128)


def inverting_input(a: AmplifierResponse, x: Places) -> Complex:
    """Zin = Z1 + 1/(1/Zg + 1/Zic + 1/(Zid + Zp||Zic) + (1 + k A')/(Zf + Zo')), beside what the port has to ground."""
    m = _loaded(a, x)
    gain, y_pair = _effective(m.plus, m.minus, m.yd, m.zp)
    with np.errstate(divide="ignore", invalid="ignore"):
        virtual = x.yg + a.y_minus + y_pair + (1.0 + gain) / m.w
        inner = np.where(np.isinf(virtual), 0.0, 1.0 / virtual)
    return _z(x.y_port + _z(_z(x.y1) + inner))


def non_inverting_input(a: AmplifierResponse, x: Places) -> Complex:
    """Zin = Z1 + 1/(1/Zp + 1/Zic + (1 - h)/Zid), with W = Zf + Zo', 1/Zn = 1/Zg + 1/Zic and
    h = V-/V+ = (W/Zid + A')/(W/Zid + W/Zn + 1 + A'), beside what the port has to ground."""
    m = _loaded(a, x)
    yn = x.yg + a.y_minus
    rest = (m.w * yn + 1.0 + m.minus - m.plus) / (m.w * (yn + m.yd) + 1.0 + m.minus)
    pin = x.yp + a.y_plus + rest * m.yd
    return _z(x.y_port + _z(_z(x.y1) + _z(pin)))


def output(a: AmplifierResponse, x: Places) -> Complex:
    """Zout = 1/((1 + k A b)/Zo + 1/(Zf + Zn)), with 1/Zn = 1/Zg + 1/Zic + 1/(Zid + Zp||Zic), b = Zn/(Zn + Zf)."""
    yd = a.y_differential + x.y_across
    gain, y_pair = _effective(a.gain_plus, -a.gain_minus, yd, _z(x.yp + a.y_plus))
    yn = x.yg + a.y_minus + y_pair
    zf = _z(x.yf)
    with np.errstate(divide="ignore", invalid="ignore"):
        b = 1.0 / (1.0 + zf * yn)
        through = yn * b
        y = (1.0 + gain * b) / a.z_output + through + x.y_out
    return _z(np.where(a.z_output == 0, np.inf, y).astype(np.complex128))
