"""Amplifiers by structure, pin names, connection comments and directives, and what contradicts what."""

import pytest
from gauge import AC, OPAMP, SUPPLIES, amplifiers_of, circuit_of, one_amplifier

from xcheck.stages import find_amplifiers
from xcheck.stages.types import Amplifier

STAGE = "vin in 0 ac 1\nr1 in n 10k\nr2 n out 100k\nrl out 0 10k\n"
NONLINEAR = "b1 x 0 v=tanh(1e5*v({p},{n}))\nro x {o} 50\nrq {vp} {vn} 10k\n"


def used(definition: str, nodes: str = "0 n vp vn out", name: str = "part") -> str:
    return SUPPLIES + definition + STAGE + f"xu1 {nodes} {name}\n"


def pins(amplifier: Amplifier) -> tuple[str, str, str]:
    return amplifier.non_inverting, amplifier.inverting, amplifier.output


def test_structure_alone_tells_the_pins_and_the_evidence_is_a_sentence() -> None:
    part = (
        ".subckt part 1 2 3 4 5\nrid 1 2 1meg\ne1 6 0 1 2 2e5\nr1 6 7 1k\nc1 7 0 1u\ne2 8 0 7 0 1\nro 8 5 50\n.ends\n"
    )
    amplifier = one_amplifier(used(part))
    assert pins(amplifier) == ("0", "n", "out")
    assert amplifier.gain_element == "xu1.e1"
    assert amplifier.subckt == "part"
    assert amplifier.evidence == ("structure: gain 2e+05 from (`1`, `2`) to `5`, by e1",)
    assert set(amplifier.elements) == {f"xu1.{n}" for n in ("rid", "e1", "r1", "c1", "e2", "ro")}


@pytest.mark.parametrize(
    ("what", "body"),
    [
        ("E with R out", "e1 x 0 p n 1e5\nro x o 50"),
        ("E alone", "e1 o 0 p n 1e5"),
        ("E the other way round", "e1 0 o n p 1e5"),
        ("G into R and C, unity E", "g1 0 x p n 1m\nr x 0 100meg\nc x 0 100p\ne1 y 0 x 0 1\nro y o 50"),
        ("G into C alone", "g1 0 x p n 1m\nc x 0 100p\ne1 y 0 x 0 1\nro y o 50"),
        ("gain split in a chain", "e1 x 0 p n 500\nr1 x y 1k\nc1 y 0 1u\ne2 z 0 y 0 400\nro z o 50"),
        ("inverted twice", "e1 x 0 n p 500\nr1 x y 1k\nc1 y 0 1u\ne2 z 0 0 y 400\nro z o 50"),
        ("gain split between parallel sources", "g1 0 x p n 0.5m\ng2 0 x p n 0.5m\nr x 0 1g\ne1 y 0 x 0 1\nro y o 50"),
        ("stacked sources", "e1 x y p n 5e4\ne2 y 0 p n 5e4\nro x o 50"),
        ("referred to mid-supply", "em m 0 vp vn 0.5\ne1 x m p n 1e5\nro x o 50"),
        ("mid-supply from a divider", "ra vp m 10k\nrb m vn 10k\nem k 0 m 0 1\ne1 x k p n 1e5\nro x o 50"),
        ("common-mode terms", "e1 x 0 poly(3) p n p 0 n 0 0 1e5 5 5\nro x o 50"),
        ("POLY of one input", "e1 x 0 poly(1) p n 0 1e5\nro x o 50"),
        ("input RC", "ri1 p q 1k\nri2 n m 1k\ncd q m 5p\ne1 x 0 q m 1e5\nro x o 50"),
        (
            "two poles",
            "e1 x 0 p n 1e5\nr1 x y 1k\nc1 y 0 1u\ne2 z 0 y 0 1\nr2 z w 1k\nc2 w 0 1n\ne3 v 0 w 0 1\nro v o 50",
        ),
        ("Miller capacitor", "g1 x 0 p n 200u\nr1 x 0 100k\ng2 o 0 x 0 0.1\nr2 o 0 10k\ncc x o 30p"),
        ("behavioural, linear", "b1 x 0 v=1e5*(v(p)-v(n))\nro x o 50"),
        ("current output of a sensed source", "e1 x 0 p n 1e5\nvs x y 0\nf1 0 o vs 1m\nrs y 0 1k\nro o 0 75k"),
        ("supplies' small say", "e1 x 0 poly(2) p n vp vn 0 1e5 2\nro x o 50"),
        ("inductor in the output", "e1 x 0 p n 1e5\nro x y 50\nlo y o 10u"),
        ("offset and bias", "vos p q 1m\nib n 0 10n\nrid q n 1meg\ne1 x 0 q n 1e5\nro x o 50"),
    ],
)
def test_structures_of_linear_models(what: str, body: str) -> None:
    amplifier = one_amplifier(used(f".subckt part p n vp vn o\nrq vp vn 10k\n{body}\n.ends\n"))
    assert pins(amplifier) == ("0", "n", "out"), what
    assert (amplifier.positive_supply, amplifier.negative_supply) == ("vp", "vn")
    assert amplifier.open_loop.model is not None


