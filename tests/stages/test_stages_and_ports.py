"""Stages with their names, elements and ports: what is inside a port, what kind it is, where it points."""

import pytest
from gauge import AC, OPAMP, SUPPLIES, board, inside, names, partition_of, port, ports, stage

from xcheck.errors import CallError

INVERTING = "vin in 0 ac 1\nr1 in n 10k\nr2 n out 100k\nxu1 0 n vp vn out gaugeamp\nrl out 0 10k"


def test_inverting() -> None:
    found = board(INVERTING)
    assert names(found) == ["xu1"]
    assert ports(found, "xu1") == {"in": "input signal", "out": "output"}
    assert stage(found, "xu1").elements == ("r1", "r2")
    assert inside(found, "xu1.in") == {"r1"}
    assert inside(found, "xu1.out") == {"r2", "xu1.*"}
    assert not port(found, "xu1.in").current_driven
    assert found.driver["out"] == "xu1"
    assert found.driver["in"] == "vin"
    assert found.stiff["out"] == "output of xu1"
    assert {"0", "vp", "vn", "in"} == set(found.ac_ground)
    assert found.references == ()


def test_non_inverting_and_the_sources_own_resistor() -> None:
    found = board("vin in 0 ac 1\nrs in p 1k\nxu1 p fb vp vn out gaugeamp\nrf out fb 22k\nrg fb 0 2.2k\nrl out 0 10k")
    assert ports(found, "xu1") == {"in": "input signal", "p": "input signal", "out": "output"}
    assert inside(found, "xu1.in") == {"rs"}
    assert inside(found, "xu1.p") == {"xu1.*"}
    assert inside(found, "xu1.out") == {"rf", "xu1.*"}


def test_follower_senses_at_its_output_on_its_own_side() -> None:
    found = board("vin in 0 ac 1\nxu1 in out vp vn out gaugeamp\nrl out 0 10k\n")
    assert ports(found, "xu1") == {"in": "input signal", "out": "output"}
    terminals = {(t.element, t.index) for t in port(found, "xu1.out").inside}
    assert terminals == {("xu1.rid", 1), ("xu1.cid", 1), ("xu1.rcn", 0), ("xu1.g1", -1), ("xu1.ro", 1)}
    assert {(t.element, t.index) for t in port(found, "xu1.in").inside} == {
        ("xu1.rid", 0), ("xu1.cid", 0), ("xu1.rcp", 0), ("xu1.g1", -1),
    }  # fmt: skip


def test_summing_with_a_reference_among_its_inputs() -> None:
    found = board(
        "va a 0 ac 1\nvb b 0 sin(0 1 1k)\nvoff off 0 dc 0.5\nr1 a s 10k\nr2 b s 20k\nr3 off s 100k\nrf s out 10k\n"
        "rc q 0 4.7k\nxu1 q s vp vn out gaugeamp\nrl out 0 10k"
    )
    assert ports(found, "xu1") == {
        "a": "input signal", "b": "input signal", "off": "input reference", "out": "output",
    }  # fmt: skip
    assert inside(found, "xu1.off") == {"r3"}
    assert "rc" in stage(found, "xu1").elements


def test_difference() -> None:
    found = board(
        "v1 plus 0 ac 0.5\nv2 minus 0 sin(0 1 100)\nr1 minus n 10k\nr2 n out 100k\nr3 plus p 10k\nr4 p 0 100k\n"
        "xu1 p n vp vn out gaugeamp\nrl out 0 10k"
    )
    assert ports(found, "xu1") == {
        "minus": "input signal", "plus": "input signal", "p": "input signal", "out": "output",
    }  # fmt: skip
    assert stage(found, "xu1").elements == ("r1", "r2", "r3", "r4")


