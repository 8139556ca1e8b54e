"""Linear models against the same algebra done otherwise: by hand, and by exact symbols."""

import numpy as np
import pytest
import sympy
from gauge import amplifiers_of, one_amplifier

from xcheck.stages.types import Amplifier, AmplifierResponse

STAGE = "vin in 0 ac 1\nr1 in n 10k\nr2 n out 100k\nrl out 0 10k\nvcc vcc 0 12\nvee vee 0 -12\n"
F = np.logspace(-2, 9, 45)
S = 2j * np.pi * F


def model(body: str, nodes: str = "0 n vcc vee out", around: str = "") -> Amplifier:
    return one_amplifier(f".subckt part p n vcc vee o\n{body}\n.ends\n{STAGE}{around}xu1 {nodes} part\n")


def response(amplifier: Amplifier) -> AmplifierResponse:
    assert amplifier.open_loop.model is not None
    return amplifier.open_loop.model.response(F)


def value(amplifier: Amplifier, name: str) -> object:
    assert amplifier.open_loop.values[name].origin == "deck"
    return amplifier.open_loop.values[name].value


TWO_POLES = (
    "rid p n 2meg\ncid p n 1.4p\nrcp p 0 1g\nrcn n 0 2g\nccp p 0 3p\nccn n 0 5p\ng1 0 a p n 1m\nra a 0 200meg\n"
    "ca a 0 100p\ne1 b 0 a 0 1\nrb b c 1k\ncb c 0 30p\ne2 d 0 c 0 1\nro d o 75\nrq vcc vee 10k"
)


def test_values_of_a_two_pole_model_by_hand() -> None:
    found = model(TWO_POLES)
    assert value(found, "gain") == pytest.approx(2e5, rel=1e-12)
    poles = (1 / (2 * np.pi * 200e6 * 100e-12), 1 / (2 * np.pi * 1e3 * 30e-12))
    assert value(found, "poles_hz") == pytest.approx(poles, rel=1e-9)
    assert value(found, "gain_bandwidth_hz") == pytest.approx(2e5 * poles[0], rel=1e-9)
    assert value(found, "input_resistance_ohm") == pytest.approx(2e6, rel=1e-9)
    assert value(found, "input_capacitance_f") == pytest.approx(1.4e-12, rel=1e-9)
    assert value(found, "common_mode_resistance_ohm") == pytest.approx(2 / (1 / 1e9 + 1 / 2e9), rel=1e-9)
    assert value(found, "common_mode_capacitance_f") == pytest.approx(4e-12, rel=1e-9)
    assert value(found, "output_resistance_ohm") == pytest.approx(75, rel=1e-12)
    assert found.open_loop.exact
    assert found.open_loop.reason == ""


def test_response_of_a_two_pole_model_by_hand() -> None:
    found = response(model(TWO_POLES))
    gain = 2e5 / ((1 + S * 200e6 * 100e-12) * (1 + S * 1e3 * 30e-12))
    for name, expected in {
        "gain_plus": gain, "gain_minus": -gain, "y_differential": 1 / 2e6 + S * 1.4e-12, "y_plus": 1e-9 + S * 3e-12,
        "y_minus": 0.5e-9 + S * 5e-12, "z_output": np.full(F.shape, 75.0),
    }.items():  # fmt: skip
        assert getattr(found, name).shape == F.shape
        np.testing.assert_allclose(getattr(found, name), expected, rtol=1e-9, err_msg=name)


def test_the_ideal_parts_are_said_to_be_infinite_or_zero() -> None:
    found = model("e1 o 0 p n 1e5")
    assert value(found, "input_resistance_ohm") is None
    assert value(found, "common_mode_resistance_ohm") is None
    assert value(found, "gain_bandwidth_hz") is None
    assert value(found, "poles_hz") == ()
    assert value(found, "output_resistance_ohm") == 0
    assert value(found, "input_capacitance_f") == 0


def test_an_integrators_gain_is_infinite_and_its_bandwidth_is_not() -> None:
    found = model("g1 0 a p n 1m\nca a 0 100p\ne1 b 0 a 0 1\nro b o 50")
    assert value(found, "gain") is None
    assert value(found, "poles_hz") == (0.0,)
    assert value(found, "gain_bandwidth_hz") == pytest.approx(1e-3 / (2 * np.pi * 100e-12), rel=1e-9)


