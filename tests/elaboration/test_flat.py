"""The flat deck: what it calls things, and what it leaves out."""

from xcheck.deck.reader import read_text
from xcheck.elaboration import elaborate
from xcheck.elaboration.flat import flat_deck, write_flat


def test_names_are_kept_where_they_are_safe() -> None:
    text = "t\nr1 in n_1 1k\nr+2 n_1 net-a 2k\nx1 net-a b+ s\n.subckt s p q\nr1 p q 3k\n.ends\n.end\n"
    flat = flat_deck(elaborate(read_text(text)))
    assert flat.nodes == {"in": "in", "n_1": "n_1", "net-a": "n_2", "b+": "n_3", "0": "0"}
    assert flat.names == {"r1": "r1", "r+2": "r_1", "x1.r1": "r_2"}
    assert flat.text.splitlines()[2:] == ["r1 in n_1 1000.0", "r_1 n_1 n_2 2000.0", "r_2 n_2 n_3 3000.0", ".end"]


def test_a_model_is_written_once_and_its_values_are_put_in() -> None:
    text = "t\n.param i={2e-14}\nd1 a 0 dx\nd2 a 0 dx\n.model DX D(is={i/2} rs=1)\n.end\n"
    flat = write_flat(elaborate(read_text(text)))
    assert flat.count(".model") == 1
    assert ".model m_1 d (is=1e-14 rs=1)" in flat


def test_what_has_no_value_is_a_comment() -> None:
    text = "t\nr1 a 0 {none}\nx1 a 0 nothere\nf1 a 0 vx 2\ne1 a 0 laplace {v(b)} {1/(1+s)}\nr2 a 0 1k\n.end\n"
    flat = flat_deck(elaborate(read_text(text)))
    assert [line for line in flat.text.splitlines() if line.startswith("*")] == [
        "* flat circuit", "* left out: f1", "* left out: r1", "* left out: x1", "* left out: e1",
    ]  # fmt: skip
    assert set(flat.names) == {"r2"}


def test_a_tree_is_written_so_that_its_order_holds() -> None:
    text = "t\n.param k=-2\nb1 a 0 v=v(b)>1 ? v(b)**2*k : (v(c)<0 ? 1 : -v(b,c))\n.end\n"
    assert "b1 a 0 v=(((v(b)>1.0)) ? (((v(b)**2.0)*(-2.0))) : ((((v(c)<0.0)) ? (1.0) : ((-v(b,c))))))\n" in write_flat(
        elaborate(read_text(text))
    )