def test_signals_added_at_the_non_inverting_input() -> None:
    found = board(
        "va a 0 ac 1\nvb b 0 sin(0 1 1k)\nr1 a p 10k\nr2 b p 10k\nxu1 p n vp vn out gaugeamp\nrf out n 10k\nrg n 0 10k"
    )
    assert ports(found, "xu1") == {"a": "input signal", "b": "input signal", "out": "output"}


def test_transimpedance_keeps_the_photodiodes_parts() -> None:
    found = board(
        "ipd 0 n dc 100n ac 1\ncpd n 0 100p\nrsh n 0 500meg\nrf n out 1meg\nxu1 0 n vp vn out gaugeamp\nrl out 0 10k"
    )
    assert ports(found, "xu1") == {"n": "input signal", "out": "output"}
    assert port(found, "xu1.n").current_driven
    assert inside(found, "xu1.n") == {"cpd", "rsh", "rf", "xu1.*"}
    assert stage(found, "xu1").elements == ("cpd", "rsh", "rf")


def test_current_source_into_a_cable_before_the_virtual_ground() -> None:
    found = board("ipd 0 a ac 1\nccab a 0 1n\nrser a n 50\nrf n out 1meg\nxu1 0 n vp vn out gaugeamp")
    assert ports(found, "xu1") == {"a": "input signal", "out": "output"}
    assert inside(found, "xu1.a") == {"ccab", "rser"}
    assert port(found, "xu1.a").current_driven


def test_charge_amplifier() -> None:
    found = board("vs src 0 ac 1\ncs src n 1n\ncf n out 470p\nrf n out 100meg\nxu1 0 n vp vn out gaugeamp")
    assert ports(found, "xu1") == {"src": "input signal", "out": "output"}
    assert stage(found, "xu1").elements == ("cs", "cf", "rf")


def test_feedback_through_a_t_network() -> None:
    found = board("vin in 0 ac 1\nr1 in n 100k\nr2 n t 100k\nr3 t out 100k\nr4 t 0 2k\nxu1 0 n vp vn out gaugeamp")
    assert ports(found, "xu1") == {"in": "input signal", "out": "output"}
    assert set(stage(found, "xu1").elements) == {"r1", "r2", "r3", "r4"}
    assert inside(found, "xu1.out") == {"r3", "xu1.*"}


def test_multiple_feedback_has_a_port_behind_the_sources_only_element() -> None:
    found = board(
        "vin in 0 ac 1\nr1 in a 10k\nc1 a 0 1n\nr2 a out 10k\nr3 a n 10k\nc2 n out 100p\nxu1 0 n vp vn out gaugeamp"
    )
    assert ports(found, "xu1") == {"in": "input signal", "a": "input signal", "out": "output"}


def test_sallen_key_is_one_stage_with_a_port_behind_the_sources_only_element() -> None:
    found = board(
        "vin in 0 ac 1\nr1 in a 10k\nc1 a out 10n\nr2 a p 10k\nc2 p 0 4.7n\nxu1 p out vp vn out gaugeamp\nrl out 0 10k"
    )
    assert ports(found, "xu1") == {"in": "input signal", "a": "input signal", "out": "output"}
    assert inside(found, "xu1.a") == {"c1", "r2"}
    assert inside(found, "xu1.out") == {"c1", "xu1.*"}


def test_a_chain_gives_each_stage_its_own_side_of_every_node() -> None:
    found = board(
        "vin in 0 ac 1\nrs in p1 100\nxu1 p1 o1 vp vn o1 gaugeamp\nr1 o1 n2 10k\nr2 n2 o2 20k\n"
        "xu2 0 n2 vp vn o2 gaugeamp\nxu3 o2 n3 vp vn o3 gaugeamp\nr3 n3 0 10k\nr4 n3 o3 10k\nrl o3 0 600"
    )
    assert names(found) == ["xu1", "xu2", "xu3"]
    assert ports(found, "xu2") == {"o1": "input signal", "o2": "output"}
    assert inside(found, "xu1.o1") == {"xu1.*"}
    assert inside(found, "xu2.o1") == {"r1"}
    assert inside(found, "xu2.o2") == {"r2", "xu2.*"}
    assert inside(found, "xu3.o2") == {"xu3.*"}
    assert [s.elements for s in found.stages] == [("rs",), ("r1", "r2"), ("r3", "r4")]


