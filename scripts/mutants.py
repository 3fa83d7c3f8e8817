"""How many deliberate faults in the dose path the tests notice.

python scripts/mutants.py                 every mutant of every module of the dose path
python scripts/mutants.py --every 4       one in four, for a look
python scripts/mutants.py caps chances    some modules

A mutant changes one operator, comparison, number, condition or call (such as `min` for `max`). Each
runs in a process of its own, forked from one that has the libraries loaded, against the tests
below with a few cases a law; one that no test notices is printed. Works where `os.fork` does.
"""

from __future__ import annotations

import argparse
import ast
import copy
import importlib.abc
import importlib.util
import os
import signal
import sys
import time
from collections.abc import Iterator
from pathlib import Path

ROOT = Path(__file__).resolve().parents[1]
MODULES = {
    "units": "schorl.units",
    "caps": "schorl.agronomy.caps",
    "chances": "schorl.agronomy.chances",
    "soil_mass": "schorl.agronomy.soil_mass",
    "targets": "schorl.agronomy.targets",
    "rates": "schorl.machinery.rates",
    "zone_rates": "schorl.steps.zone_rates",
    "limits_of_soil": "schorl.steps.limits_of_soil",
    "assessing": "schorl.steps.assessing",
    "rating": "schorl.steps.rating",
    "advice": "schorl.steps.advice",
}
#: The quickest first: a run stops at the first failure.
TESTS = (
    "tests/unit/steps/test_dose_path.py", "tests/unit/steps/test_limits_of_soil.py",
    "tests/unit/steps/test_assessing.py", "tests/unit/steps/test_rating.py",
    "tests/unit/steps/test_advice.py", "tests/published/test_published_rates.py",
    "tests/published/test_agronomy_published.py", "tests/unit/steps/test_class_limits.py",
    "tests/unit/agronomy", "tests/laws/test_rate_laws.py",
)  # fmt: skip
CASES, SECONDS = "40", 120
SWAPS: dict[type, type] = {
    ast.Add: ast.Sub, ast.Sub: ast.Add, ast.Mult: ast.Div, ast.Div: ast.Mult, ast.Pow: ast.Mult,
    ast.Lt: ast.LtE, ast.LtE: ast.Lt, ast.Gt: ast.GtE, ast.GtE: ast.Gt, ast.Eq: ast.NotEq,
    ast.NotEq: ast.Eq, ast.Is: ast.IsNot, ast.IsNot: ast.Is, ast.In: ast.NotIn, ast.NotIn: ast.In,
    ast.And: ast.Or, ast.Or: ast.And, ast.BitAnd: ast.BitOr, ast.BitOr: ast.BitAnd,
}  # fmt: skip
CALLS = {"min": "max", "max": "min", "minimum": "maximum", "maximum": "minimum",
         "any": "all", "all": "any", "floor": "ceil", "cdf": "pdf"}  # fmt: skip


def mutants(source: str) -> Iterator[tuple[int, str, ast.Module]]:
    """Line, what was changed, and the changed module."""
    tree = ast.parse(source)
    nodes = list(ast.walk(tree))
    # Whether a value is frozen, and what an annotation says, is not a dose.
    outside = [one for node in nodes for one in getattr(node, "decorator_list", ())]
    outside += [one for node in nodes if (one := getattr(node, "annotation", None))]
    outside += [one for node in nodes if (one := getattr(node, "returns", None))]
    spared = {id(inner) for one in outside for inner in ast.walk(one)}
    for place in [at for at, node in enumerate(nodes) if id(node) not in spared]:
        changed = copy.deepcopy(tree)
        node = list(ast.walk(changed))[place]
        for what in _change(node):
            yield getattr(node, "lineno", 0), what, ast.fix_missing_locations(changed)
            changed = copy.deepcopy(tree)
            node = list(ast.walk(changed))[place]


