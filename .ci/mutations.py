"""Break every equation, constant, limit and schedule in turn; each break must fail a test.

Mutations: a number 1 % larger, < for <=, a sign turned. Each is made in a copy of the tree, the tests
that speak of the file are run until the first failure. Survivors must stand in
``mutation_survivors.toml`` with a reason; others are listed and end the run with status 1.

    python .ci/mutations.py [--only PART_OF_PATH] [--sample N]
"""

from __future__ import annotations

import argparse
import ast
import contextlib
import gc
import os
import re
import shutil
import subprocess
import sys
import tempfile
import time
import tomllib
import types
from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path

ROOT = Path(__file__).resolve().parents[1]
ACCEPTED = ROOT / ".ci" / "mutation_survivors.toml"

#: Tests that speak of a file, by the beginning of its path, quickest first: the first match counts.
#: "rows PREFIX ..." are the published rows of the equations that begin with a prefix.
TESTS = {
    "gasphys/limits": ["tests/data/test_transcriptions.py", "tests/floors/test_review.py", "tests/doses"],
    "gasphys/schedules": [
        "tests/data/test_transcriptions.py",
        "tests/schedules",
        "tests/floors/test_doses_along.py",
    ],
    "gasphys/person_defaults": ["tests/data/test_transcriptions.py", "tests/floors/test_person.py"],
    "gasphys/dry_air": ["tests/data/test_transcriptions.py", "tests/floors/test_exposure.py"],
    "gasphys/constants": [
        "rows laws. lungs. blood. surroundings.",
        "rows real_gas. doses. bubbles.",
        "tests/bubbles/test_published_data.py",
        "tests/data/test_transcriptions.py",
        "tests/twins/test_surroundings.py",
    ],
    "gasphys/real_gas": ["rows real_gas.", "tests/real_gas"],
    "gasphys/doses": ["rows doses.", "tests/doses", "tests/properties/test_doses.py"],
    "gasphys/tissues": ["rows tissues.", "tests/properties/test_tissues.py", "tests/tissues"],
    "gasphys/bubbles": [
        "rows bubbles.",
        "tests/properties/test_bubbles.py",
        "tests/bubbles/test_published_data.py",
        "tests/bubbles/test_nuclei.py",
        "tests/bubbles",
    ],
    "gasphys/ascent": ["tests/properties/test_ascent.py", "tests/ascent"],
    "gasphys/blood": ["rows blood.", "tests/lungs_and_blood", "tests/properties/test_lungs_and_blood.py"],
    "gasphys/lungs": ["rows lungs.", "tests/lungs_and_blood", "tests/properties/test_lungs_and_blood.py"],
    "gasphys/vapor": ["rows lungs. vapor.", "tests/lungs_and_blood", "tests/twins"],
    "gasphys/breathing/": ["rows breathing.", "tests/breathing", "tests/properties/test_breathing.py"],
    "gasphys/breathing_gas": ["rows breathing_gas.", "tests/properties/test_floor_equations.py"],
    "gasphys/gas_exchange": [
        "rows gas_exchange.",
        "tests/gas_exchange",
        "tests/properties/test_gas_exchange.py",
    ],
    "gasphys/risk": ["rows risk.", "tests/properties/test_risk.py", "tests/risk"],
    "gasphys/chamber/equations": ["rows chamber.", "tests/properties/test_chamber.py"],
    "gasphys/laws": [
        "rows laws.",
        "tests/properties/test_laws_and_surroundings.py",
        "tests/properties/test_floor_equations.py",
    ],
    "gasphys/supply": ["rows supply.", "tests/properties/test_supply.py", "tests/supply"],
    "gasphys/surroundings": [
        "rows surroundings.",
        "tests/properties/test_laws_and_surroundings.py",
        "tests/properties/test_floor_equations.py",
        "tests/twins/test_surroundings.py",
    ],
}