def test_a_node_that_feeds_several_stages_is_a_port_of_each() -> None:
    found = board(
        "vin in 0 ac 1\nxu0 in a vp vn a gaugeamp\nr1 a n1 10k\nr2 n1 o1 20k\nxu1 0 n1 vp vn o1 gaugeamp\n"
        "r3 a n2 22k\nr4 n2 o2 22k\nxu2 0 n2 vp vn o2 gaugeamp\nxu3 a o3 vp vn o3 gaugeamp"
    )
    assert names(found) == ["xu0", "xu1", "xu2", "xu3"]
    assert [inside(found, f"xu{k}.a") for k in (1, 2, 3)] == [{"r1"}, {"r3"}, {"xu3.*"}]
    assert ports(found, "xu0") == {"in": "input signal", "a": "output"}


def test_two_inverting_stages_behind_one_source_resistor() -> None:
    found = board(
        "vin in 0 ac 1\nrs in a 1k\nr1 a n1 10k\nr2 n1 o1 20k\nxu1 0 n1 vp vn o1 gaugeamp\nr3 a n2 22k\nr4 n2 o2 22k\n"
        "xu2 0 n2 vp vn o2 gaugeamp"
    )
    assert names(found) == ["xu1", "xu2"]
    assert ports(found, "xu1") == {"a": "input signal", "o1": "output"}
    assert inside(found, "xu1.a") == {"r1"}
    assert inside(found, "xu2.a") == {"r3"}
    assert [s.elements for s in found.stages] == [("r1", "r2"), ("r3", "r4")]


def test_what_is_one_stages_own_before_the_shared_node_stays_its_own() -> None:
    found = board(
        "vin in 0 ac 1\nrs in a 1k\nr1 a b 5k\nc1 b 0 1n\nr5 b n1 5k\nr2 n1 o1 20k\nxu1 0 n1 vp vn o1 gaugeamp\n"
        "r3 a p 2k\nc3 p 0 1n\nxu2 p o2 vp vn o2 gaugeamp\nxu3 a o3 vp vn o3 gaugeamp"
    )
    assert names(found) == ["xu1", "xu2", "xu3"]
    assert stage(found, "xu1").elements == ("r1", "c1", "r5", "r2")
    assert inside(found, "xu1.a") == {"r1"}
    assert stage(found, "xu2").elements == ("r3", "c3")
    assert ports(found, "xu2") == {"a": "input signal", "o2": "output"}
    assert inside(found, "xu3.a") == {"xu3.*"}


def test_an_input_on_another_stages_feedback_network_is_a_port_there() -> None:
    found = board(
        "vin in 0 ac 1\nxu1 in fb vp vn o1 gaugeamp\nrf o1 fb 10k\nrg fb 0 1k\nxu2 fb o2 vp vn o2 gaugeamp\n"
        "r8 fb n3 10k\nr9 n3 o3 10k\nxu3 0 n3 vp vn o3 gaugeamp"
    )
    assert names(found) == ["xu1", "xu2", "xu3"]
    assert stage(found, "xu1").elements == ("rf", "rg")
    assert inside(found, "xu2.fb") == {"xu2.*"}
    assert inside(found, "xu3.fb") == {"r8"}
    assert ports(found, "xu1") == {"in": "input signal", "o1": "output"}


