"""Decks whose bytes matter (line ends, encodings, titles, ends, continuations, comments), read as ngspice reads them;
and decks that ngspice refuses, of which a finding says so."""

import subprocess
from pathlib import Path

import pytest
from node_for_node import differences, prepared, run

BODY = "v1 a 0 1 ac 1\nr1 a b 1k\nr2 b 0 2k\nc1 b 0 1n\n"
PLAIN = "divider\n" + BODY
READ: dict[str, str | bytes] = {
    "CRLF": (PLAIN + "r3 b\n+ 0 3k\n.end\n").replace("\n", "\r\n"),
    "CRLF and LF mixed": PLAIN.replace("1k\n", "1k\r\n") + ".end\n",
    "carriage returns doubled": PLAIN.replace("\n", "\r\r\n") + ".end\r\r\n",
    "tabs": "divider\n\tv1\ta\t0 1\tac 1\nr1\ta\tb\t1k\n\t+\ttc1=0\nr2 b 0\t2k\t; x\n.end\n",
    "byte order mark": b"\xef\xbb\xbf" + PLAIN.encode() + b".end\n",
    "micro sign in UTF-8": "5 µV\n" + BODY + "* µ\nc2 b 0 1µ\nc3 b 0 {2*3µ}\nr3 aµ b 1k\nr4 aµ 0 2kΩ\n.end\n",
    "Greek letter mu": PLAIN + ".param k=2kΩ\nr3 b 0 3μ\nr4 b 0 {2*1μ}\nr5 b 0 {k}\n.end\n",
    "micro sign in Latin-1": (
        ("5 µV, 3 é\n" + BODY + "* ø\nc2 b 0 1µ ; 5 é\nc3 b 0 10µF\nr3 bµ b 1k\n.end\n").encode("latin-1")
    ),
    "control-Z": PLAIN + ".end\n\x1a",
    "control-Z without .end": PLAIN + "\x1a",
    "control-Z and line end": (PLAIN + "\x1a\n").replace("\n", "\r\n"),
    "no .end": PLAIN,
    "no final line end": PLAIN + "r3 b 0 2k",
    "no final line end after .end": PLAIN + ".end",
    "several .end": PLAIN + ".end\n.end\n.END\n",
    "cards after .end": PLAIN + ".end\nr3 b 0 1k\n\n* more\nr4 b\n+ 0 3k\n.end\nr5 b 0 5k\n",
    "words behind .END": PLAIN + ".END of the divider\n",
    "title like an element": "r9 a 0 1k\n" + BODY + ".end\n",
    "title like a model": ".model dx d\n" + BODY + ".end\n",
    "title .title": ".title divider\n" + BODY + ".title again\n.end\n",
    "title .end": ".end\n" + BODY + ".end\n",
    "title .control": ".control\n" + BODY + ".end\n",
    "title with a star": "* divider\n" + BODY + ".end\n",
    "title with a plus": "+ divider\n" + BODY + ".end\n",
    "title continued": "divider\n+ of two\n* and\n+ more\n" + BODY + ".end\n",
    "title that includes": ".include more.inc\n" + BODY + ".end\n",
    "title blank": "\n" + BODY + ".end\n",
    "title and more blank": "\n\n \t\n" + BODY + ".end\n",
    "plus after blanks and comments": PLAIN + "r3 b\n\n+ 0\n* c\n+ 1k\n\n\n; d\n  + tc1=0\n+\n.end\n",
    "backslashes at the end": PLAIN + "r3 b 0 \\\\\n 1k \\\\  \ntc1=0\nr4 b 0 2k\n.end\n",
    "comments in line": PLAIN
    + "r3 b 0 2k // c\nr4 b 0 2k;c\nr5 b 0 3k,$c\nr6 b 0 3k $c\nr7 b 0 3k\t$ c\nr8 b$1 0 1k\nr9 b$1 b 1k\n.end\n",
    "quotes in a comment": PLAIN + "r3 b 0 '2k' ; it's \"x\nr4 b 0 {2k} $ {x\n.end\n",
    "form feed": PLAIN.replace("r2", "\x0c\nr2") + ".end\n",
    "commas and blanks": "divider\nv1   a\t \t0 1 ac 1\n   r1 a b 1k   \nr2,b,0,2k\nr3 (b 0) 2k\n.end   \n",
    "capitals": PLAIN.upper().replace(" 0", " GND") + "R3 B Gnd 1K\n.END\n",
    "names like ground": PLAIN
    + "r3 b gnd! 1k\nr4 gnd! 0 1k\nr5 b 00 1k\nr6 00 0 1k\nr7 b 01 1k\nr8 01 1 1k\nr9 1 0 1k\n",
    "unused and broken": PLAIN
    + ".subckt u a\nr1 a 0 {1\n#x\nr2 a\nd1 a 0 nothere\nx1 a b nosub\nr3 a 0 {nope}\nzz\n.ends\n.end\n",
    ".ends with another name": PLAIN + "x1 a b s\n.subckt s a b\nr1 a b 1k\n.ends wrong\n.end\n",
    ".macro and .eom": PLAIN + "x1 a b s\n.macro s a b\nr1 a b 1k\n.eom\n.end\n",
    "comment inside a model": PLAIN + "d1 a b dx\n.model dx d(\n*cjo=2p\n+ is=1e-13 $ c\n+ )\n.end\n",
    "cards that change nothing": PLAIN
    + ".option noacct\n.options post=1\n.probe v(b)\n.save all\n.width out=80\n.end\n",
    ".end in an include": PLAIN + ".include ended.inc\nr4 b 0 5k\n.end\n",
    "quoted node": PLAIN + 'r3 b "x" 1k\nr4 x 0 1k\n.end\n',
}  # fmt: skip
REFUSED: dict[str, tuple[str | bytes, str, int]] = {
    "title .param": (".param x=3\n" + BODY, "syntax", 1),
    "title .subckt": (".subckt x y\n" + BODY, "syntax", 1),
    "library without a section": (PLAIN + ".lib more.inc\n", "syntax", 6),
    "library without a file": (PLAIN + ".lib nothere.lib s\n", "file-missing", 6),
    "library without the section": (PLAIN + ".lib more.inc s\n", "file-missing", 6),
    "include without a file": (PLAIN + ".include nothere.inc\n", "file-missing", 6),
    "name with a blank, not quoted": (PLAIN + ".include with blank.inc\n", "file-missing", 6),
    "library with a blank, quoted": (PLAIN + '.lib "with blank.lib" s\n', "file-missing", 6),
    "subcircuit left open": (PLAIN + ".subckt s a b\nr1 a b 1k\n", "syntax", 6),
    "net that begins with a dollar": (PLAIN + "r3 b $n_0001 1k\nd1 b $n_0001 dx\n.model dx d\n", "syntax", 6),
    "net with braces": (PLAIN + "r3 b net{slash}a 1k\n", "undefined-parameter", 6),
    "words after .end": (PLAIN + ".end\nsome text\n", "text-after-end", 7),
    "bytes that are no UTF-8": ((PLAIN + "r3 é 0 1k\n").encode("latin-1"), "syntax", 6),
    "word behind a value": (PLAIN + "r3 b 0 10 ohm\n", "syntax", 6),
    "carriage returns alone": (PLAIN.replace("\n", "\r"), "syntax", 1),
    "no subcircuit of that name": (PLAIN + "x1 a b nothere\nx2 a b nothere\n", "undefined-model", 6),
    "no parameters": (PLAIN + "x1 a b s r=1k\n.subckt s a b\nr1 a b 1k\n.ends\n", "undefined-parameter", 6),
    "a transfer function in a source": (PLAIN + "e1 e 0 LAPLACE {v(b)} {1/(1+s)}\n", "syntax", 6),
    "the current of nothing": (PLAIN + "f1 0 b vx 2\n", "undefined-parameter", 6),
    "a function of parameters in a source": (PLAIN + "b1 e 0 v=int(v(b))\n", "undefined-parameter", 6),
    "a function of sources in a parameter": (PLAIN + "r3 b 0 {u(1)}\n", "undefined-parameter", 6),
    "one element twice": (PLAIN + "r2 b 0 3k\n", "duplicate-name", 6),
}