#: Files whose equations and numbers are broken.
CODE = [
    "gasphys/vapor.py",
    "gasphys/laws.py",
    "gasphys/surroundings.py",
    "gasphys/breathing_gas.py",
    "gasphys/lungs*",
    "gasphys/blood*",
    "gasphys/real_gas/*.py",
    "gasphys/gas_exchange/equations.py",
    "gasphys/breathing/*.py",
    "gasphys/doses/*.py",
    "gasphys/tissues/equations.py",
    "gasphys/bubbles/equations.py",
    "gasphys/risk/equations.py",
    "gasphys/supply/equations.py",
    "gasphys/chamber/equations.py",
    "gasphys/constants.py",
]
DATA = [
    "gasphys/limits/*.toml",
    "gasphys/schedules/*.csv",
    "gasphys/dry_air.toml",
    "gasphys/person_defaults.toml",
    "gasphys/breathing/*.csv",
    "gasphys/doses/*.csv",
    "gasphys/blood/*.csv",
    "gasphys/real_gas/*.toml",
    "gasphys/tissues/**/*.toml",
    "gasphys/tissues/**/*.csv",
    "gasphys/bubbles/*.toml",
    "gasphys/bubbles/*.csv",
]


@dataclass(frozen=True)
class Mutant:
    """One break: the file, what was done where, and the file's text after it."""

    path: str
    label: str
    text: str
    #: Name, first line and source of the one function that is broken; "" where it is not of one body.
    function: str = ""
    line: int = 0
    body: str = ""


def code_files() -> Iterator[Path]:
    """Yield the Python files that hold equations."""
    for pattern in CODE:
        for path in sorted(ROOT.glob(pattern)):
            if path.is_dir():
                yield from sorted(path.glob("*.py"))
            else:
                yield path


class _Places(ast.NodeVisitor):
    """Collect what can be broken inside the bodies of decorated functions."""

    def __init__(self) -> None:
        self.found: list[tuple[ast.AST, str]] = []
        self._inside = 0

    def visit_FunctionDef(self, node: ast.FunctionDef) -> None:
        names = {n.id for d in node.decorator_list for n in ast.walk(d) if isinstance(n, ast.Name)}
        if names & {"formula", "_at_depth"} or (
            any(n.startswith("_") for n in names) and node.decorator_list
        ):
            self._inside += 1
            for statement in node.body:
                if not (isinstance(statement, ast.Expr) and isinstance(statement.value, ast.Constant)):
                    self.visit(statement)
            self._inside -= 1
        else:
            self.generic_visit(node)

    def visit_Constant(self, node: ast.Constant) -> None:
        if (
            self._inside
            and isinstance(node.value, (int, float))
            and not isinstance(node.value, bool)
            and node.value
        ):
            self.found.append((node, "1 % more"))

    def visit_BinOp(self, node: ast.BinOp) -> None:
        if self._inside and isinstance(node.op, (ast.Add, ast.Sub)):
            self.found.append((node, "sign"))
        self.generic_visit(node)

    def visit_UnaryOp(self, node: ast.UnaryOp) -> None:
        if self._inside and isinstance(node.op, ast.USub):
            self.found.append((node, "minus dropped"))
        self.generic_visit(node)

    def visit_Compare(self, node: ast.Compare) -> None:
        if self._inside and isinstance(node.ops[0], (ast.Lt, ast.LtE, ast.Gt, ast.GtE)):
            self.found.append((node, "edge of a comparison"))
        self.generic_visit(node)

    def visit_Call(self, node: ast.Call) -> None:
        if isinstance(node.func, ast.Name) and node.func.id == "_constant" and len(node.args) > 1:
            self.found.append((node, "1 % more"))
        self.generic_visit(node)