@pytest.mark.parametrize("second", ["m", "0"])
def test_feedback_over_two_amplifiers_makes_one_stage(second: str) -> None:
    plus, minus = ("m", "g2") if second == "m" else ("0", "g2")
    extra = "" if second == "m" else "\nr5 m g2 1k"
    found = board(
        f"vin in 0 ac 1\nr1 in p 10k\nrf p out 100k\nxu1 p q vp vn m gaugeamp\nc1 m q 100p\nr6 q 0 1k\nr3 g2 0 1k\n"
        f"r4 g2 out 1k\nxu2 {plus} {minus} vp vn out gaugeamp\nrl out 0 10k{extra}"
    )
    assert names(found) == ["xu1+xu2"]
    assert ports(found, "xu1+xu2") == {"in": "input signal", "p": "input signal", "m": "output", "out": "output"}
    assert [a.name for a in stage(found, "xu1+xu2").amplifiers] == ["xu1", "xu2"]


def test_a_loop_through_a_unity_source_holds_it() -> None:
    found = board(
        "vin in 0 ac 1\nr1 in n 10k\nxu1 0 n vp vn out gaugeamp\nro out x 100\ncx x 0 1n\nebuf y 0 x 0 1\nr2 y n 10k"
    )
    assert names(found) == ["xu1"]
    assert set(stage(found, "xu1").elements) == {"r1", "ro", "cx", "ebuf", "r2"}
    assert ports(found, "xu1") == {"in": "input signal", "out": "output"}


def test_a_unity_source_before_a_stage_drives_its_port() -> None:
    found = board("vin in 0 ac 1\nebuf b 0 in 0 2\nr1 b n 10k\nr2 n out 100k\nxu1 0 n vp vn out gaugeamp")
    assert ports(found, "xu1") == {"b": "input signal", "out": "output"}
    assert found.driver["b"] == "ebuf"
    quiet = board("vin in 0 ac 1\nvref r 0 2.5\nebuf b 0 r 0 1\nr1 in n 10k\nr2 n out 100k\nxu1 b n vp vn out gaugeamp")
    assert ports(quiet, "xu1") == {"in": "input signal", "b": "input reference", "out": "output"}


def test_loads_belong_to_nobody() -> None:
    found = board("vin in 0 ac 1\nxu1 in out vp vn out gaugeamp\nriso out x 50\nccab x 0 10n\nrt x 0 1k")
    assert stage(found, "xu1").elements == ()
    assert inside(found, "xu1.out") == {"xu1.*"}


def test_level_shift_by_a_voltage_source_still_belongs_to_the_output() -> None:
    found = board(
        "vin in 0 ac 1\nr1 in n 10k\nr2 n z 100k\nxu1 0 n vp vn out gaugeamp\nvz out z 1\nr3 z n2 1k\n"
        "r4 n2 o2 1k\nxu2 0 n2 vp vn o2 gaugeamp"
    )
    assert names(found) == ["xu1", "xu2"]
    assert found.driver["z"] == "xu1"
    assert ports(found, "xu2") == {"z": "input signal", "o2": "output"}
    assert ports(found, "xu1") == {"in": "input signal", "out": "output"}


def test_open_loop_amplifier_is_a_stage_of_its_own() -> None:
    found = board("vin in 0 ac 1\nvref ref 0 1\nxu1 in ref vp vn out gaugeamp\nrl out 0 1k")
    assert ports(found, "xu1") == {"in": "input signal", "ref": "input reference", "out": "output"}


# supplies and references


def test_soft_supplies_tie_nothing_together() -> None:
    found = partition_of(
        OPAMP + "vps ps 0 12\nvns ns 0 -12\nrps ps vpx 10\ncps vpx 0 10u\nlns ns vnx 1m\ncns vnx 0 10u\nvin in 0 ac 1\n"
        "r1 in n1 10k\nr2 n1 o1 20k\nxu1 0 n1 vpx vnx o1 gaugeamp\nr3 n2 0 10k\nr4 n2 o2 20k\n"
        "xu2 o1 n2 vpx vnx o2 gaugeamp\n" + AC
    )
    assert names(found) == ["xu1", "xu2"]
    assert found.references == ("vpx", "vnx")
    assert found.stiff["vpx"] == "rail"
    assert ports(found, "xu1") == {"in": "input signal", "o1": "output"}


