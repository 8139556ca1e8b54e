"""The closed forms of a one-amplifier stage with negative feedback, each written once, in places.

Node n, the inverting input, has a leg Zg to ground and the feedback Zf to the output; node p, the non-inverting input,
has Zp to ground; the port leads to one of them through Z1. Between the inputs Zid, from each to ground Zic, before the
output Zo, behind it the load ZL. All are ohm over frequency, and any may be absent, which drops its term. With the load
on the output the amplifier is one of gain A' = A ZL/(ZL + Zo) and output impedance Zo' = Zo || ZL.

With V- at node n, p follows through Zid: V+ = (1 - k) V- with k = Zid/(Zid + Zp||Zic). So a current law at n gives the
inverting side, the same at p the non-inverting side, and the one at the output with the amplifier's own input as the
test gives the output. The inverting configuration with finite gain and otherwise ideal amplifier is in Sedra and Smith,
Microelectronic Circuits (from memory); what is added to it here is superposition. Tests solve the nodal equations.

Where an amplifier answers to V+ and V- with unlike gains A+ and A- (common-mode gain), k A becomes A- - (1 - k) A+.
"""

from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np

from xcheck.circuit.arrays import Complex
from xcheck.stages.types import AmplifierResponse
from xcheck.topologies.branches import inverse
from xcheck.topologies.expression import Expression, beside, let, minus, one, over, plus, quantity, times


@dataclass(frozen=True, slots=True)
class Core:
    """The amplifier. plus, minus: A+ and A-, one and the same where they are alike; zid, zic_plus, zic_minus: None
    for infinite; zo: None for zero."""

    plus: Expression
    minus: Expression
    zid: Expression | None
    zic_plus: Expression | None
    zic_minus: Expression | None
    zo: Expression | None

    @property
    def alike(self) -> bool:
        return self.plus is self.minus


@dataclass(frozen=True, slots=True)
class Places:
    """What is around the amplifier at one port. own: from the port to its input, None where the port is that input;
    shunt: from the port to ground; leg, bias: from n and p to ground; bias_grounded: p is ground; feedback: None for
    a wire; across: between the inputs; load: behind the output. None elsewhere: not there."""

    core: Core
    own: Expression | None
    shunt: Expression | None
    leg: Expression | None
    bias: Expression | None
    bias_grounded: bool
    feedback: Expression | None
    across: Expression | None
    load: Expression | None


Form = Callable[[Places], Expression | None]
"""A closed form: ohm; None for an input that draws no current and for an output without impedance."""


def core_of(a: AmplifierResponse, at: int) -> Core:
    """The symbols of an amplifier; at: index of the frequency whose numbers are shown."""
    alike = bool(np.all(np.abs(a.gain_plus + a.gain_minus) <= 1e-12 * np.abs(a.gain_minus)))
    minus_gain = quantity("A" if alike else "A-", -a.gain_minus, at, unit="")
    plus_gain = minus_gain if alike else quantity("A+", a.gain_plus, at, unit="")

    def input_impedance(symbol: str, y: Complex) -> Expression | None:
        # beside a reciprocal pair, rounding leaves 1e-16 of the pair's admittance in the others
        absent = np.all(np.abs(y) <= (0.0 if y is a.y_differential else 1e-14) * np.abs(a.y_differential))
        return None if absent else quantity(symbol, inverse(y), at)

    same = np.allclose(a.y_plus, a.y_minus, rtol=1e-9, atol=0.0)
    plus_name, minus_name = ("Zic", "Zic") if same else ("Zicp", "Zicn")
    return Core(
        plus_gain, minus_gain,
        input_impedance("Zid", a.y_differential),
        input_impedance(plus_name, a.y_plus), input_impedance(minus_name, a.y_minus),
        quantity("Zo", a.z_output, at) if np.any(np.abs(a.z_output) > 1e-12) else None,
    )  # fmt: skip


def inverting_input(x: Places) -> Expression:
    """Zin = Z1 + 1/(1/Zg + 1/Zic + 1/(Zid + Zp||Zic) + (1 + k A')/(Zf + Zo'))"""
    x = _loaded(x)
    unity = one(x.core.minus)
    back = over(plus(unity, _gain(x)), _around(x) or unity)
    terms = [over(unity, z) for z in (x.leg, x.core.zic_minus, _through_pair(x)) if z is not None]
    return _before(x, over(unity, plus(*terms, back)))


