"""Random linear feedback networks against a nodal solution of this test's own, in forty digits.

The solution here is dense, has a branch for every voltage source and its own cut, and finds Blackman's quantities
by their definitions: the source dead, and what comes back to a dead source from a unit in its place.
"""

from dataclasses import dataclass, replace

import mpmath
import numpy as np
import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st
from partitions_by_hand import PortAt, amplifier, elements_of, partition_of

from xcheck.circuit.elements import Controlled, Coupling, Element, Passive, Source
from xcheck.impedance.return_ratio import loop_gains, return_ratios
from xcheck.impedance.types import ReturnRatio

DIGITS = 40
TEST, CUT = "test", "cut"


@dataclass(frozen=True)
class Case:
    """A network, the source that the formula is written for, and a port by its node and the elements inside."""

    lines: tuple[str, ...]
    gain: str
    node: str
    inside: tuple[str, ...]
    by_current: bool

    @property
    def elements(self) -> tuple[Element, ...]:
        return tuple(elements_of("\n".join(self.lines)))


def _value(draw: st.DrawFn, low: float, high: float) -> float:
    return float(f"{10 ** draw(st.floats(low, high)):.3g}")


@st.composite
def cases(draw: st.DrawFn) -> Case:
    """A tree of resistors to ground, more passives, coupled inductors, and controlled sources of all kinds; a
    voltage is given behind a resistor of its own, a current is read in a branch of its own."""
    nodes = [f"n{n}" for n in range(draw(st.integers(2, 5)))]
    any_node = st.sampled_from([*nodes, "0"])
    lines = [
        f"r{n} {node} {draw(st.sampled_from(['0', *nodes[:n]]))} {_value(draw, 1, 6)}" for n, node in enumerate(nodes)
    ]
    for n in range(draw(st.integers(0, 3))):
        kind, low, high = draw(st.sampled_from([("r", 1, 6), ("c", -12, -7), ("l", -6, -2)]))
        lines.append(f"{kind}p{n} {draw(any_node)} {draw(any_node)} {_value(draw, low, high)}")
    if draw(st.booleans()):
        a, b = draw(st.sampled_from(nodes)), draw(st.sampled_from(nodes))
        lines += [f"la {a} 0 {_value(draw, -5, -2)}", f"lb {b} 0 {_value(draw, -5, -2)}"]
        lines.append(f"ka la lb {draw(st.floats(0.05, 0.99)):.3g}")
    sources = []
    for n in range(draw(st.integers(1, 4))):
        kind = draw(st.sampled_from("efgh"))
        sources.append(name := f"{kind}{n}")
        out, other = draw(st.sampled_from(nodes)), draw(any_node)
        sign = draw(st.sampled_from("+-"))
        if kind in "fh":
            lines += [f"v{n} {draw(st.sampled_from(nodes))} s{n} 0", f"rs{n} s{n} {draw(any_node)} 1e4"]
            reads = f"v{n} {sign}{_value(draw, -1, 2) if kind == 'f' else _value(draw, 2, 7)}"
        else:
            high = 5 if kind == "e" else 0
            reads = " ".join(
                f"{draw(any_node)} {draw(any_node)} {sign}{_value(draw, high - 4, high)}"
                for _ in range(draw(st.integers(1, 2)))
            )
        if kind in "eh":
            lines += [f"{name} x{n} {other} {reads}", f"ro{n} x{n} {out} {_value(draw, 0, 3)}"]
        else:
            lines.append(f"{name} {out} {other} {reads}")
    elements = elements_of("\n".join(lines))
    node = draw(st.sampled_from(nodes))
    there = [e.name for e in elements if node in e.nodes or node in getattr(e, "sensing", ())]
    inside = draw(st.lists(st.sampled_from(there), min_size=1, unique=True))
    return Case(tuple(lines), draw(st.sampled_from(sources)), node, tuple(inside), draw(st.booleans()))