REFERENCE = (
    "v5 v5 0 5\nrd1 v5 mid 10k\nrd2 mid 0 10k\ncd mid 0 {c}\nvin in 0 ac 1\ncin in a 10u\nr1 a n1 10k\nr2 n1 o1 20k\n"
    "xu1 mid n1 v5 0 o1 gaugeamp\nr3 o1 n2 10k\nr4 n2 o2 20k\nxu2 mid n2 v5 0 o2 gaugeamp\nrl o2 mid 10k"
)


def test_a_shared_reference_with_a_reservoir_keeps_stages_apart() -> None:
    found = board(REFERENCE.format(c="100u"))
    assert names(found) == ["xu1", "xu2"]
    assert found.references == ("mid",)
    assert ports(found, "xu1") == {
        "in": "input signal", "a": "input signal", "mid": "input reference", "o1": "output",
    }  # fmt: skip
    assert inside(found, "xu2.mid") == {"xu2.*"}
    assert {"rd1", "rd2", "cd", "rl"}.isdisjoint({n for s in found.stages for n in s.elements})


def test_a_reservoir_too_small_for_the_band_ties_what_hangs_on_it() -> None:
    found = board(REFERENCE.format(c="10n"))
    assert found.references == ()
    assert names(found) == ["xu1+xu2"]
    # 10 nF is 16 ohm at 1 MHz, below 1 % of the 10 kohm load
    assert board(REFERENCE.format(c="10n"), band=(1e6, 1e6)).references == ("mid",)


def test_a_bias_node_of_one_stage_is_part_of_it() -> None:
    found = board(
        "v5 v5 0 5\nrd1 v5 mid 10k\nrd2 mid 0 10k\ncd mid 0 100u\nvin in 0 ac 1\nr1 in n 10k\nr2 n o1 20k\n"
        "xu1 mid n v5 0 o1 gaugeamp"
    )
    assert found.references == ()
    assert ports(found, "xu1") == {"in": "input signal", "v5": "input reference", "o1": "output"}
    assert inside(found, "xu1.v5") == {"rd1"}


def test_a_filtered_signal_that_feeds_two_stages_is_no_reference() -> None:
    found = board(
        "vin in 0 ac 1\nrs in a 10k\nca a 0 1m\nrb a 0 100k\nxu1 a o1 vp vn o1 gaugeamp\nxu2 a o2 vp vn o2 gaugeamp"
    )
    assert found.references == ()
    assert ports(found, "xu1") == {"a": "input signal", "o1": "output"}


def test_gain_legs_on_a_reference_do_not_tie_their_stages() -> None:
    found = board(
        "v5 v5 0 5\nrd1 v5 mid 10k\nrd2 mid 0 10k\ncd mid 0 470u\nva a 0 2.5 ac 1\nvb b 0 2.5\n"
        "xu1 a n1 v5 0 o1 gaugeamp\n"
        "r1 n1 mid 10k\nr2 n1 o1 10k\nxu2 b n2 v5 0 o2 gaugeamp\nr3 n2 mid 10k\nr4 n2 o2 10k"
    )
    assert names(found) == ["xu1", "xu2"]
    assert ports(found, "xu1") == {"mid": "input reference", "a": "input signal", "o1": "output"}


def test_resistor_between_the_inverting_inputs_ties_two_stages() -> None:
    found = board(
        "va a 0 ac 1\nvb b 0 ac 0\nxu1 a n1 vp vn o1 gaugeamp\nxu2 b n2 vp vn o2 gaugeamp\nr1 o1 n1 10k\n"
        "rg n1 n2 1k\nr2 n2 o2 10k"
    )
    assert names(found) == ["xu1+xu2"]
    assert ports(found, "xu1+xu2") == {
        "a": "input signal", "b": "input signal", "o1": "output", "o2": "output",
    }  # fmt: skip