def written(folder: Path, deck: str | bytes) -> None:
    (folder / "deck.cir").write_bytes(deck.encode() if isinstance(deck, str) else deck)
    (folder / "more.inc").write_text("r7 b 0 7k\n")
    (folder / "ended.inc").write_text("r7 b 0 7k\n.end\nr8 b 0 8k\n")
    (folder / "with blank.inc").write_text("r7 b 0 7k\n")
    (folder / "with blank.lib").write_text(".lib s\nr7 b 0 7k\n.endl\n")


@pytest.mark.engine
@pytest.mark.parametrize("name", READ)
def test_bytes_read_as_in_ngspice(name: str, tmp_path: Path) -> None:
    written(tmp_path, READ[name])
    case = prepared(tmp_path)
    unused = [f for f in case.circuit.deck.findings if name == "unused and broken"]
    errors = [f for f in (*case.circuit.deck.findings, *case.circuit.findings) if f.level == "error"]
    assert [f for f in errors if f not in unused] == []
    assert {"a", "b"} <= set(case.circuit.nodes)
    run([case])
    assert not differences(case)


@pytest.mark.engine
@pytest.mark.parametrize("name", REFUSED)
def test_what_ngspice_refuses_is_told(name: str, tmp_path: Path) -> None:
    deck, rule, line = REFUSED[name]
    written(tmp_path, deck)
    (tmp_path / "driver.cir").write_text("driver\n.control\nsource deck.cir\nop\nprint v(b)\n.endc\n.end\n")
    done = subprocess.run(
        ["ngspice", "-b", "driver.cir"],
        cwd=tmp_path,
        stdin=subprocess.DEVNULL,
        capture_output=True,
        timeout=60,
        check=False,
    )
    assert b"v(b) =" not in done.stdout, "ngspice takes it"
    case = prepared(tmp_path)
    findings = (*case.circuit.deck.findings, *case.circuit.findings)
    told = [f for f in findings if (f.rule, f.place.line) == (rule, line)]
    assert told, findings
