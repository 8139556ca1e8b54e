"""The return ratio against n-port algebra: amplifier and feedback network as scikit-rf networks, joined in
parallel (shunt-shunt) or in series (series-series), and closed by the load.

Two-ports in parallel add their admittances, in series their impedances, in a loaded port
Zin = z11 - z12 z21 / (z22 + ZL); any text on two-ports.
"""

import numpy as np
import pytest
import skrf
from hypothesis import given, settings
from hypothesis import strategies as st
from partitions_by_hand import PortAt, amplifier, partition

from xcheck.circuit.arrays import Complex
from xcheck.impedance.return_ratio import return_ratios
from xcheck.impedance.types import ReturnRatio

FREQUENCY = np.array([1e2, 1e5, 1e7])

ohms = st.floats(2, 6).map(lambda power: round(10**power, 3))


def two_port(z: Complex) -> skrf.Network:
    """A network from its impedance matrix, (F, 2, 2)."""
    return skrf.Network(frequency=skrf.Frequency.from_f(FREQUENCY, unit="hz"), z=z, z0=50)


def tee(a: float, shunt: Complex, b: float) -> Complex:
    """Impedance matrix of a T: a and b in series with the ports, shunt to the common terminal."""
    z = np.empty((len(FREQUENCY), 2, 2), dtype=np.complex128)
    z[:, 0, 0], z[:, 1, 1] = a + shunt, b + shunt
    z[:, 0, 1] = z[:, 1, 0] = shunt
    return z


def gain_stage(rin: float, gain: float, ro: float) -> Complex:
    """Impedance matrix of Rin and, behind Ro, a source of -gain times the input voltage."""
    z = np.zeros((len(FREQUENCY), 2, 2), dtype=np.complex128)
    z[:, 0, 0], z[:, 1, 0], z[:, 1, 1] = rin, -gain * rin, ro
    return z


def loaded(network: skrf.Network, load: float) -> Complex:
    """Input impedance with a load on the second port, from the scattering parameters."""
    z0 = 50.0
    gamma = (load - z0) / (load + z0)
    s = network.s
    seen = s[:, 0, 0] + s[:, 0, 1] * s[:, 1, 0] * gamma / (1 - s[:, 1, 1] * gamma)
    impedance: Complex = z0 * (1 + seen) / (1 - seen)
    return impedance


@settings(max_examples=30, deadline=None)
@given(rin=ohms, ro=ohms, ra=ohms, rb=ohms, load=ohms, gain=st.floats(0.5, 1e4))
def test_shunt_shunt_feedback(rin: float, ro: float, ra: float, rb: float, load: float, gain: float) -> None:
    s = 2j * np.pi * FREQUENCY
    both = skrf.network.z2y(gain_stage(rin, gain, ro)) + skrf.network.z2y(tee(ra, 1 / (s * 1e-9), rb))
    expected = loaded(two_port(skrf.network.y2z(both)), load)
    text = f"""
        v1 b 0
        rin b 0 {rin}
        e1 y 0 0 b {gain}
        ro y out {ro}
        ra b t {ra}
        ct t 0 1e-9
        rb t out {rb}
        rl out 0 {load}
    """
    ports = [PortAt("b", "input", ("rin", "e1", "ra"))]
    parted = partition(text, {"u": ([amplifier("e1", ("0", "b", "out"))], ports)}, ["b"])
    answer = return_ratios(parted, FREQUENCY)["u.b"]
    assert isinstance(answer, ReturnRatio)
    assert answer.impedance == pytest.approx(expected, rel=1e-7)  # scattering loses digits far from 50 ohm


@settings(max_examples=30, deadline=None)
@given(rin=ohms, ro=ohms, re=ohms, load=ohms, gain=st.floats(0.5, 1e4))
def test_series_series_feedback(rin: float, ro: float, re: float, load: float, gain: float) -> None:
    s = 2j * np.pi * FREQUENCY
    common = 1 / (1 / re + s * 1e-9)
    both = gain_stage(rin, gain, ro) + tee(0.0, common, 0.0)
    expected = loaded(two_port(both), load)
    text = f"""
        v1 b 0
        rin b e {rin}
        e1 y e e b {gain}
        ro y out {ro}
        re e 0 {re}
        ce e 0 1e-9
        rl out 0 {load}
    """
    ports = [PortAt("b", "input", ("rin", "e1"))]
    parted = partition(text, {"u": ([amplifier("e1", ("e", "b", "out"))], ports)}, ["b"])
    answer = return_ratios(parted, FREQUENCY)["u.b"]
    assert isinstance(answer, ReturnRatio)
    assert answer.impedance == pytest.approx(expected, rel=1e-7)