# blocks, open nets, further ports


def test_a_deck_without_sources_has_its_open_nets_as_ports() -> None:
    found = partition_of(
        OPAMP + "r1 sig n 10k\nr2 n o1 20k\nxu1 0 n vp vn o1 gaugeamp\nxu2 o1 out vp vn out gaugeamp\n"
        "xu3 direct o3 vp vn o3 gaugeamp\nrb bias 0 1meg\nxu4 bias o4 vp vn o4 gaugeamp\n"
    )
    assert ports(found, "xu1") == {"sig": "input signal", "o1": "output"}
    assert port(found, "xu1.sig").current_driven
    assert ports(found, "xu2") == {"o1": "input signal", "out": "output"}
    assert ports(found, "xu3") == {"direct": "input signal", "o3": "output"}
    assert port(found, "xu3.direct").current_driven
    assert ports(found, "xu4") == {"bias": "input signal", "o4": "output"}


def test_two_stages_on_one_open_net() -> None:
    found = partition_of(OPAMP + "r1 sig n 10k\nr2 n o1 20k\nxu1 0 n vp vn o1 gaugeamp\nxu2 sig o2 vp vn o2 gaugeamp\n")
    assert inside(found, "xu1.sig") == {"r1"}
    assert inside(found, "xu2.sig") == {"xu2.*"}
    assert not port(found, "xu1.sig").current_driven


BLOCK = OPAMP + (
    ".subckt entry sig ref vp vn out far\nr1 ref n 12k\nr2 n out 47k\nr3 sig p 12k\nr4 p 0 47k\n"
    "xa p n vp vn out gaugeamp\n"
    "riso out far 100\ncf far 0 1n\n.ends entry\n"
)


def test_the_pins_of_a_reviewed_block_are_its_ports() -> None:
    found = partition_of(BLOCK, subckt="entry")
    assert names(found) == ["xa"]
    assert ports(found, "xa") == {"ref": "input signal", "sig": "input signal", "out": "output", "far": "output"}
    assert found.stiff["vp"] == "rail"
    assert port(found, "xa.sig").current_driven


def test_stages_wrapped_in_subcircuits() -> None:
    found = board(
        ".subckt inner a b vp vn\nr1 a n 10k\nr2 n b 30k\nxu1 0 n vp vn b gaugeamp\n.ends\n.subckt outer a b vp vn\n"
        "xb a b vp vn inner\n.ends\nv1 i1 0 ac 1\nv2 i2 0 sin(0 1 1k)\nxa i1 o1 vp vn outer\nxc i2 o2 vp vn outer\n"
        "rl1 o1 0 10k\nrl2 o2 0 5k"
    )
    assert names(found) == ["xa.xb.xu1", "xc.xb.xu1"]
    assert ports(found, "xa.xb.xu1") == {"i1": "input signal", "o1": "output"}
    assert stage(found, "xc.xb.xu1").elements == ("xc.xb.r1", "xc.xb.r2")


def test_ports_asked_for_by_the_caller_and_by_the_deck() -> None:
    body = INVERTING.replace("rl out 0 10k", "rl out y 50\ncy y 0 1n\nvq q 0 1\nrq2 q w 1k\nrw w 0 1k")
    found = board("* xcheck: port n y\n* xcheck: port nowhere\n* xcheck: port\n* xcheck: port w\n" + body)
    assert ports(found, "xu1") == {"in": "input signal", "out": "output", "n": "output", "y": "output"}
    assert inside(found, "xu1.n") == {"r1", "r2", "xu1.*"}
    assert inside(found, "xu1.y") == {"rl", "cy"}
    first = 1 + (OPAMP + SUPPLIES).count("\n") + 2
    assert [(f.rule, f.place.line) for f in found.findings] == [("syntax", first + k) for k in range(3)]
    assert "no node `nowhere`" in found.findings[0].message
    assert "no stage" in found.findings[2].message
    assert ports(board(body, extra_ports=("N", "in")), "xu1") == {"in": "input signal", "out": "output", "n": "output"}
    with pytest.raises(CallError, match="no node `nowhere`"):
        board(body, extra_ports=("nowhere",))


