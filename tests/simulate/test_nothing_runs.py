"""No deck may run a command, write a file, or have ngspice read one. Each case comes with its control: the same
text given to ngspice directly does what is refused here, so that a test that passes means something."""

import os
import subprocess
import sys
from pathlib import Path

import pytest

from xcheck.options import Options
from xcheck.reviewing import review
from xcheck.simulate.engine import library_path

BODY = """v1 in 0 dc 0 ac 1
r1 in n 10k
r2 n out 100k
e1 a 0 0 n 100k
ro a out 50
rid n 0 1meg
rl out 0 10k
.ac dec 10 1 1k
"""

CASES = {
    "control block": BODY + ".control\nshell touch MARK\n.endc\n.end\n",
    "commands in comments": BODY + "*#shell touch MARK\n.end\n",
    "control block after the end": BODY + ".end\n.control\nshell touch MARK\n.endc\n",
    "written results": BODY + ".control\nrun\nwrite MARK\n.endc\n.end\n",
}


def run_raw(folder: Path, deck: str) -> None:
    (folder / "raw.cir").write_text(deck)
    environment = {**os.environ, "HOME": str(folder)}
    subprocess.run(
        ["ngspice", "-b", "raw.cir"], cwd=folder, env=environment, capture_output=True, timeout=60, check=False,
        stdin=subprocess.DEVNULL,
    )  # fmt: skip


@pytest.mark.engine
@pytest.mark.parametrize("name", CASES)
def test_commands_in_a_deck_are_not_executed(name: str, tmp_path: Path) -> None:
    control, own = tmp_path / "control", tmp_path / "own"
    for folder in (control, own):
        folder.mkdir()
    run_raw(control, "title\n" + CASES[name].replace("MARK", str(control / "mark")))
    assert (control / "mark").exists(), "ngspice itself did not do it: the case proves nothing"
    deck = own / "deck.cir"
    deck.write_text("title\n" + CASES[name].replace("MARK", str(own / "mark")))
    before = sorted(own.iterdir())
    outcome = review(deck, options=Options(engine="ngspice"))
    assert sorted(own.iterdir()) == before
    evidence = outcome.decks[0].evidence
    assert evidence is not None
    assert evidence.simulation is not None
    assert evidence.simulation.values, evidence.simulation.failure
    rules = {f.rule for f in outcome.findings}
    assert rules & {"command-ignored", "text-after-end"}