def _change(node: ast.AST) -> Iterator[str]:
    if isinstance(node, ast.BinOp) and type(node.op) in SWAPS:
        node.op = SWAPS[type(node.op)]()
        yield f"now {ast.unparse(node)}"
    elif isinstance(node, ast.Compare) and type(node.ops[0]) in SWAPS:
        node.ops[0] = SWAPS[type(node.ops[0])]()
        yield f"now {ast.unparse(node)}"
    elif isinstance(node, ast.BoolOp):
        node.op = SWAPS[type(node.op)]()
        yield f"now {ast.unparse(node)}"
    elif isinstance(node, ast.UnaryOp) and isinstance(node.op, ast.USub | ast.Not):
        node.op = ast.UAdd() if isinstance(node.op, ast.USub) else ast.Not()
        if isinstance(node.op, ast.Not):
            node.operand = ast.UnaryOp(op=ast.Not(), operand=node.operand)
        yield f"now {ast.unparse(node)}"
    elif isinstance(node, ast.IfExp | ast.If) and not _typing_only(node):
        node.test = ast.UnaryOp(op=ast.Not(), operand=node.test)
        yield f"now if {ast.unparse(node.test)}"
    elif isinstance(node, ast.Constant) and type(node.value) in (int, float):
        node.value = node.value * 1.25 + 1 if node.value else 1
        yield f"a number is now {node.value}"
    elif isinstance(node, ast.Constant) and isinstance(node.value, bool):
        node.value = not node.value
        yield f"now {node.value}"
    elif isinstance(node, ast.Call):
        name = node.func
        if isinstance(name, ast.Name) and name.id in CALLS:
            name.id = CALLS[name.id]
            yield f"now {ast.unparse(node)}"
        elif isinstance(name, ast.Attribute) and name.attr in CALLS:
            name.attr = CALLS[name.attr]
            yield f"now {ast.unparse(node)}"


def _typing_only(node: ast.AST) -> bool:
    return isinstance(node, ast.If) and "TYPE_CHECKING" in ast.unparse(node.test)


class Loader(importlib.abc.MetaPathFinder, importlib.abc.Loader):
    """Gives one module its changed code, all others as they are."""

    def __init__(self, name: str, path: Path, code: object) -> None:
        self.name, self.path, self.code = name, path, code

    def find_spec(self, fullname, path=None, target=None):
        if fullname != self.name:
            return None
        return importlib.util.spec_from_loader(fullname, self, origin=str(self.path))

    def exec_module(self, module):
        module.__file__ = str(self.path)
        exec(self.code, module.__dict__)


def noticed(name: str, path: Path, tree: ast.Module) -> bool:
    """Whether the tests fail with the changed module; a run without end counts as noticed."""
    code = compile(tree, str(path), "exec")
    child = os.fork()
    if child == 0:
        signal.alarm(SECONDS)
        quiet = os.open(os.devnull, os.O_WRONLY)
        os.dup2(quiet, 1)
        os.dup2(quiet, 2)
        sys.meta_path.insert(0, Loader(name, path, code))
        os._exit(_run())
    _, status = os.waitpid(child, 0)
    return os.waitstatus_to_exitcode(status) != 0


def _run() -> int:
    import pytest

    try:
        options = ["-x", "-q", "-p", "no:cacheprovider", "-p", "no:randomly"]
        return int(pytest.main([*options, *(str(ROOT / one) for one in TESTS)]))
    except BaseException:  # the changed module does not even load
        return 1


def main(arguments: list[str]) -> int:
    """Print survivors and the share that was noticed."""
    parser = argparse.ArgumentParser(prog="mutants.py", description=__doc__)
    parser.add_argument("modules", nargs="*", choices=[*MODULES, []])
    parser.add_argument("--every", type=int, default=1)
    asked = parser.parse_args(arguments)
    os.environ["SCHORL_CASES"] = CASES
    sys.path[:0] = [str(ROOT / "src"), str(ROOT / "tests")]
    os.chdir(ROOT)
    import hypothesis  # noqa: F401 - loaded once for all children
    import numpy  # noqa: F401
    import pyproj  # noqa: F401
    import pytest  # noqa: F401
    import shapely  # noqa: F401

    started, killed, count = time.perf_counter(), 0, 0
    for short in asked.modules or MODULES:
        name = MODULES[short]
        path = ROOT / "src" / Path(*name.split(".")).with_suffix(".py")
        own = list(mutants(path.read_text(encoding="utf-8")))[:: asked.every]
        survivors = [(line, what) for line, what, tree in own if not noticed(name, path, tree)]
        count, killed = count + len(own), killed + len(own) - len(survivors)
        print(f"{short}: {len(own) - len(survivors)} of {len(own)} noticed", flush=True)
        for line, what in survivors:
            print(f"  {path.name}:{line}: {what}", flush=True)
    seconds = time.perf_counter() - started
    print(
        f"{killed} of {count} mutants noticed, {100 * killed / max(count, 1):.1f} %, {seconds:.0f} s"
    )
    return 0


if __name__ == "__main__":
    sys.exit(main(sys.argv[1:]))