class Exact:
    """The network with its port cut, as a dense matrix in forty digits.

    shaken: a number from which each entry of the matrix is made wrong by a bit of double precision, which
    shows what rounding must be granted.
    """

    def __init__(self, case: Case, hertz: float, shaken: int = 0) -> None:
        self.shaken = shaken
        self.case, self.by_current = case, case.by_current
        self.s = 2j * mpmath.pi * mpmath.mpf(hertz)
        self.elements = [self._cut(e) if e.name in case.inside else e for e in case.elements]
        names = {n for e in self.elements for n in (*e.nodes, *getattr(e, "sensing", ()))}
        self.node = {name: n for n, name in enumerate(sorted({*names, case.node, "inside"} - {"0"}))}
        voltage = [e.name for e in self.elements if e.name[0] in "vehl"]
        self.branch = {name: len(self.node) + n for n, name in enumerate([*voltage, CUT])}
        self.size = len(self.node) + len(self.branch)

    def _cut(self, element: Element) -> Element:
        def moved(name: str) -> str:
            return "inside" if name == self.case.node else name

        if isinstance(element, Controlled):
            terms = tuple(replace(t, positive=moved(t.positive), negative=moved(t.negative)) for t in element.terms)
            element = replace(element, terms=terms)
        return replace(element, nodes=tuple(moved(n) for n in element.nodes))  # type: ignore[arg-type]

    def matrix(self, dead: str = "") -> mpmath.matrix:
        """The equations; dead: a controlled source whose output is 0."""
        m = mpmath.zeros(self.size)
        for element in self.elements:
            self._stamp(m, element, element.name == dead)
        self._branch(m, CUT, (self.case.node, "inside"))
        if self.shaken:
            lot = np.random.default_rng(self.shaken)
            for row in range(self.size):
                for column in range(self.size):
                    m[row, column] *= 1 + mpmath.mpf(2) ** -52 * int(lot.choice([-1, 1]))
        return m

    def _branch(self, m: mpmath.matrix, name: str, nodes: tuple[str, ...]) -> int:
        k = self.branch[name]
        for node, sign in zip(nodes, (1, -1), strict=True):
            if node != "0":
                m[self.node[node], k] += sign
                m[k, self.node[node]] += sign
        return k

    def _stamp(self, m: mpmath.matrix, element: Element, dead: bool) -> None:
        if isinstance(element, Passive) and element.kind in "rc":
            value = mpmath.mpf(element.value)
            y = 1 / value if element.kind == "r" else self.s * value
            for a in element.nodes:
                for b in element.nodes:
                    if "0" not in (a, b):
                        same = (a == element.nodes[0]) == (b == element.nodes[0])
                        m[self.node[a], self.node[b]] += y if same else -y
            if element.nodes[0] == element.nodes[1] != "0":
                m[self.node[element.nodes[0]], self.node[element.nodes[0]]] -= 4 * y
        elif isinstance(element, Passive):
            k = self._branch(m, element.name, element.nodes)
            m[k, k] -= self.s * mpmath.mpf(element.value)
        elif isinstance(element, Coupling):
            a, b = (self.branch[name] for name in element.inductors)
            la, lb = (mpmath.mpf(e.value) for e in self.elements if e.name in element.inductors)  # type: ignore[union-attr]
            mutual = mpmath.mpf(element.factor) * mpmath.sqrt(la * lb)
            m[a, b] -= self.s * mutual
            m[b, a] -= self.s * mutual
        elif isinstance(element, Source):
            self._branch(m, element.name, element.nodes)
        elif isinstance(element, Controlled):
            rows = self._output_rows(m, element)
            for column, gain in self.reads(element) if not dead else ():
                for row, sign in rows:
                    m[row, column] += sign * gain

    def _output_rows(self, m: mpmath.matrix | None, element: Controlled) -> list[tuple[int, int]]:
        """Where the source's output stands in the equations, with its sign on the left-hand side."""
        if element.kind in "eh":
            return [(self.branch[element.name] if m is None else self._branch(m, element.name, element.nodes), -1)]
        ends = zip(element.nodes, (1, -1), strict=True)
        return [(self.node[node], sign) for node, sign in ends if node != "0"]

    def reads(self, element: Controlled) -> list[tuple[int, mpmath.mpf]]:
        pairs: list[tuple[int, mpmath.mpf]] = []
        for term in element.terms:
            gain = mpmath.mpf(term.gain)
            if term.source:
                pairs.append((self.branch[term.source], gain))
                continue
            ends = ((term.positive, gain), (term.negative, -gain))
            pairs += [(self.node[node], g) for node, g in ends if node != "0"]
        return pairs

    def impedance(self, dead: str = "") -> mpmath.mpc:
        """The definition of the port's impedance."""
        m, right = self.matrix(dead), mpmath.zeros(self.size, 1)
        inside, cut = self.node["inside"], self.branch[CUT]
        right[inside if self.by_current else cut] = 1
        x = mpmath.lu_solve(m, right)
        nothing = mpmath.mpf(10) ** (-DIGITS // 2)
        if not self.by_current and abs(x[inside]) < nothing and abs(x[cut]) < nothing:
            raise ZeroDivisionError("the outside is open, so a voltage in series shows nothing")
        return x[inside] / (1 + x[cut] if self.by_current else x[cut])

    def returned(self, condition: str) -> mpmath.mpc:
        """T of the source, from a unit in its place: with the cut 'closed', with it 'open', or with the stage's
        side at zero volt by whatever current the outside is given through the cut ('short')."""
        gain = next(e for e in self.elements if e.name == self.case.gain)
        assert isinstance(gain, Controlled)
        m, right = self.matrix(dead=gain.name), mpmath.zeros(self.size, 1)
        for row, sign in self._output_rows(None, gain):
            right[row] -= sign
        if condition != "closed":
            # by voltage the cut's own law makes room for the condition, by current the law of the node outside
            row = self.node[self.case.node] if self.by_current else self.branch[CUT]
            for column in range(self.size):
                m[row, column] = 0
            m[row, self.branch[CUT] if condition == "open" else self.node["inside"]] = 1
            right[row] = 0
        x = mpmath.lu_solve(m, right)
        return -mpmath.fsum(g * x[column] for column, g in self.reads(gain))


def quantities(case: Case, hertz: float, shaken: int = 0) -> dict[str, mpmath.mpc]:
    """What a ReturnRatio holds, and the loop gain in place."""
    exact = Exact(case, hertz, shaken)
    z, z0 = exact.impedance(), exact.impedance(case.gain)
    short, opened, closed = (exact.returned(c) for c in ("short", "open", "closed"))
    return {"impedance": z, "z0": z0, "t_short": short, "t_open": opened, "loop": closed}


def granted(case: Case, hertz: float, exact: dict[str, mpmath.mpc]) -> dict[str, float]:
    """The error allowed in each quantity: 1e-9, or what a few bits in the entries of the matrix do to it."""
    moved = [quantities(case, hertz, shaken) for shaken in (1, 2)]
    size = {name: abs(value) + (name[0] in "tl") for name, value in exact.items()}
    return {
        name: float(max(1e-9 * size[name], *(30 * abs(other[name] - value) for other in moved)))
        for name, value in exact.items()
    }


def answers_of(case: Case, elements: tuple[Element, ...], frequency: np.ndarray) -> tuple[object, object]:
    port = PortAt(case.node, "output" if case.by_current else "input", case.inside)
    parted = partition_of(elements, {"u": ([amplifier(case.gain)], [port])})
    return return_ratios(parted, frequency)[f"u.{case.node}"], loop_gains(parted, frequency).get(case.gain)


@settings(max_examples=60, deadline=None, derandomize=True)
@given(cases(), st.sampled_from([1.0, 3e3, 1e7]))
def test_the_impedance_is_that_of_the_exact_solution(case: Case, hertz: float) -> None:
    with mpmath.workdps(DIGITS):
        try:
            exact = quantities(case, hertz)
            bound = granted(case, hertz, exact)
        except ZeroDivisionError:  # no impedance, or none with the source dead
            assume(False)
        z, z0 = exact["impedance"], exact["z0"]
        assume(1e-12 < abs(z) < 1e15 and 1e-12 < abs(z0) < 1e15)
        product = z0 * (1 + exact["t_short"]) / (1 + exact["t_open"])
        assert abs(product - z) <= mpmath.mpf(10) ** (-DIGITS // 2) * abs(z)  # Blackman, by definitions alone
        answer, loop = answers_of(case, case.elements, np.array([hertz]))
        assume(all(bound[name] < 1e-3 * abs(exact[name]) for name in ("impedance", "z0")))
        assert isinstance(answer, ReturnRatio), answer
        assert isinstance(loop, np.ndarray)
        for name, value in exact.items():
            found = loop[0] if name == "loop" else getattr(answer, name)[0]
            assert abs(found - value) <= bound[name], name


@settings(max_examples=25, deadline=None, derandomize=True)
@given(cases(), st.randoms(use_true_random=False))
def test_order_and_names_do_not_matter(case: Case, random: object) -> None:
    frequency = np.array([1.0, 1e4, 1e7])
    plain, _ = answers_of(case, case.elements, frequency)
    assume(isinstance(plain, ReturnRatio))
    assert isinstance(plain, ReturnRatio)
    nodes = {n for e in case.elements for n in (*e.nodes, *getattr(e, "sensing", ()))} - {"0"}
    order = sorted(nodes)
    random.shuffle(order)  # type: ignore[attr-defined]
    renamed = {old: f"net_{n}" for n, old in enumerate(order)} | {"0": "0"}
    elements = [_renamed(e, renamed) for e in case.elements]
    random.shuffle(elements)  # type: ignore[attr-defined]
    other, _ = answers_of(replace(case, node=renamed[case.node]), tuple(elements), frequency)
    assert isinstance(other, ReturnRatio)
    for n, hertz in enumerate(frequency):
        with mpmath.workdps(DIGITS):
            try:
                bound = granted(case, hertz, quantities(case, hertz))["impedance"]
            except ZeroDivisionError:
                continue
        if bound < 1e-3 * abs(plain.impedance[n]) < 1e12:
            assert abs(other.impedance[n] - plain.impedance[n]) <= bound


def _renamed(element: Element, names: dict[str, str]) -> Element:
    if isinstance(element, Controlled):
        terms = tuple(replace(t, positive=names[t.positive], negative=names[t.negative]) for t in element.terms)
        element = replace(element, terms=terms)
    return replace(element, nodes=tuple(names[n] for n in element.nodes))  # type: ignore[arg-type]


@pytest.mark.parametrize("gain", [1e4, 1e8])
def test_behind_much_loop_gain_all_digits_stand(gain: float) -> None:
    """A bootstrapped follower: 1 Mohm becomes 1e14 ohm, and a millionth of an ohm remains at the output."""
    text = f"""
        v1 in 0
        rs in p 1e3
        rid p out 1e6
        e1 e 0 p out {gain}
        ro e out 100
        cl out 0 1e-9
    """
    for node, inside, by_current in (("p", ("rid", "e1"), False), ("out", ("ro", "e1", "rid"), True)):
        case = Case(tuple(text.split("\n")), "e1", node, inside, by_current)
        answer, _ = answers_of(case, case.elements, np.array([10.0]))
        with mpmath.workdps(DIGITS):
            exact = Exact(case, 10.0)
            assert isinstance(answer, ReturnRatio)
            assert abs(answer.impedance[0] - exact.impedance()) <= 1e-12 * abs(exact.impedance())