def test_a_port_directive_inside_a_body_speaks_of_all_its_instances() -> None:
    found = board(
        ".subckt blk a b vp vn\n* xcheck: port n\nr1 a n 10k\nr2 n b 30k\nxu1 0 n vp vn b gaugeamp\n.ends\n"
        "v1 i1 0 ac 1\nxa i1 o1 vp vn blk\nxc o1 o2 vp vn blk\n"
    )
    assert set(ports(found, "xa.xu1")) == {"i1", "o1", "xa.n"}
    assert set(ports(found, "xc.xu1")) == {"o1", "o2", "xc.n"}


def test_ports_point_at_the_stages_element_and_at_the_amplifiers_card() -> None:
    deck = OPAMP + SUPPLIES + INVERTING + "\nxu2 out o2 vp vn o2 gaugeamp\n"
    found = partition_of(deck)
    lines = f"tide gauge\n{deck}".splitlines()

    def text_at(subject: str) -> str:
        place = port(found, subject).place
        return lines[place.line - 1][place.column - 1 : place.end_column - 1]

    assert text_at("xu1.in") == "in"
    assert lines[port(found, "xu1.in").place.line - 1].startswith("r1 ")
    assert text_at("xu1.out") == "xu1 0 n vp vn out gaugeamp"
    assert text_at("xu2.out") == "out"
    assert lines[port(found, "xu2.out").place.line - 1].startswith("xu2 ")


# amplifiers that are bare sources


def test_a_bare_source_with_its_resistors() -> None:
    found = partition_of(
        "vin in 0 ac 1\nr1 in n 10k\nr2 n out 100k\nrid n 0 2meg\ne1 x 0 0 n 100k\nro x out 75\nrl out 0 2k"
    )
    assert names(found) == ["e1"]
    (amplifier,) = found.amplifiers
    assert set(amplifier.elements) == {"e1", "ro", "rid"}
    assert amplifier.output == "out"
    assert ports(found, "e1") == {"in": "input signal", "out": "output"}
    assert stage(found, "e1").elements == ("r1", "r2")
    assert {t.element for t in port(found, "e1.out").inside} == {"r2", "ro"}


def test_a_bare_follower_keeps_input_and_output_apart() -> None:
    found = partition_of("vin in 0 ac 1\nrid in out 1meg\ne1 x 0 in out 1e5\nro x out 75\nrl out 0 1k\n")
    assert set(found.amplifiers[0].elements) == {"e1", "ro", "rid"}
    assert {(t.element, t.index) for t in port(found, "e1.in").inside} == {("rid", 0), ("e1", -1)}
    assert {(t.element, t.index) for t in port(found, "e1.out").inside} == {("rid", 1), ("e1", -1), ("ro", 1)}
    assert found.amplifiers[0].open_loop.values["output_resistance_ohm"].value == pytest.approx(75)


def test_bare_stages_in_a_chain() -> None:
    found = partition_of(
        "vin in 0 ac 1\nr1 in n1 10k\nr2 n1 o1 10k\ne1 o1 0 0 n1 1e5\nr3 o1 n2 10k\nr4 n2 o2 10k\n"
        "e2 x 0 0 n2 1e5\nro x o2 50\n"
        "g3 0 a o2 n3 1m\nra a 0 100meg\nca a 0 100p\ne3 b 0 a 0 1\nr3o b o3 40\nr5 n3 0 1k\nr6 n3 o3 9k\nrl o3 0 1k"
    )
    assert names(found) == ["e1", "e2", "g3"]
    assert ports(found, "g3") == {"o2": "input signal", "o3": "output"}
    assert set(found.amplifiers[2].elements) == {"g3", "ra", "ca", "e3", "r3o"}
