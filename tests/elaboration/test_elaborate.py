"""Parameters, subcircuits and expressions against ngspice itself, and what is said of broken ones."""

import re
import subprocess
from pathlib import Path

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from xcheck.circuit.elements import Circuit, Controlled, Device, Passive
from xcheck.deck.reader import read_text
from xcheck.elaboration import elaborate
from xcheck.elaboration.expressions import ExpressionError, parse
from xcheck.elaboration.unused import unused_as_notes
from xcheck.errors import CallError


def circuit_of(body: str) -> Circuit:
    return elaborate(read_text(f"title\n{body}\n.end\n"))


EXPRESSIONS = [
    "1+2*3", "-2**2", "2**3**2", "7%3", "2*-3", "1/0.5/2", "(1+2)*(3-4)", "3<=3", "1>2?5:6",
    "1<2?(1>3?7:8):9", "!0", "!3", "1&&0", "1||0", "sqrt(16)", "abs(-3)", "exp(1)", "ln(10)", "log(10)",
    "log10(1000)", "sin(1)", "cos(1)", "tan(1)", "atan(1)", "asin(0.5)", "acos(0.5)", "sinh(1)", "cosh(1)",
    "tanh(1)", "pow(2,10)", "pwr(-2,3)", "min(2,3)", "max(2,3)", "int(2.7)", "int(-2.7)", "floor(-2.1)",
    "ceil(2.1)", "nint(2.6)", "sgn(-4)", "1k+1meg", "2.5u*4", "1e3k", "3==3", "3!=3", "f(2)+f(3)", "y*2",
]  # fmt: skip


@pytest.mark.engine
def test_expressions_as_ngspice_evaluates_them(tmp_path: Path) -> None:
    head = ".func f(x) {x*x+y}\n.param y={z/2} z=8\n"
    cards = "\n".join(f"v{k} n{k} 0 {{{text}}}\nr{k} n{k} 0 1k" for k, text in enumerate(EXPRESSIONS))
    body = head + cards
    commands = "\n".join(f"print v(n{k})" for k in range(len(EXPRESSIONS)))
    (tmp_path / "x.cir").write_text(f"t\n{body}\n.control\nset numdgt=15\nop\n{commands}\n.endc\n.end\n")
    done = subprocess.run(
        ["ngspice", "-b", "x.cir"], cwd=tmp_path, capture_output=True, text=True, timeout=60, check=False
    )
    taken = {int(k): float(v) for k, v in re.findall(r"v\(n(\d+)\) = (\S+)", done.stdout)}
    assert len(taken) == len(EXPRESSIONS), done.stderr[-1000:]
    circuit = circuit_of(body)
    assert not circuit.findings
    for k, text in enumerate(EXPRESSIONS):
        source = circuit.by_name[f"v{k}"]
        assert source.dc == pytest.approx(taken[k], rel=1e-9, abs=1e-12), text  # type: ignore[union-attr]


@settings(max_examples=200, deadline=None)
@given(st.text(alphabet="0123456789+-*/^()?:<>=!&|., abkvi%~{}'", max_size=60))
def test_any_expression_parses_or_is_refused(text: str) -> None:
    refusal = ""
    try:
        tree = parse(text)
    except ExpressionError as error:
        tree, refusal = None, str(error)
    assert (tree is None) == bool(refusal)


def test_subcircuits_with_parameters_nest() -> None:
    circuit = circuit_of(
        ".param w=3k\n.subckt outer a b r={w} \nr1 a m {r}\nx1 m b inner k=2\n.ends\n"
        ".subckt inner a b k=1\n.param half={k/2}\nr1 a b {half*1k}\nr2 a gnd {r}\n.ends\n"
        "x1 1 0 outer\nx2 1 0 outer r=5k"
    )
    assert not circuit.findings
    values = {e.name: e.value for e in circuit.elements if isinstance(e, Passive)}
    assert values == {
        "x1.r1": 3e3, "x1.x1.r1": 1e3, "x1.x1.r2": 3e3, "x2.r1": 5e3, "x2.x1.r1": 1e3, "x2.x1.r2": 5e3,
    }  # fmt: skip
    assert circuit.by_name["x1.x1.r2"].nodes == ("x1.m", "0")
    assert [i.name for i in circuit.instances] == ["x1", "x1.x1", "x2", "x2.x1"]
    assert circuit.instances[0].local is not circuit.instances[2].local


def test_conditions_choose_cards() -> None:
    text = ".param mode={m}\n.if (mode==1)\nr1 a 0 1k\n.elseif (mode==2)\nr1 a 0 2k\n.else\nr1 a 0 3k\n.endif"
    for mode, value in ((1, 1e3), (2, 2e3), (7, 3e3)):
        circuit = circuit_of(text.replace("{m}", str(mode)))
        assert [e.value for e in circuit.elements if isinstance(e, Passive)] == [value]