def break_code(path: Path) -> Iterator[Mutant]:
    """Yield every break of one Python file."""
    text = path.read_text(encoding="utf-8")
    count = len(_places(ast.parse(text)))
    for number in range(count):
        tree = ast.parse(text)
        node, kind = _places(tree)[number]
        where = f"line {node.lineno}"  # type: ignore[attr-defined]
        shown = ast.unparse(node)[:60]
        around = [
            f
            for f in tree.body
            if isinstance(f, ast.FunctionDef) and any(n is node for s in f.body for n in ast.walk(s))
        ]
        _break(node, kind)
        label, whole = f"{where}: {kind}: {shown}", ast.unparse(tree)
        name, line, body = "", 0, ""
        if around:
            # Decorators make a shell of the same body: the body alone is compiled and put in its place.
            f = around[0]
            name, line = f.name, f.decorator_list[0].lineno if f.decorator_list else f.lineno
            f.decorator_list = []
            body = ast.unparse(f)
        yield Mutant(str(path.relative_to(ROOT)), label, whole, name, line, body)


def _places(tree: ast.AST) -> list[tuple[ast.AST, str]]:
    visitor = _Places()
    visitor.visit(tree)
    return visitor.found


def _break(node: ast.AST, kind: str) -> None:
    if isinstance(node, ast.Constant):
        node.value = node.value * 1.01
    elif isinstance(node, ast.BinOp):
        node.op = ast.Sub() if isinstance(node.op, ast.Add) else ast.Add()
    elif isinstance(node, ast.UnaryOp):
        node.op = ast.UAdd()
    elif isinstance(node, ast.Compare):
        turned = {ast.Lt: ast.LtE, ast.LtE: ast.Lt, ast.Gt: ast.GtE, ast.GtE: ast.Gt}
        node.ops[0] = turned[type(node.ops[0])]()
    elif isinstance(node, ast.Call):
        node.args[1] = ast.BinOp(node.args[1], ast.Mult(), ast.Constant(1.01))
    ast.fix_missing_locations(node)


_NUMBER = re.compile(r"(?<![\w.\"'#-])-?(?:\d+\.\d*|\.\d+|\d+)(?:[eE][+-]?\d+)?(?![\w.%/:-])")


def break_data(path: Path) -> Iterator[Mutant]:
    """Yield every break of one data file: each number 1 % larger."""
    lines = path.read_text(encoding="utf-8").split("\n")
    csv_file = path.suffix == ".csv"
    header = (
        next((k for k, line in enumerate(lines) if line and not line.startswith("#")), 0) if csv_file else -1
    )
    for k, line in enumerate(lines):
        if k <= header or line.startswith("#") or not line:
            continue
        if not csv_file and re.match(r"\s*(?!.*=\s*[\[\d.+-])", line) and "=" in line:
            continue
        body = line if csv_file else line.split("#")[0]
        for match in _NUMBER.finditer(body):
            if csv_file and not _is_cell(body, match):
                continue
            value = float(match[0])
            if value == 0.0:
                continue
            new = repr(value * 1.01)
            changed = [*lines[:k], line[: match.start()] + new + line[match.end() :], *lines[k + 1 :]]
            yield Mutant(
                str(path.relative_to(ROOT)),
                f"line {k + 1}: 1 % more: {line[:50]} [{match[0]}]",
                "\n".join(changed),
            )


def _is_cell(line: str, match: re.Match[str]) -> bool:
    """Whether a number is a whole cell of a CSV line and not its row number or a word in a note."""
    before, after = line[: match.start()], line[match.end() :]
    if before.count('"') % 2:
        return False
    return (before == "" or before.endswith(",")) and (after == "" or after.startswith(","))


def accepted() -> dict[str, str]:
    """Return the survivors that have a reason."""
    if not ACCEPTED.exists():
        return {}
    entries = tomllib.loads(ACCEPTED.read_text(encoding="utf-8")).get("survivor", [])
    return {f"{e['file']}: {e['what']}": e["reason"] for e in entries}


def name_of(mutant: Mutant) -> str:
    """Return a name that survives a change of line numbers."""
    return f"{mutant.path}: {mutant.label.split(': ', 1)[1]}"