def test_polarity_is_the_sign_of_the_gain_whatever_the_names_say() -> None:
    amplifier = one_amplifier(used(".subckt part inp inn vp vn out\ne1 x 0 inn inp 1e5\nro x out 50\n.ends\n"))
    assert pins(amplifier) == ("n", "0", "out")
    assert amplifier.evidence[1].endswith("which does not count")
    assert amplifier.evidence[1].startswith("pin names: in+ `inp`, in- `inn`, out `out`")


def test_swapped_nodes_of_an_instance_are_seen() -> None:
    amplifier = one_amplifier(OPAMP + SUPPLIES + STAGE + "xu1 n 0 vp vn out gaugeamp\n")
    assert pins(amplifier) == ("n", "0", "out")


@pytest.mark.parametrize(
    "names",
    [
        "in+ in- v+ v- out", "inp inn vcc vee vo", "non inv vdd vss out", "ip in vp vn o", "plus minus v+ gnd output",
        "p n vp vn o", "vinp vinn vdd gnd vout", "noninv inv vcc+ vcc- out",
    ],
)  # fmt: skip
def test_pin_names_identify_a_nonlinear_model(names: str) -> None:
    p, n, vp, vn, o = names.split()
    body = NONLINEAR.format(p=p, n=n, o=o, vp=vp, vn=vn)
    amplifier = one_amplifier(used(f".subckt part {names}\n{body}.ends\n"))
    assert pins(amplifier) == ("0", "n", "out")
    assert (amplifier.positive_supply, amplifier.negative_supply) == ("vp", "vn")
    assert amplifier.open_loop.model is None
    assert "b1" in amplifier.open_loop.reason
    assert amplifier.evidence[0].startswith("pin names: ")


NUMBERED = ".subckt part 3 2 7 4 6\n" + NONLINEAR.format(p=3, n=2, o=6, vp=7, vn=4) + ".ends\n"


@pytest.mark.parametrize(
    "comment",
    [
        "* connections: non-inverting input, inverting input, positive supply, negative supply, output",
        "* pins: in+ in- v+ v- out",
        "* Connections:\n* non-inverting input\n* inverting input\n* positive supply\n* negative supply\n* output",
        "* connections:  non-inverting input\n*               |  inverting input\n*               | | positive supply\n"
        "*               |  |  |  negative supply\n*               |  |  |  |  output\n*               |  |  |  |  |",
        "* level amplifier\n* 3 = non-inverting input\n* 2 = inverting input\n* 7 = positive supply\n"
        "* 4 = negative supply\n* 6 = output",
        "* pin 6: output\n* pin 2: inverting input\n* pin 3: non-inverting input\n* pin 7: v+\n* pin 4: v-",
    ],
)
def test_the_comment_around_a_definition_identifies_a_nonlinear_model(comment: str) -> None:
    amplifier = one_amplifier(used(f"{comment}\n{NUMBERED}"))
    assert pins(amplifier) == ("0", "n", "out")
    assert (amplifier.positive_supply, amplifier.negative_supply) == ("vp", "vn")
    assert amplifier.open_loop.model is None
    assert amplifier.evidence[0].startswith("comment: in+ `3`, in- `2`, out `6`")