def test_poles_that_the_gain_does_not_see_are_left_out() -> None:
    network = (
        "rz p y 1k\ncz y n 10p\nrs vcc t 1k\ncs t vee 1u\ncl b 0 1n\n"  # at the inputs, at the supplies, on a source
    )
    found = model(network + "e1 a 0 p n 1e5\nr1 a m 1k\nc1 m 0 1u\ne2 b 0 m 0 1\nro b o 50")
    assert value(found, "poles_hz") == pytest.approx((1 / (2 * np.pi * 1e-3),), rel=1e-9)
    assert value(found, "input_resistance_ohm") is None
    assert value(found, "input_capacitance_f") == pytest.approx(10e-12, rel=1e-6)


def test_complex_poles_come_by_magnitude() -> None:
    found = model(
        "e1 a 0 p n 1e5\nr1 a b 10\nl1 b c 1u\nc1 c 0 1n\ne2 d 0 c 0 1\nr2 d e 1k\nc2 e 0 1u\ne3 f 0 e 0 1\nro f o 50"
    )
    resonance = 1 / (2 * np.pi * np.sqrt(1e-6 * 1e-9))
    assert value(found, "poles_hz") == pytest.approx((1 / (2 * np.pi * 1e-3), resonance, resonance), rel=1e-9)


def test_coupled_inductors_against_the_two_natural_frequencies_by_hand() -> None:
    # two equal tanks without loss, coupled by k, resonate at 1/sqrt(L C (1 +- k))
    tanks = "g1 0 a p n 1\nl1 a 0 1u\nc1 a 0 1n\nl2 b 0 1u\nc2 b 0 1n\nk1 l1 l2 0.2\nra a 0 1g\nrb b 0 1g\n"
    found = model(tanks + "ex c 0 p n 1e5\nrx c d 1k\ncx d 0 1u\ney e 0 poly(2) d 0 b 0 0 1 1\nro e o 50")
    low, high = (1 / (2 * np.pi * np.sqrt(1e-15 * (1 + k))) for k in (0.2, -0.2))
    assert value(found, "poles_hz") == pytest.approx((159.154943, low, low, high, high), rel=1e-6)


def test_common_mode_gain_shows_as_unequal_gains() -> None:
    found = response(model("e1 x 0 poly(3) p n p 0 n 0 0 1e5 5 3\nro x o 50"))
    np.testing.assert_allclose(found.gain_plus, 1e5 + 5, rtol=1e-12)
    np.testing.assert_allclose(found.gain_minus, -1e5 + 3, rtol=1e-12)


@pytest.mark.parametrize(
    ("what", "body", "reason"),
    [
        ("stray capacitor from output to input", "rid p n 1meg\ne1 x 0 p n 1e5\nro x o 50\ncs o n 0.1p", "acts back"),
        ("input current that follows the output", "g2 p 0 o 0 1u\ne1 x 0 p n 1e5\nro x o 50", "acts back"),
        ("input pair that is not reciprocal", "g2 n 0 p 0 1u\ne1 x 0 p n 1e5\nro x o 50", "not reciprocal"),
    ],
)
def test_what_three_pins_cannot_say_is_said(what: str, body: str, reason: str) -> None:
    found = model(body + "\nrq vcc vee 1k").open_loop
    assert not found.exact, what
    assert reason in found.reason


SUPPLY_FED = "rid p n 1meg\ne1 x 0 p n 1e5\nro x o 50\nrl o vee 100k\nrcm p vcc 1g"


def test_supplies_at_ac_ground_cost_nothing_and_soft_ones_are_said() -> None:
    assert model(SUPPLY_FED).open_loop.exact
    soft = model(SUPPLY_FED, nodes="0 n vcc soft out", around="rs soft vee 10\n").open_loop
    assert not soft.exact
    assert soft.reason == "its pin `vee` has a part in its signal, and node `soft` is not at AC ground"
    quiet = model(
        "rid p n 1meg\ne1 x 0 p n 1e5\nro x o 50\nrq vcc vee 1k", nodes="0 n vcc soft out", around="rs soft vee 10\n"
    )
    assert quiet.open_loop.exact