def tests_for(path: str) -> list[str]:
    """Return the tests that speak of a file and exist."""
    for prefix, folders in TESTS.items():
        if path.startswith(prefix):
            found = [f for f in folders if f.startswith("rows ") or (ROOT / f).exists()]
            return found if path.endswith(".py") else ["tests/data/test_control_sums.py", *found]
    raise KeyError(f"{path}: say in TESTS which tests speak of it")


def survives(mutant: Mutant, copy: Path, warm: bool = False) -> bool:
    """Run the tests on the broken copy in a fork of this process; True if all pass.

    In a warm process, which has imported the package, the body of the one function is exchanged instead.
    """
    target = copy / mutant.path
    original = target.read_bytes()
    if not warm:
        target.write_text(mutant.text, encoding="utf-8")
    try:
        for tests in tests_for(mutant.path):
            child = os.fork()
            if child == 0:
                status = 70
                try:
                    if warm:
                        _exchange(mutant)
                    status = _run(copy, tests)
                finally:  # never leave through the parent's clean-up
                    os._exit(status)
            _, status = os.waitpid(child, 0)
            if os.waitstatus_to_exitcode(status) != 0:
                return False
        return True
    finally:
        target.write_bytes(original)


def _exchange(mutant: Mutant) -> None:
    """Give every function made of one body the broken code: shells, kernels and bodies that call it."""
    code = next(
        c
        for c in compile(mutant.body, mutant.path, "exec").co_consts
        if isinstance(c, types.CodeType) and c.co_name == mutant.function
    )
    found = 0
    for f in gc.get_objects():
        if not isinstance(f, types.FunctionType):
            continue
        old = f.__code__
        if (
            old.co_name == mutant.function
            and old.co_firstlineno == mutant.line
            and old.co_filename.endswith(mutant.path)
        ):
            f.__code__ = code.replace(
                co_argcount=old.co_argcount,
                co_kwonlyargcount=old.co_kwonlyargcount,
                co_filename=old.co_filename,
                co_firstlineno=old.co_firstlineno,
            )
            found += 1
    assert found, f"{mutant.path}: {mutant.function} not found"


def _warm(copy: Path) -> None:
    """Import the package of the copy with every equation."""
    os.chdir(copy)
    sys.path.insert(0, str(copy))
    import gasphys

    gasphys.equations()


def _run(copy: Path, tests: str) -> int:
    os.chdir(copy)
    sys.path.insert(0, str(copy))
    null = os.open(os.devnull, os.O_WRONLY)
    os.dup2(null, 1)
    os.dup2(null, 2)
    import pytest

    if tests.startswith("rows "):
        os.environ["GASPHYS_ROWS"] = tests.removeprefix("rows ")
        tests = "tests/published/test_rows.py::test_row"
    words = [
        "-x",
        "-q",
        "-W",
        "ignore::pytest.PytestAssertRewriteWarning",
        "-p",
        "no:cacheprovider",
        "-p",
        "no:xdist",
        "-o",
        "addopts=",
        "--no-header",
        tests,
    ]
    return int(pytest.main(words))


def _preload() -> None:
    """Import once what every child needs, but nothing of gasphys."""
    for name in (
        "numpy",
        "scipy.special",
        "scipy.optimize",
        "scipy.integrate",
        "sympy",
        "xarray",
        "hypothesis",
        "pytest",
    ):
        with contextlib.suppress(ImportError):
            __import__(name)