def virtual_ground(x: Places) -> Expression:
    """The same as a parallel circuit: Zin = (Zf + Zo')/(1 + k A') || Zg || Zic || (Zid + Zp||Zic)"""
    x = _loaded(x)
    miller = over(_around(x) or one(x.core.minus), plus(one(x.core.minus), _gain(x)))
    inner = beside(miller, x.leg, x.core.zic_minus, _through_pair(x))
    return _before(x, inner or miller)


def non_inverting_input(x: Places) -> Expression | None:
    """Zin = Zp || Zic || (Zid (1 + A' b) + Zn||(Zf + Zo')), with Zn = Zg||Zic and b = Zn/(Zn + Zf + Zo'); behind Z1.
    None for an input that draws no current."""
    x = _loaded(x)
    unity = one(x.core.minus)
    zid = _zid(x)
    raised = None
    if zid is not None:
        zn = _named("Zn", beside(x.leg, x.core.zic_minus))
        around = _around(x)
        b = _divider(zn, around)
        raised = plus(times(zid, plus(unity, times(x.core.minus, b))), beside(zn, around) if around and zn else around)
        if not x.core.alike:
            raised = over(raised, minus(unity, times(minus(x.core.plus, x.core.minus), b)))
    inner = beside(x.bias, x.core.zic_plus, raised)
    if inner is None:
        return x.shunt
    return _before(x, inner)


def output(x: Places) -> Expression | None:
    """Zout = Zo/(1 + k A b) || (Zf + Zn), with Zn = Zg||Zic||(Zid + Zp||Zic) and b = Zn/(Zn + Zf). None for zero."""
    if x.core.zo is None:
        return None
    zn = _named("Zn", beside(x.leg, x.core.zic_minus, _through_pair(x)))
    b = _divider(zn, x.feedback)
    gain = _gain(x)
    lowered = over(x.core.zo, plus(one(x.core.minus), times(gain, b) if gain is not None else None))
    through = None if zn is None else plus(x.feedback, zn)
    return beside(lowered, through, x.load) or lowered


def _named(symbol: str, e: Expression | None) -> Expression | None:
    return None if e is None else let(symbol, e)


def _loaded(x: Places) -> Places:
    """With the load taken into the amplifier: A' and Zo'."""
    zo, load = x.core.zo, x.load
    if zo is None or load is None:
        return replace(x, load=None)
    share = over(load, plus(load, zo))
    minus_gain = let(f"{x.core.minus.text}'", times(x.core.minus, share), unit="")
    plus_gain = minus_gain if x.core.alike else let(f"{x.core.plus.text}'", times(x.core.plus, share), unit="")
    loaded = beside(zo, load)
    core = replace(x.core, plus=plus_gain, minus=minus_gain, zo=loaded and let("Zo'", loaded))
    return replace(x, core=core, load=None)


def _around(x: Places) -> Expression | None:
    """Zf + Zo, None where both are zero."""
    there = [z for z in (x.feedback, x.core.zo) if z is not None]
    return plus(*there) if there else None


def _zid(x: Places) -> Expression | None:
    return _named("Zd", beside(x.core.zid, x.across))


def _through_pair(x: Places) -> Expression | None:
    """Zid + Zp||Zic, what node n has to ground through the other input."""
    zid, behind = _zid(x), beside(x.bias, x.core.zic_plus)
    if zid is None or x.bias_grounded:
        return zid
    return None if behind is None else plus(zid, behind)


def _gain(x: Places) -> Expression | None:
    """k A, the gain from node n with the other input following; None for zero."""
    zid, behind = _zid(x), beside(x.bias, x.core.zic_plus)
    if zid is None or x.bias_grounded:
        return x.core.minus
    if behind is None:  # it follows wholly
        return None if x.core.alike else minus(x.core.minus, x.core.plus)
    k = let("k", over(zid, plus(zid, behind)), unit="")
    if x.core.alike:
        return times(k, x.core.minus)
    return minus(x.core.minus, times(minus(one(k), k), x.core.plus))


def _divider(zn: Expression | None, before: Expression | None) -> Expression | None:
    """b = Zn/(Zn + before), None for one."""
    if zn is None or before is None:
        return None
    return let("b", over(zn, plus(zn, before)), unit="")


def _before(x: Places, inner: Expression) -> Expression:
    """What the port has in front: Z1 in series, and its own shunt."""
    behind = inner if x.own is None else plus(x.own, inner)
    return beside(x.shunt, behind) or behind
