"""Hostile input through the whole command: a clear word, a known exit status, bounded time and memory,
and nothing written outside the folder that was asked for."""

import os
import resource
import subprocess
import sys
import time
from collections.abc import Callable
from pathlib import Path

import pytest

SECONDS = 20.0
BYTES = 1_500_000_000


def repeat(path: Path, piece: bytes, times: int) -> None:
    with path.open("wb") as file:
        block = piece * 1000
        for _ in range(times // 1000):
            file.write(block)


def include_itself(folder: Path) -> None:
    (folder / "deck.cir").write_text("loop\n.include deck.cir\nr1 a 0 1k\n.end\n")


def include_each_other(folder: Path) -> None:
    (folder / "deck.cir").write_text("loop\n.include a.inc\n.end\n")
    (folder / "a.inc").write_text(".include b.inc\n")
    (folder / "b.inc").write_text(".include a.inc\n")


def nested_includes(folder: Path) -> None:
    (folder / "deck.cir").write_text("deep\n.include i0.inc\n.end\n")
    for k in range(10_000):
        (folder / f"i{k}.inc").write_text(f".include i{k + 1}.inc\nr{k} a 0 1k\n")


def recursive_subcircuit(folder: Path) -> None:
    (folder / "deck.cir").write_text(
        "recursion\n.subckt a p q\nx1 p q b\n.ends\n.subckt b p q\nx1 p q a\n.ends\nxa 1 0 a\n.end\n"
    )


def exponential_subcircuits(folder: Path) -> None:
    text = "doubling\n.subckt s0 p q\nr1 p q 1k\n.ends\n"
    for k in range(1, 40):
        text += f".subckt s{k} p q\nx1 p q s{k - 1}\nx2 p q s{k - 1}\n.ends\n"
    (folder / "deck.cir").write_text(text + "xa 1 0 s39\n.end\n")


def recursive_parameters(folder: Path) -> None:
    (folder / "deck.cir").write_text(
        "recursion\n.param a={b+1} b={a+1}\n.func f(x) {f(x)+1}\nr1 1 0 {a}\nr2 1 0 {f(2)}\n.end\n"
    )


def deep_parentheses(folder: Path) -> None:
    depth = 10_000
    (folder / "deck.cir").write_text(
        f"deep\n.param a={{{'(' * depth}1{')' * depth}}}\nr1 1 0 {{a}}\n"
        f"r2 1 0 {{{'(' * depth}1}}\nr3 1 0 {{{'-' * depth}1}}\nr4 1 0 {{{'1?' * depth}1}}\n.end\n"
    )


def long_line(folder: Path) -> None:
    repeat(folder / "deck.cir", b"r1 a b 1k * ", 4_200_000)


def million_lines(folder: Path) -> None:
    with (folder / "deck.cir").open("w") as file:
        file.write("many\n")
        file.writelines(f"r{k} n{k} n{k + 1} 1k\n" for k in range(1_000_000))


def million_continuations(folder: Path) -> None:
    with (folder / "deck.cir").open("w") as file:
        file.write("many\nr1 a b 1k\n")
        file.writelines("+ x\n" for _ in range(1_000_000))


def zero_bytes(folder: Path) -> None:
    (folder / "deck.cir").write_bytes(b"zeros\nr1 a\x00b 0 1k\n\x00\x00\nr2 a 0 1k\n.end\n")


def utf_16(folder: Path) -> None:
    (folder / "deck.cir").write_bytes("wide\nr1 a 0 1k\nv1 a 0 ac 1\n.ac dec 10 1 1k\n.end\n".encode("utf-16"))


def utf_16_without_mark(folder: Path) -> None:
    (folder / "deck.cir").write_bytes("wide\nr1 a 0 1k\n.end\n".encode("utf-16-le"))


def pipe_as_include(folder: Path) -> None:
    os.mkfifo(folder / "pipe.inc")
    (folder / "deck.cir").write_text("pipe\n.include pipe.inc\nr1 a 0 1k\n.end\n")


def device_as_include(folder: Path) -> None:
    (folder / "deck.cir").write_text("device\n.include /dev/zero\n.lib /dev/random x\nr1 a 0 1k\n.end\n")


def link_to_a_device(folder: Path) -> None:
    (folder / "zero.inc").symlink_to("/dev/zero")
    (folder / "deck.cir").write_text("device\n.include zero.inc\nr1 a 0 1k\n.end\n")


def pipe_as_deck(folder: Path) -> None:
    os.mkfifo(folder / "deck.cir")


def folder_as_include(folder: Path) -> None:
    (folder / "sub.inc").mkdir()
    (folder / "deck.cir").write_text("folder\n.include sub.inc\nr1 a 0 1k\n.end\n")


def singular_circuit(folder: Path) -> None:
    (folder / "deck.cir").write_text(
        "singular\nv1 a 0 1\nv2 a 0 2 ac 1\nl1 b c 1m\nl2 c b 1m\ne1 d 0 d 0 1\nr1 a n 1k\nr2 n o 10k\n"
        "e2 o 0 0 n 1e5\n.ac dec 10 1 1k\n.end\n"
    )


def empty(folder: Path) -> None:
    (folder / "deck.cir").write_bytes(b"")


def huge_numbers(folder: Path) -> None:
    (folder / "deck.cir").write_text(
        f"numbers\nr1 a 0 1e999\nr2 a 0 {'9' * 100_000}\nc1 a 0 -1e-999\nv1 a 0 ac 1e400\n"
        "r3 a 0 {1e300*1e300}\nr4 a 0 {10**10**10**10}\nr5 a 0 {exp(1e9)}\n.ac dec 10 0 1e999\n.end\n"
    )


def endless_polynomial(folder: Path) -> None:
    terms = " ".join(["1"] * 3000)
    (folder / "deck.cir").write_text(f"poly\ne1 a 0 poly(1) b 0 {terms}\nr1 a 0 1k\nv1 b 0 1 ac 1\n.end\n")


def endless_sum(folder: Path) -> None:
    terms = "+".join(["v(b)*v(b)"] * 3000)
    (folder / "deck.cir").write_text(f"sum\nb1 a 0 v={terms}\nr1 a 0 1k\nv1 b 0 1 ac 1\n.end\n")


def devices_with_commands_for_names(folder: Path) -> None:
    names = "\n".join(
        f"{name} a 0 dd" for name in ("d`touch$IFSpwned`", "d$(touch$IFSpwned)", "d;touch$IFSpwned", "d|sh")
    )
    (folder / "deck.cir").write_text(f"names\n.model dd d is=1e-14\n{names}\nr1 a b 1k\nv1 b 0 1 ac 1\n.end\n")


def missing(folder: Path) -> None:
    assert not (folder / "deck.cir").exists()


CASES: list[Callable[[Path], None]] = [
    include_itself, include_each_other, nested_includes, recursive_subcircuit, exponential_subcircuits,
    recursive_parameters, deep_parentheses, long_line, million_lines, million_continuations, zero_bytes,
    utf_16, utf_16_without_mark, pipe_as_include, device_as_include, link_to_a_device, pipe_as_deck,
    folder_as_include, endless_polynomial, endless_sum, devices_with_commands_for_names,
    singular_circuit, empty, huge_numbers, missing,
]  # fmt: skip


def limit_memory() -> None:
    # numerical libraries reserve address space for threads that they never touch: one thread keeps it honest
    resource.setrlimit(resource.RLIMIT_AS, (BYTES + 700_000_000, BYTES + 700_000_000))


def run(folder: Path, *arguments: str) -> tuple[subprocess.CompletedProcess[str], float]:
    environment = {**os.environ, "OPENBLAS_NUM_THREADS": "1", "HOME": str(folder)}
    start = time.monotonic()
    done = subprocess.run(
        [sys.executable, "-m", "xcheck", "review", *arguments],
        cwd=folder, env=environment, capture_output=True, text=True, timeout=120, preexec_fn=limit_memory,
        stdin=subprocess.DEVNULL, check=False,
    )  # fmt: skip
    return done, time.monotonic() - start


@pytest.mark.engine
@pytest.mark.parametrize("build", CASES, ids=lambda f: f.__name__)
def test_a_hostile_deck_gets_a_clear_answer(build: Callable[[Path], None], tmp_path: Path) -> None:
    build(tmp_path)
    before = {p.name for p in tmp_path.iterdir()}
    done, seconds = run(tmp_path, "deck.cir")
    assert done.returncode in (0, 1, 2), done.stderr[-2000:]
    assert "Traceback" not in done.stdout + done.stderr
    assert (done.stdout + done.stderr).strip(), "nothing was said"
    assert seconds < SECONDS
    assert {p.name for p in tmp_path.iterdir()} == before, "something was written"


def test_an_output_folder_that_cannot_be_written(tmp_path: Path) -> None:
    (tmp_path / "deck.cir").write_text("small\nr1 a 0 1k\n.end\n")
    for target in ("missing/review.json", "/proc/review.json", "."):
        done, _ = run(tmp_path, "deck.cir", "--engine", "none", "--format", "json", "--out", target)
        assert done.returncode == 2
        assert "Traceback" not in done.stderr
        assert target.rstrip(".") in done.stderr