def work(mutants: list[Mutant], copy: Path, report: Path) -> None:
    """Try mutants one after the other; a file's own tests must pass before it is broken."""
    whole: dict[str, bool] = {}
    # What has to be imported anew comes first, in a process that has not imported the package.
    mutants = sorted(mutants, key=lambda m: bool(m.function))
    warm = False
    with report.open("w", encoding="utf-8") as out:
        for mutant in mutants:
            if mutant.function and not warm:
                _warm(copy)
                warm = True
            tests = " ".join(tests_for(mutant.path))
            if tests not in whole:
                unbroken = (copy / mutant.path).read_text(encoding="utf-8")
                whole[tests] = survives(Mutant(mutant.path, "", unbroken), copy)
            if not whole[tests]:
                out.write(f"not tried\t{mutant.path}\t{mutant.label}\n")
                continue
            state = "survived" if survives(mutant, copy, warm) else "killed"
            if state == "survived" and warm:  # once more with everything imported anew
                state = _again(mutant, copy)
            out.write(f"{state}\t{mutant.path}\t{mutant.label}\n")
            out.flush()


def _again(mutant: Mutant, copy: Path) -> str:
    """Try one mutant in a new interpreter."""
    text = (
        f"import sys; sys.path.insert(0, {str(ROOT / '.ci')!r})\n"
        "import mutations as m, pathlib\n"
        f"one = m.Mutant({mutant.path!r}, '', open({str(copy / 'mutant.txt')!r}, encoding='utf-8').read())\n"
        f"sys.exit(10 if m.survives(one, pathlib.Path({str(copy)!r})) else 20)"
    )
    (copy / "mutant.txt").write_text(mutant.text, encoding="utf-8")
    done = subprocess.run([sys.executable, "-c", text], check=False, cwd=copy)
    return {10: "survived", 20: "killed"}.get(done.returncode, "not tried")


def main() -> int:
    """Run all mutations and print what survived."""
    parser = argparse.ArgumentParser(description=__doc__.split("\n")[0])
    parser.add_argument("--only", default="", help="only files whose path holds this")
    parser.add_argument("--sample", type=int, default=0, help="only so many, spread evenly")
    options = parser.parse_args()
    os.environ["PYTHONDONTWRITEBYTECODE"] = "1"
    sys.dont_write_bytecode = True
    mutants = [m for path in code_files() for m in break_code(path)]
    for pattern in DATA:
        mutants += [m for path in sorted(ROOT.glob(pattern)) for m in break_data(path)]
    mutants = [m for m in mutants if options.only in m.path]
    if options.sample and options.sample < len(mutants):
        step = len(mutants) / options.sample
        mutants = [mutants[int(k * step)] for k in range(options.sample)]
    _preload()
    began = time.monotonic()
    workers = max(1, min(os.cpu_count() or 1, len(mutants)))
    with tempfile.TemporaryDirectory() as folder:
        children, reports = [], []
        for k in range(workers):
            copy = Path(folder) / f"copy{k}"
            shutil.copytree(
                ROOT,
                copy,
                ignore=shutil.ignore_patterns(".git", ".venv*", "_build", "generated", "__pycache__"),
            )
            report = Path(folder) / f"report{k}.txt"
            reports.append(report)
            child = os.fork()
            if child == 0:
                try:
                    work(mutants[k::workers], copy, report)
                finally:
                    os._exit(0)
            children.append(child)
        for child in children:
            os.waitpid(child, 0)
        lines = [line.split("\t") for r in reports for line in r.read_text(encoding="utf-8").splitlines()]
    untried = sorted({" ".join(tests_for(line[1])) for line in lines if line[0] == "not tried"})
    for tests in untried:
        print(f"not tried: the tests fail without any mutation: {tests}")
    known = accepted()
    survivors = [(p, label) for state, p, label in lines if state == "survived"]
    new = [(p, label) for p, label in survivors if name_of(Mutant(p, label, "")) not in known]
    for path, label in new:
        print(f"survived: {path} {label}")
    print(
        f"{len(lines)} mutations, {sum(line[0] == 'killed' for line in lines)} failed a test, "
        f"{len(survivors) - len(new)} survived "
        f"with a written reason, {len(new)} survived without; {time.monotonic() - began:.0f} s"
    )
    return 1 if new or untried or len(lines) != len(mutants) else 0


if __name__ == "__main__":
    sys.exit(main())