@pytest.mark.parametrize(
    ("what", "definition"),
    [
        ("letters that could be anything", ".subckt part p n o\nd1 p o dx\nb1 o 0 v=abs(v(p))\n.ends\n.model dx d\n"),
        ("pins that op-amps do not have", ".subckt part in+ in- ref rg out\nb1 out ref v=tanh(v(in+,in-))\n.ends\n"),
    ],
)  # fmt: skip
def test_a_nonlinear_model_whose_pins_nobody_tells_is_not_found(what: str, definition: str) -> None:
    nodes = "0 n out" if "part p n o" in definition else "0 n vp vn out"
    assert amplifiers_of(used(definition, nodes)) == (), what


def test_the_paths_of_a_nonlinear_model_tell_pins_that_nobody_names() -> None:
    for comment in ("", "* connections: anode, cathode, case, shield, sense\n"):
        amplifier = one_amplifier(used(comment + NUMBERED))
        assert pins(amplifier) == ("0", "n", "out")
        assert any(words.startswith("structure in principle: ") for words in amplifier.evidence)


def test_clamps_leave_the_structure_as_evidence_but_no_linear_model() -> None:
    part = ".subckt part 3 2 7 4 6\ne1 x 0 3 2 1e5\nro x 6 50\nd1 x 7 dx\nd2 4 x dx\n.ends\n.model dx d\n"
    amplifier = one_amplifier(used(part))
    assert pins(amplifier) == ("0", "n", "out")
    assert amplifier.open_loop.model is None
    assert "d1" in amplifier.open_loop.reason
    assert (amplifier.positive_supply, amplifier.negative_supply) == ("vp", "vn")


def test_supplies_without_names_are_told_by_their_levels() -> None:
    part = ".subckt part 1 2 3 4 5\ne1 6 0 1 2 2e5\nro 6 5 50\nrq 3 4 10k\n.ends\n"
    swapped = one_amplifier(used(part, "0 n vn vp out"))
    assert (swapped.positive_supply, swapped.negative_supply) == ("vp", "vn")
    soft = used(part, "0 n a b out") + "r8 vp a 10\nr9 vn b 10\n"
    assert (one_amplifier(soft).positive_supply, one_amplifier(soft).negative_supply) == ("a", "b")
    single = used(part, "0 n vp 0 out")
    assert (one_amplifier(single).positive_supply, one_amplifier(single).negative_supply) == ("vp", "0")


def test_the_outermost_instance_with_the_amplifiers_pins_names_it() -> None:
    inner = ".subckt core a b c\ne1 c 0 a b 1e5\n.ends\n"
    part = ".subckt part p n vp vn o\nrid p n 1meg\nxcore p n y core\nro y o 75\nrq vp vn 10k\n.ends\n"
    amplifier = one_amplifier(used(inner + part))
    assert (amplifier.name, amplifier.subckt, amplifier.gain_element) == ("xu1", "part", "xu1.xcore.e1")
    assert amplifier.open_loop.values["output_resistance_ohm"].value == pytest.approx(75)


def test_a_wrapper_of_a_nonlinear_part_takes_its_place_where_it_only_hands_the_pins_on() -> None:
    part = (
        ".subckt part inp inn vcc vee out\n"
        + NONLINEAR.format(p="inp", n="inn", o="out", vp="vcc", vn="vee")
        + ".ends\n"
    )
    shell = ".subckt shell inp inn vcc vee out\nxp inp inn vcc vee out part\ncd vcc vee 100n\n.ends\n"
    assert one_amplifier(used(part + shell, name="shell")).name == "xu1"
    closed = shell.replace("cd vcc vee 100n", "cd vcc vee 100n\nrf out inn 100k")
    assert one_amplifier(used(part + closed, name="shell")).name == "xu1.xp"