@pytest.mark.parametrize(
    ("card", "terms", "offset"),
    [("e1 o 0 p n 1e5", [(1e5, "p", "n")], 0.0), ("e1 o 0 poly(1) p n 0 5", [(5.0, "p", "n")], 0.0),
     ("e1 o 0 POLY(2) p 0 n 0 1 2 3", [(2.0, "p", "0"), (3.0, "n", "0")], 1.0),
     ("e1 o 0 poly (2) (p,0) (n,0) 0 2 -2", [(2.0, "p", "0"), (-2.0, "n", "0")], 0.0),
     ("e1 o 0 value={2*(v(p)-v(n))+1}", [(2.0, "p", "0"), (-2.0, "n", "0")], 1.0),
     ("e1 o 0 vol='3*v(p,n)'", [(3.0, "p", "n")], 0.0), ("b1 o 0 v=-v(p)/4", [(-0.25, "p", "0")], 0.0)],
)  # fmt: skip
def test_linear_sources_in_every_spelling(card: str, terms: list[tuple[float, str, str]], offset: float) -> None:
    element = circuit_of(card).elements[0]
    assert isinstance(element, Controlled)
    assert [(t.gain, t.positive, t.negative) for t in element.terms] == terms
    assert element.offset == offset


@pytest.mark.parametrize(
    "card", ["e1 o 0 value={tanh(v(p))}", "b1 o 0 v=v(p)*v(n)", "e1 o 0 poly(1) p 0 0 0 1", "d1 a 0 dx\n.model dx d",
             "e1 o 0 table {v(p)} = (0,0) (1,1)", "e1 o 0 laplace {v(p)} {1/(1+s)}", "b1 o 0 v=v(p)*time"],
)  # fmt: skip
def test_what_is_not_linear_is_kept_as_a_device(card: str) -> None:
    circuit = circuit_of(card)
    assert isinstance(circuit.elements[0], Device)
    assert not [f for f in circuit.findings if f.level == "error"]


@pytest.mark.parametrize(
    ("body", "rule", "line", "column"),
    [("r1 a 0 {x+1}", "undefined-parameter", 2, 8),
     ("v1 a 0 1\nf1 a 0 v2 3", "undefined-parameter", 3, 1),
     ("b1 a 0 v=i(vx)*v(a)", "undefined-parameter", 2, 1), ("b1 a 0 v=foo(v(a))", "undefined-parameter", 2, 10),
     ("x1 a 0 nothere", "undefined-model", 2, 8),
     ("d1 a 0 dx", "undefined-model", 2, 8), (".subckt s a b\nr1 a b 1\n.ends\nx1 a s", "pin-count", 5, 1),
     ("r1 a 0 1k\nr1 b 0 2k", "duplicate-name", 3, 1), ("r1 a 0", "value-missing", 2, 1),
     ("e1 a 0 b 0", "value-missing", 2, 1), ("r1 a", "syntax", 2, 1), ("r1 a 0 {1+}", "syntax", 2, 8),
     (".subckt s a\nr1 a 0 1k", "syntax", 2, 1), (".param a={b} b={a}", "syntax", 2, 10)],
)  # fmt: skip
def test_a_fault_is_told_at_its_place(body: str, rule: str, line: int, column: int) -> None:
    found = [(f.rule, f.place.line, f.place.column) for f in circuit_of(body).findings]
    assert (rule, line, column) in found


def test_what_is_defined_nowhere_is_told_once_a_name() -> None:
    circuit = circuit_of("x1 a 0 none\nx2 a 0 none\nx3 a 0 nil\nd1 a 0 none\nd2 a 0 none\n")
    found = [(f.rule, f.place.line, f.subject) for f in circuit.findings]
    assert found == [("undefined-model", 2, "x1"), ("undefined-model", 4, "x3"), ("undefined-model", 5, "d1")]


def test_faults_in_unused_subcircuits_are_notes() -> None:
    broken = ".subckt {name} a\nr1 a 0 {{1\n#x\n.ends\n"
    deck = read_text("t\n" + broken.format(name="u") + broken.format(name="s") + "x1 a s\nr1 a 0 {2\n.end\n")
    findings = unused_as_notes(deck.findings, elaborate(deck))
    assert [(f.place.line, f.level) for f in findings] == [
        (3, "note"), (4, "note"), (7, "error"), (8, "error"), (11, "error"),
    ]  # fmt: skip
    on_its_own = unused_as_notes(deck.findings, elaborate(deck, "u"), "U")
    assert [f.level for f in on_its_own][:2] == ["error", "error"]


def test_a_block_by_its_name() -> None:
    deck = read_text("t\n.subckt stage in out r=1k\nr1 in out {r}\n.ends\n.end\n")
    circuit = elaborate(deck, "stage")
    assert circuit.boundary == ("in", "out")
    assert [e.nodes for e in circuit.elements] == [("in", "out")]
    with pytest.raises(CallError, match="it defines: stage"):
        elaborate(deck, "stag")
