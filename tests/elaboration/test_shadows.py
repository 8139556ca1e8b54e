"""Definitions that shadow each other: said once, at the second, with which of the two counts. The deck `names defined
twice` in `dialect/` holds that against ngspice."""

import pytest

from xcheck.deck.reader import read_text
from xcheck.elaboration import elaborate

FIRST, LAST = "the first one counts", "this one counts"


def found(body: str) -> list[tuple[int, int, str]]:
    circuit = elaborate(read_text(f"title\n{body}\n.end\n"))
    shadowed = [f for f in circuit.findings if f.rule == "shadowed-definition"]
    assert all(f.level == "warning" and f.advice for f in shadowed)
    return [(f.place.line, f.place.column, f.message) for f in shadowed]


@pytest.mark.parametrize(
    ("body", "line", "column", "which"),
    [(".param k=1\n.param k=2\nr1 a 0 {k}", 3, 10, LAST),
     (".model dd d(is=1e-10)\nd1 a 0 dd\n.MODEL DD D(is=1e-14)", 4, 8, FIRST),
     (".func f(x) {x}\n.func f(x) {x*2}\nr1 a 0 {f(2)}", 3, 7, LAST),
     (".subckt s p\nr1 p 0 1k\n.ends\n.subckt s p\nr1 p 0 2k\n.ends\nx1 a s", 5, 9, FIRST),
     (".subckt s p\n.param q=1\n.param q=2\nr1 p 0 {q}\n.ends\nx1 a s", 4, 10, LAST)],
)  # fmt: skip
def test_two_of_one_name_in_one_scope(body: str, line: int, column: int, which: str) -> None:
    (only,) = found(body)
    assert only[:2] == (line, column)
    assert which in only[2]
    assert "deck.cir:" in only[2]


@pytest.mark.parametrize(
    "body",
    [".param k=1\n.subckt s p\n.param k=2\nr1 p 0 {k}\n.ends\nx1 a s\nr1 a 0 {k}",
     ".model dd d(is=1e-10)\n.subckt s p\n.model dd d(is=1e-14)\nd1 p 0 dd\n.ends\nx1 a s",
     ".param k=1\n.param K = 1\nr1 a 0 {k}", ".model dd d(is=1e-10)\n.model dd D( is=1e-10 )\nd1 a 0 dd",
     ".subckt s p\nr1 p 0 1k\n.ends\n.SUBCKT s p\nR1 p 0 1k\n.ends s\nx1 a s",
     ".param k=1\n.model k d\nd1 a k k\n.subckt k p\nr1 p 0 1\n.ends\nr1 a 0 {k}",
     ".param m=1\n.if (m==1)\n.param k=1\n.else\n.param k=2\n.endif\nr1 a 0 {k}",
     ".subckt s p k=1\nr1 p 0 {k}\n.ends\n.param k=2\nx1 a s k=3"],
)  # fmt: skip
def test_no_shadow(body: str) -> None:
    assert not found(body)