@pytest.mark.parametrize(
    ("what", "block", "nodes", "expected"),
    [
        ("inverting", "r1 a n 1k\nr2 n b 10k\nxu 0 n vp vn b gaugeamp", "in out", "xs.xu"),
        ("follower", "xu a b vp vn b gaugeamp", "in out", "xs.xu"),
        ("gain of 5 000", "xu a n vp vn b gaugeamp\nr1 n 0 10\nr2 n b 49.99k", "in out", "xs.xu"),
        ("integrator", "r1 a n 1k\nc2 n b 10n\nxu 0 n vp vn b gaugeamp", "in out", "xs.xu"),
        ("bare source with feedback", "r1 a n 1k\nr2 n b 10k\ne1 b 0 0 n 1e5", "in out", "xs.e1"),
        ("bare source, Ro inside the loop", "r1 a n 1k\nr2 n b 10k\ne1 x 0 0 n 1e5\nro x b 50", "in out", "xs.e1"),
        ("input resistor inside, feedback outside", "r1 a b 1k\nxu 0 b vp vn c gaugeamp", "in n out", "xs.xu"),
    ],
)
def test_a_block_that_is_a_stage_is_no_amplifier(what: str, block: str, nodes: str, expected: str) -> None:
    pins_of_block = "a b c"[: 2 * len(nodes.split()) - 1]
    deck = OPAMP + SUPPLIES + f".global vp vn\n.subckt blk {pins_of_block}\n{block}\n.ends\nvin in 0 ac 1\n"
    deck += f"xs {nodes} blk\nrl out 0 10k\n" + ("rf n out 10k\n" if " n " in nodes else "")
    assert one_amplifier(deck).name == expected, what


def test_a_difference_stage_with_an_op_amps_pin_names_is_no_op_amp() -> None:
    network = "r1 in- n 10k\nr2 n out 20k\nr3 in+ p 10k\nr4 p 0 20k\nxu p n v+ v- out gaugeamp\n"
    block = f".subckt diff in+ in- v+ v- out\n{network}.ends\n"
    deck = OPAMP + SUPPLIES + block + "va a 0 ac 1\nvb b 0 0\nxs a b vp vn out diff\n"
    assert one_amplifier(deck).name == "xs.xu"
    nonlinear = (
        ".subckt part inp inn vcc vee out\n"
        + NONLINEAR.format(p="inp", n="inn", o="out", vp="vcc", vn="vee")
        + ".ends\n"
    )
    assert one_amplifier(deck.replace("gaugeamp\n.ends\nva", "part\n.ends\nva") + nonlinear).name == "xs.xu"


def test_a_dual_part_is_two_amplifiers() -> None:
    dual = ".subckt dual o1 n1 p1 vn p2 n2 o2 vp\nxa p1 n1 vp vn o1 gaugeamp\nxb p2 n2 vp vn o2 gaugeamp\n.ends\n"
    deck = OPAMP + SUPPLIES + dual + "vin in 0 ac 1\nxu1 a a in vn a b b vp dual\nrl b 0 1k\n"
    assert [a.name for a in amplifiers_of(deck)] == ["xu1.xa", "xu1.xb"]


def test_gain_below_a_thousand_counts_only_where_names_and_a_loop_speak_for_it() -> None:
    poor = ".subckt part in+ in- out\ne1 x 0 in+ in- 100\nro x out 50\n.ends\n"
    assert one_amplifier(used(poor, "0 n out")).name == "xu1"
    assert amplifiers_of(SUPPLIES + poor + "vin in 0 ac 1\nxu1 in 0 out part\nrl out 0 1k\n") == ()
    unnamed = poor.replace("in+", "a").replace("in-", "b").replace("out", "c")
    assert amplifiers_of(used(unnamed, "0 n out")) == ()


