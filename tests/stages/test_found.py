"""Amplifiers by evidence and directive, their exact models, and ports asked for by name."""

import numpy as np
import pytest

from xcheck.circuit.elements import Circuit
from xcheck.deck.reader import read_text
from xcheck.elaboration import elaborate
from xcheck.stages import find_amplifiers, split
from xcheck.stages.types import Amplifier, Partition

TWO_POLES = """.subckt two 3 2 7 4 6
rid 3 2 2meg
cid 3 2 1.4p
g1 0 a 3 2 1m
ra a 0 200meg
ca a 0 159.15494p
e1 b 0 a 0 1
rb b c 1k
cb c 0 31.830989p
e2 d 0 c 0 1
ro d 6 75
rq 7 4 10k
.ends
"""
STAGE = "vin in 0 ac 1\nr1 in n 10k\nr2 n out 100k\nrl out 0 2k\n"


def circuit_of(body: str) -> Circuit:
    circuit = elaborate(read_text(f"title\n{body}\n.end\n"))
    assert not [f for f in circuit.findings if f.level == "error"]
    return circuit


def found(body: str) -> tuple[Amplifier, ...]:
    return find_amplifiers(circuit_of(body))[0]


def parts(body: str) -> Partition:
    circuit = circuit_of(body)
    amplifiers, findings = find_amplifiers(circuit)
    return split(circuit, amplifiers, findings)


def test_a_linear_model_is_reduced_exactly() -> None:
    (amplifier,) = found(TWO_POLES + STAGE + "xu1 0 n vp vn out two")
    assert (amplifier.non_inverting, amplifier.inverting, amplifier.output) == ("0", "n", "out")
    values = {name: q.value for name, q in amplifier.open_loop.values.items()}
    assert values["gain"] == pytest.approx(2e5, rel=1e-9)
    assert values["poles_hz"] == pytest.approx((5.0, 5e6), rel=1e-6)
    assert values["gain_bandwidth_hz"] == pytest.approx(1e6, rel=1e-6)
    assert values["input_resistance_ohm"] == pytest.approx(2e6, rel=1e-9)
    assert values["input_capacitance_f"] == pytest.approx(1.4e-12, rel=1e-6)
    assert values["output_resistance_ohm"] == pytest.approx(75.0, rel=1e-9)
    model = amplifier.open_loop.model
    assert model is not None
    f = np.logspace(0, 8, 33)
    s = 2j * np.pi * f
    # two one-pole lags in a row, by hand: 1/(R C) each
    gain = 2e5 / ((1 + s * 200e6 * 159.15494e-12) * (1 + s * 1e3 * 31.830989e-12))
    response = model.response(f)
    assert np.allclose(response.gain_plus, gain, rtol=1e-9)
    assert np.allclose(response.gain_minus, -gain, rtol=1e-9)
    assert np.allclose(response.y_differential, 1 / 2e6 + s * 1.4e-12, rtol=1e-9)


def test_swapped_pins_are_told_by_the_sign_of_the_gain() -> None:
    swapped = TWO_POLES.replace(".subckt two 3 2", ".subckt two 2 3")
    (amplifier,) = found(swapped + STAGE + "xu1 n 0 vp vn out two")
    assert (amplifier.non_inverting, amplifier.inverting) == ("0", "n")


@pytest.mark.parametrize(
    ("chain", "name"),
    [("e1 out 0 0 n 1e5", "e1"), ("e1 x 0 0 n 1e5\nro x out 50", "e1"), ("e1 0 out n 0 1e5", "e1"),
     ("e1 a 0 0 n 1e5\nra a b 1k\nca b 0 1u\ne2 c 0 b 0 1\nro c out 50", "e1"),
     ("g1 0 a 0 n 1m\nra a 0 100meg\nca a 0 100p\ne2 out 0 a 0 1", "g1"),
     ("b1 out 0 v=-1e5*v(n)", "b1")],
)  # fmt: skip
def test_bare_sources_in_every_drawing(chain: str, name: str) -> None:
    (amplifier,) = found(STAGE + chain)
    assert (amplifier.name, amplifier.inverting, amplifier.output) == (name, "n", "out")


def test_buffers_and_scaling_sources_are_no_amplifiers() -> None:
    assert found(STAGE + "e1 out 0 n 0 1\ne2 x 0 in 0 500\nrx x 0 1k") == ()


def test_a_block_with_feedback_inside_is_a_stage_and_no_amplifier() -> None:
    block = ".subckt blk i o\nr1 i n 1k\nr2 n o 10k\nxa 0 n 7 8 o two\n.ends\n"
    (amplifier,) = found(TWO_POLES + block + "vin in 0 ac 1\nxs in out blk\nrl out 0 1k")
    assert amplifier.name == "xs.xa"


def test_a_nonlinear_model_is_found_by_its_pin_names_and_a_directive_overrules() -> None:
    model = ".subckt mac inp inn vcc vee out\nb1 x 0 v=tanh(1e5*v(inp,inn))\nro x out 50\n.ends\n"
    (amplifier,) = found(model + STAGE + "xu1 0 n vp vn out mac")
    assert amplifier.open_loop.model is None
    assert (amplifier.inverting, amplifier.positive_supply) == ("n", "vp")
    nameless = model.replace("inp inn vcc vee out", "a b c d e").replace("inp,inn", "a,b").replace("x out", "x e")
    (amplifier,) = found(nameless + STAGE + "xu1 0 n vp vn out mac")
    assert (amplifier.inverting, amplifier.output) == ("n", "out")
    told = "* xcheck: amplifier xu1 in+=a in-=b out=e v+=c v-=d\n"
    (amplifier,) = found(told + nameless + STAGE + "xu1 0 n vp vn out mac")
    assert (amplifier.inverting, amplifier.output, amplifier.negative_supply) == ("n", "out", "vn")


@pytest.mark.parametrize(
    ("words", "message"),
    [
        ("xu9 in+=3 in-=2 out=6", "no instance"),
        ("xu1 in+=3 in-=2", "out are wanted"),
        ("xu1 in+=3 in-=2 out=9", "no pin"),
    ],
)
def test_a_wrong_directive_is_told_at_its_place(words: str, message: str) -> None:
    circuit = circuit_of(f"* xcheck: amplifier {words}\n" + TWO_POLES + STAGE + "xu1 0 n vp vn out two")
    _, findings = find_amplifiers(circuit)
    assert [(f.rule, f.place.line) for f in findings] == [("syntax", 2)]
    assert message in findings[0].message


def test_ports_asked_for_by_a_directive() -> None:
    body = TWO_POLES + STAGE.replace("rl out 0 2k", "rl out y 50\ncy y 0 1n") + "xu1 0 n vp vn out two"
    partition = parts("* xcheck: port n y\n* xcheck: port nowhere\n" + body)
    (stage,) = partition.stages
    assert [(p.name, p.side) for p in stage.ports] == [
        ("in", "input"), ("out", "output"), ("n", "output"), ("y", "output"),
    ]  # fmt: skip
    assert [(f.rule, f.place.line) for f in partition.findings] == [("syntax", 3)]


def test_inside_and_outside_of_a_port() -> None:
    partition = parts(TWO_POLES + STAGE + "xu1 0 n vp vn out two\nr3 out m 10k\nr4 m end 10k\nxu2 0 m vp vn end two")
    first, second = partition.stages
    output = next(p for p in first.ports if p.side == "output")
    assert {t.element for t in output.inside} == {"r2", "xu1.ro"}
    entry = next(p for p in second.ports if p.side == "input")
    assert (entry.node, {t.element for t in entry.inside}) == ("out", {"r3"})