@pytest.mark.engine
@pytest.mark.parametrize("where", ["beside the deck", "home"])
def test_a_start_up_file_is_not_executed(where: str, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    mark = tmp_path / "mark"
    (tmp_path / ".spiceinit").write_text(f"shell touch {mark}\n")
    run_raw(tmp_path, "title\n" + BODY + ".end\n")
    assert mark.exists(), "ngspice itself did not do it: the case proves nothing"
    mark.unlink()
    deck = tmp_path / "deck.cir"
    deck.write_text("title\n" + BODY + ".end\n")
    monkeypatch.setenv("HOME", str(tmp_path))
    monkeypatch.chdir(tmp_path)
    evidence = review(deck, options=Options(engine="ngspice")).decks[0].evidence
    assert evidence is not None
    assert evidence.simulation is not None
    assert evidence.simulation.values, evidence.simulation.failure
    assert not mark.exists()


@pytest.mark.parametrize(
    "card", [".exec touch MARK", ".codemodel MARK", "codemodel MARK", "shell touch MARK", ".shell touch MARK",
             ".param x='`touch MARK`'", ".options savecurrents post=2 file=MARK", ".print ac v(out) > MARK",
             ".meas ac z find v(out) at=1k", ".save all"],
)  # fmt: skip
@pytest.mark.engine
def test_odd_cards_do_nothing(card: str, tmp_path: Path) -> None:
    deck = tmp_path / "deck.cir"
    mark = tmp_path / "mark"
    deck.write_text("title\n" + BODY + card.replace("MARK", str(mark)) + "\n.end\n")
    outcome = review(deck, options=Options(engine="ngspice"))
    assert not mark.exists()
    assert outcome.decks[0].evidence is not None


@pytest.mark.engine
def test_a_model_that_opens_a_file_is_left_out(tmp_path: Path) -> None:
    deck = tmp_path / "deck.cir"
    secret = tmp_path / "secret.txt"
    secret.write_text("0 1\n1 2\n")
    deck.write_text(
        "title\n" + BODY + f'afile %v([f]) filesrc\nrf f 0 1k\n.model filesrc filesource (file="{secret}")\n.end\n'
    )
    evidence = review(deck, options=Options(engine="ngspice")).decks[0].evidence
    assert evidence is not None
    assert evidence.simulation is not None
    left_out = " ".join(evidence.simulation.left_out)
    assert "filesource" in left_out
    assert "afile" in left_out


def test_nothing_of_an_outside_file_is_shown(tmp_path: Path) -> None:
    inside, outside = tmp_path / "project", tmp_path / "other"
    inside.mkdir()
    outside.mkdir()
    (outside / "secret.lib").write_text("r_secret_name a b 1k\n")
    (inside / "link.lib").symlink_to(outside / "secret.lib")
    deck = inside / "deck.cir"
    for wanted in (str(outside / "secret.lib"), "../other/secret.lib", "link.lib"):
        deck.write_text(f"title\n.include {wanted}\n{BODY}.end\n")
        outcome = review(deck, options=Options(engine="none"))
        finding = next(f for f in outcome.findings if f.rule == "include-outside")
        assert finding.place.line == 2
        assert "secret_name" not in str(outcome.decks[0].findings)
        allowed = review(deck, options=Options(engine="none", include_dirs=(outside,)))
        assert "include-outside" not in {f.rule for f in allowed.findings}
        evidence = allowed.decks[0].evidence
        assert evidence is not None
        assert "r_secret_name" in evidence.circuit.by_name


def seen_by_raw_ngspice(folder: Path, lines: list[str], commands: list[str]) -> None:
    """Loads lines in ngspice through PySpice as they stand and runs commands, without any of the worker's walls."""
    script = folder / "raw.py"
    script.write_text(
        "from PySpice.Spice.NgSpice.Shared import NgSpiceShared\n"
        "spice = NgSpiceShared.new_instance()\n"
        f"steps = [lambda: spice.load_circuit({chr(10).join(lines)!r})]\n"
        f"steps += [lambda c=c: spice.exec_command(c) for c in {commands!r}]\n"
        "for step in steps:\n"
        "    try:\n        step()\n"
        "    except Exception as error:\n        print(error)\n"
    )
    library = {"NGSPICE_LIBRARY_PATH": os.environ.get("NGSPICE_LIBRARY_PATH", library_path())}
    subprocess.run(
        [sys.executable, "-W", "ignore", str(script)], cwd=folder, env={**os.environ, **library}, timeout=60,
        capture_output=True, check=False, stdin=subprocess.DEVNULL,
    )  # fmt: skip


@pytest.mark.engine
def test_an_unusual_line_end_hides_no_command(tmp_path: Path) -> None:
    hidden = "r9 out 0 1k ; \u2028.control\u2028shell touch MARK\u2028.endc\u2028r8 out 0 1k"
    control, own = tmp_path / "control", tmp_path / "own"
    control.mkdir()
    own.mkdir()
    raw = "title\n" + BODY + hidden.replace("MARK", str(control / "mark")).replace(" ; ", " ") + "\n.end"
    seen_by_raw_ngspice(control, raw.split("\n"), [])
    assert (control / "mark").exists(), "ngspice itself did not do it: the case proves nothing"
    for text in (hidden, hidden.replace(" ; ", " ")):
        (own / "deck.cir").write_text("title\n" + BODY + text.replace("MARK", str(own / "mark")) + "\n.end\n")
        review(own / "deck.cir", options=Options(engine="ngspice"))
        assert not (own / "mark").exists()


@pytest.mark.engine
@pytest.mark.parametrize("quote", ["`touch${IFS}MARK`", "a;shell${IFS}touch${IFS}MARK", "a>MARK"])
def test_a_name_is_no_command(quote: str, tmp_path: Path) -> None:
    mark = tmp_path / "mark"
    name = quote.replace("MARK", str(mark))
    block = ".subckt blk i o\nr1 i n 10k\nr2 n o 100k\ne1 a 0 0 n 100k\nro a o 50\nrid n 0 1meg\n.ends\n"
    deck = tmp_path / "deck.cir"
    deck.write_text(f"title\n{block}v1 in 0 ac 1\nx{name} in out blk\nrl out 0 10k\n.ac dec 10 1 1k\n.end\n")
    outcome = review(deck, options=Options(engine="ngspice"))
    assert outcome.decks[0].evidence is not None
    assert sorted(p.name for p in tmp_path.iterdir()) == ["deck.cir"]


@pytest.mark.engine
def test_a_name_would_be_a_command_to_ngspice_itself(tmp_path: Path) -> None:
    mark = tmp_path / "mark"
    lines = ["title", *BODY.strip().splitlines(), ".end"]
    seen_by_raw_ngspice(tmp_path, lines, [f"save v(x`touch {mark}`)"])
    assert mark.exists(), "the case above would prove nothing"