def test_an_instrumentation_amplifier_model_is_no_op_amp() -> None:
    ina = ".subckt ina in+ in- v+ v- out ref\ne1 x ref in+ in- 500\nro x out 1\nrq v+ v- 10k\n.ends\n"
    assert amplifiers_of(SUPPLIES + ina + "vin in 0 ac 1\nxi in 0 vp vn out 0 ina\nrl out 0 1k\n") == ()


# directives


def directed(words: str, definition: str = NUMBERED) -> str:
    return f"* xcheck: amplifier {words}\n" + used(definition)


@pytest.mark.parametrize("spaced", ["xu1 in+=3 in-=2 out=6 v+=7 v-=4", "XU1 IN+ = 3 in- =2 out= 6 V+=7 v-=4"])
def test_a_directive_names_the_pins_of_an_instance(spaced: str) -> None:
    amplifier = one_amplifier(directed(spaced))
    assert pins(amplifier) == ("0", "n", "out")
    assert (amplifier.positive_supply, amplifier.negative_supply) == ("vp", "vn")
    assert amplifier.evidence[0].startswith("directive at deck.cir:2:1: in+ `3`, in- `2`, out `6`")


def test_a_directive_may_speak_of_a_subcircuit_and_so_of_all_its_instances() -> None:
    deck = directed("part in+=3 in-=2 out=6") + "xu2 out b vp vn b part\nrl2 b 0 1k\n"
    assert [a.name for a in amplifiers_of(deck)] == ["xu1", "xu2"]


def test_a_directive_inside_a_body_speaks_of_all_instances_of_the_body() -> None:
    told = "* xcheck: amplifier xa in+=3 in-=2 out=6"
    block = f".subckt blk i o vp vn\n{told}\nr1 i n 1k\nr2 n o 1k\nxa 0 n vp vn o part\n.ends\n"
    deck = NUMBERED + SUPPLIES + block + "vin in 0 ac 1\nxb1 in m vp vn blk\nxb2 m out vp vn blk\nrl out 0 1k\n"
    assert [(a.name, a.inverting) for a in amplifiers_of(deck)] == [("xb1.xa", "xb1.n"), ("xb2.xa", "xb2.n")]


def test_a_directive_makes_an_amplifier_of_a_source_with_little_gain() -> None:
    deck = "* xcheck: amplifier e1 in+=0 in-=n out=out\n" + STAGE + "e1 x 0 0 n 100\nro x out 50\n"
    amplifier = one_amplifier(deck)
    assert (amplifier.name, *pins(amplifier)) == ("e1", "0", "n", "out")
    assert amplifier.elements == ("e1", "ro")
    assert amplifier.open_loop.values["gain"].value == pytest.approx(100)
    nonlinear = deck.replace("e1 x 0 0 n 100", "b1 x 0 v=tanh(-100*v(n))").replace("amplifier e1", "amplifier b1")
    told = one_amplifier(nonlinear)
    assert (told.name, told.open_loop.model) == ("b1", None)


@pytest.mark.parametrize(
    ("words", "said"),
    [
        ("xu9 in+=3 in-=2 out=6", "did you mean `xu1`?"),
        ("xu1 in+=3 in-=2", "no out"),
        ("xu1", "no in+ and no in- and no out"),
        ("", "no in+"),
        ("xu1 in+=3 in-=2 out=9", "no pin `9` (it has 3 2 7 4 6)"),
        ("xu1 in+=3 in-=2 out=6 vcc=7", "`vcc=7` is none of"),
        ("xu1 in+=3 in-=2 out=6 please", "`please` is none of"),
    ],
)
def test_a_wrong_directive_is_a_finding_at_its_place(words: str, said: str) -> None:
    circuit = circuit_of(directed(words))
    _, findings = find_amplifiers(circuit)
    assert [(f.rule, f.level, f.place.line, f.place.column) for f in findings] == [("syntax", "error", 2, 1)]
    assert said in findings[0].message
    assert "* xcheck: amplifier XU1" in findings[0].advice


