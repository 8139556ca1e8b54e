"""The house as a test: imports run one way, roads share no code, files stay small, start-up stays light."""

import ast
import subprocess
import sys
from pathlib import Path

import pytest

PACKAGE = Path(__file__).parent.parent / "xcheck"
MODULES = {
    ".".join(path.relative_to(PACKAGE.parent).with_suffix("").parts).removesuffix(".__init__"): path
    for path in sorted(PACKAGE.rglob("*.py"))
}
FLOW = """
    version errors place finding options notation parts deck project circuit elaboration linearisation stages
    topologies impedance simulate results frame reviewed rules report directives grid reviewing cli __main__
"""
ORDER = tuple(FLOW.split())
"""The data flow: a part imports only parts before it."""
ENTRY = ("xcheck", "xcheck.cli", "xcheck.__main__")
HEAVY = ("numpy", "scipy", "pandas", "PySpice", "matplotlib", "rich", "sympy", "pydantic")


def part_of(module: str) -> str:
    pieces = module.split(".")
    return pieces[1] if len(pieces) > 1 else ""


def imports_of(path: Path) -> set[str]:
    """Package modules that a file imports, in-function imports included, type-checking ones left out."""
    tree = ast.parse(path.read_text(encoding="utf-8"))
    hidden: set[ast.AST] = set()
    for node in ast.walk(tree):
        if isinstance(node, ast.If) and "TYPE_CHECKING" in ast.dump(node.test):
            hidden.update(ast.walk(node))
    found: set[str] = set()
    for node in ast.walk(tree):
        if node in hidden:
            continue
        if isinstance(node, ast.Import):
            found.update(alias.name for alias in node.names)
        elif isinstance(node, ast.ImportFrom) and node.module:
            found.add(node.module)
            found.update(f"{node.module}.{alias.name}" for alias in node.names)
    return {name for name in found if name in MODULES}


@pytest.mark.parametrize("module", [m for m in MODULES if m not in ENTRY])
def test_imports_run_one_way(module: str) -> None:
    part = part_of(module)
    assert part in ORDER, f"{module}: where in the flow does it belong?"
    for imported in imports_of(MODULES[module]):
        other = part_of(imported)
        if other and other != part:
            assert ORDER.index(other) < ORDER.index(part), f"{module} imports {imported}"


def test_no_cycle_between_modules() -> None:
    graph = {m: imports_of(p) - {m, "xcheck"} for m, p in MODULES.items()}
    done: set[str] = set()
    while len(done) < len(graph):
        # a package's __init__ may list its own modules; those do not count as importing the package
        free = {m for m, needs in graph.items() if m not in done and needs <= done | {m.rpartition(".")[0]}}
        assert free, f"cycle among {sorted(set(graph) - done)}"
        done |= free


def reachable(start: str) -> set[str]:
    seen: set[str] = set()
    open_ends = [start]
    while open_ends:
        module = open_ends.pop()
        if module not in seen:
            seen.add(module)
            open_ends += imports_of(MODULES[module])
    return seen


def test_the_three_roads_share_nothing_above_the_circuit() -> None:
    closed = reachable("xcheck.impedance.closed_form")
    ratio = reachable("xcheck.impedance.return_ratio")
    measured = {m for name in MODULES if part_of(name) == "simulate" for m in reachable(name)}
    shared_types = {"xcheck", "xcheck.impedance", "xcheck.impedance.types", "xcheck.topologies.types"}
    base = {m for m in MODULES if part_of(m) in {"", *ORDER[: ORDER.index("stages") + 1]}}
    assert closed & ratio - base - shared_types == set()
    assert closed & measured - base - shared_types == set()
    assert ratio & measured - base - shared_types == set()
    solvers = {"xcheck.circuit.equations", "xcheck.circuit.solution"}
    assert not solvers & {m for m in closed if part_of(m) in ("topologies", "impedance")}
    assert not solvers & measured


def modules_loaded_by(code: str) -> set[str]:
    script = f"import sys\n{code}\nprint(*sys.modules)"
    done = subprocess.run([sys.executable, "-c", script], capture_output=True, text=True, check=True)
    return {name.partition(".")[0] for name in done.stdout.split()}


def test_the_package_and_the_command_line_load_nothing_heavy() -> None:
    assert not set(HEAVY) & modules_loaded_by("import xcheck")
    assert not set(HEAVY) & modules_loaded_by("import xcheck.cli")


@pytest.mark.parametrize("path", [pytest.param(p, id=m) for m, p in MODULES.items()])
def test_files_stay_small(path: Path) -> None:
    assert len(path.read_text(encoding="utf-8").splitlines()) <= 500