def symbols_of(amplifier: Amplifier, at: complex) -> dict[str, complex]:
    """The response by exact rational arithmetic at one complex frequency: nodal equations with the inputs held."""
    assert amplifier.open_loop.model is not None
    elements = amplifier.open_loop.model.bench.elements  # type: ignore[attr-defined]
    s = sympy.nsimplify(at.real, rational=True) + sympy.I * sympy.nsimplify(at.imag, rational=True)
    nodes = sorted({n for e in elements for n in e.nodes} - {"0", "p", "n", "vcc", "vee"})
    v = {n: sympy.Symbol(f"v_{n}") for n in nodes} | dict.fromkeys(("0", "vcc", "vee"), sympy.Integer(0))
    v |= {"p": sympy.Symbol("vp"), "n": sympy.Symbol("vn")}
    current: dict[str, sympy.Expr] = dict.fromkeys([*nodes, "0", "p", "n", "vcc", "vee"], sympy.Integer(0))
    equations, unknowns = [], [v[n] for n in nodes]
    for e in elements:
        a, b = e.nodes
        if hasattr(e, "value"):
            x = sympy.nsimplify(e.value, rational=True)
            i = (v[a] - v[b]) * (1 / x if e.kind == "r" else s * x)
        else:
            out = sum(sympy.nsimplify(t.gain, rational=True) * (v[t.positive] - v[t.negative]) for t in e.terms)
            i = out if e.kind == "g" else sympy.Symbol(f"i_{e.name}")
            if e.kind == "e":
                unknowns.append(i)
                equations.append(v[a] - v[b] - out)
        current[a] += i
        current[b] -= i
    forced = sympy.Symbol("io")
    equations += [current[n] - (forced if n == "o" else 0) for n in nodes]
    (solution,) = sympy.linsolve(equations, unknowns)
    known = dict(zip(unknowns, solution, strict=True))

    def part(expression: sympy.Expr, **inputs: int) -> complex:
        chosen = {v["p"]: 0, v["n"]: 0, forced: 0} | {
            {"p": v["p"], "n": v["n"], "io": forced}[k]: x for k, x in inputs.items()
        }
        return complex(sympy.N(expression.subs(known).subs(chosen), 30))

    across = -part(current["p"], n=1)
    return {
        "gain_plus": part(v["o"], p=1), "gain_minus": part(v["o"], n=1), "y_differential": across,
        "y_plus": part(current["p"], p=1) - across, "y_minus": part(current["n"], n=1) - across,
        "z_output": part(v["o"], io=1),
    }  # fmt: skip


@pytest.mark.parametrize(
    "body",
    [
        TWO_POLES,
        "ri p x 300\nci x y 4p\nrj y n 300\nrc x 0 1g\ng1 0 a x y 2m\nra a 0 80meg\nca a 0 47p\nrz a z 1k\ncz z 0 1n\n"
        "e1 b a a 0 1\nro b o 33\nco o 0 10p",
        "g1 a 0 p n 200u\nra a 0 100k\ng2 0 o a 0 -0.1\nro o 0 20k\ncc a o 30p\ng3 a 0 poly(2) p 0 n 0 0 1n 1n",
    ],
)  # fmt: skip
@pytest.mark.parametrize("hertz", [1e-2, 1e3, 1e7])
def test_response_against_exact_arithmetic(body: str, hertz: float) -> None:
    amplifier = model(body)
    assert amplifier.open_loop.model is not None
    found = amplifier.open_loop.model.response(np.array([hertz]))
    exact = symbols_of(amplifier, 2j * np.pi * hertz)
    for name, expected in exact.items():
        assert getattr(found, name)[0] == pytest.approx(expected, rel=1e-9, abs=1e-15), name


def test_alike_instances_share_one_model() -> None:
    many = "".join(f"xu{k} o{k} o{k + 1} vcc vee o{k + 1} part\n" for k in range(50))
    found = amplifiers_of(
        f".subckt part p n vcc vee o\n{TWO_POLES}\n.ends\nvcc vcc 0 1\nvee vee 0 -1\nv1 o0 0 ac 1\n{many}"
    )
    assert len(found) == 50
    assert len({id(a.open_loop) for a in found}) == 1
    parameters = ".subckt part p n o params: a=1e5\ne1 x 0 p n {a}\nro x o 50\n.ends\nv1 o0 0 ac 1\n"
    two = amplifiers_of(parameters + "xu1 o0 o1 o1 part\nxu2 o1 o2 o2 part a=2e5\nxu3 o2 o3 o3 part\n")
    assert [a.open_loop.values["gain"].value for a in two] == pytest.approx([1e5, 2e5, 1e5])
    assert two[0].open_loop is two[2].open_loop