def test_a_directive_that_the_elements_contradict_is_a_finding_and_the_elements_count() -> None:
    circuit = circuit_of(
        "* xcheck: amplifier xu1 in+=n in-=p out=o\n" + OPAMP + SUPPLIES + STAGE + "xu1 0 n vp vn out gaugeamp\n"
    )
    (amplifier,), findings = find_amplifiers(circuit)
    assert pins(amplifier) == ("0", "n", "out")
    assert [(f.rule, f.place.line) for f in findings] == [("syntax", 2)]
    assert "swapped" in findings[0].message


def test_amplifiers_come_in_deck_order_and_point_at_their_cards() -> None:
    deck = (
        OPAMP
        + SUPPLIES
        + STAGE
        + "xu2 out b vp vn b gaugeamp\ne1 out 0 0 n 1e5\nxu1 b c vp vn c gaugeamp\nrl2 c 0 1k\n"
        + AC
    )
    circuit = circuit_of(deck)
    found = find_amplifiers(circuit)[0]
    assert [a.name for a in found] == ["xu2", "e1", "xu1"]
    lines = f"tide gauge\n{deck}".splitlines()
    assert [lines[a.place.line - 1].split()[0] for a in found] == ["xu2", "e1", "xu1"]


def test_a_board_written_as_one_subcircuit_is_searched_inside() -> None:
    links = range(80)
    many = "".join(f"r{k} s{k} n{k} 1k\nrf{k} n{k} s{k + 1} 1k\nxu{k} 0 n{k} vp vn s{k + 1} gaugeamp\n" for k in links)
    deck = OPAMP + SUPPLIES + f".subckt board s0 vp vn\n{many}.ends\nvin in 0 ac 1\nxboard in vp vn board\n"
    assert [a.name for a in amplifiers_of(deck)] == [f"xboard.xu{k}" for k in links]


@pytest.mark.parametrize(
    ("what", "header"),
    [
        ("a comment with its inputs exchanged", "* connections: in-, in+, v+, v-, out\n.subckt part 1 2 3 4 5"),
        ("a comment with the output in another place", "* connections: in+, in-, out, v+, v-\n.subckt part 1 2 3 4 5"),
        ("a comment below the card", ".subckt part 1 2 3 4 5\n* pins: output, in+, in-, v+, v-"),
    ],
)
def test_evidence_that_does_not_agree_is_said(what: str, header: str) -> None:
    part = f"{header}\ng1 0 a 1 2 1m\nra a 0 100meg\ne2 b 0 a 0 1\nro b 5 50\nrq 3 4 10k\n.ends\n"
    amplifiers, findings = find_amplifiers(circuit_of(used(part)))
    (amplifier,) = amplifiers
    assert pins(amplifier) == ("0", "n", "out"), "what the elements do counts"
    (finding,) = findings
    assert (finding.rule, finding.level, finding.subject) == ("amplifier-pins-uncertain", "warning", "xu1"), what
    assert "against comment" in finding.message
    assert "* xcheck: amplifier part" in finding.advice


@pytest.mark.parametrize(
    "header",
    [
        "* connections: in+, in-, v+, v-, out\n.subckt part 1 2 3 4 5",
        "* a level amplifier with five pins\n.subckt part 1 2 3 4 5",
        "* in and out, up and down, and what else there is\n.subckt part 1 2 3 4 5",
    ],
)
def test_evidence_that_agrees_or_says_nothing_is_let_be(header: str) -> None:
    part = f"{header}\ng1 0 a 1 2 1m\nra a 0 100meg\ne2 b 0 a 0 1\nro b 5 50\nrq 3 4 10k\n.ends\n"
    amplifiers, findings = find_amplifiers(circuit_of(used(part)))
    assert pins(amplifiers[0]) == ("0", "n", "out")
    assert findings == ()
