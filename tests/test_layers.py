"""The order of the rooms, and what a formula may be made of: read from the source, not run.

Every file of convert imports only from rooms to the right of its own, so that a reader can take
the rooms one at a time.
"""

import ast
import importlib
import inspect
import pkgutil
import textwrap
from collections.abc import Iterator
from pathlib import Path
from typing import NamedTuple

import numpy as np
import pytest

import convert
from convert.standards import Source

HOME = Path(convert.__file__).parent
#: left imports from right; rooms of one group stand side by side and do not know each other
ORDER = (
    ("cli",),
    ("report",),
    ("study",),
    ("basechange",),
    ("proof",),
    ("filecheck",),
    ("flow",),
    ("folder",),
    ("checks",),
    ("unitsheet",),
    ("expectation",),
    ("chain",),
    ("gather",),
    ("gates",),
    ("entries",),
    ("regulation", "perunit"),
    ("circuit",),
    ("reduction",),
    ("intake",),
    ("plant",),
    ("vectorgroup", "standards", "quantity", "errors"),
)
#: these serve every room, each other too
FOR_ALL = {"standards", "quantity", "errors"}
LEVEL = {room: level for level, rooms in enumerate(ORDER) for room in rooms}
#: the proof may not know how the numbers that it proves were made
PROOF_KNOWS_NOT = {"reduction", "perunit", "circuit"}
#: package -> the files that may import it; where a tuple ends in True, only inside a function
HEAVY = {
    "pint": ({"quantity.py"}, False),
    "pandapower": ({"flow.py", "proof.py", "study.py"}, True),
    "click": ({"cli.py"}, False),
    "yaml": ({"intake/document.py"}, False),
    "jsonschema": ({"intake/document.py"}, True),
}
PANDAS_ROOMS = {"report", "study", "basechange", "proof", "filecheck", "flow", "folder"}
PRINTING = {"print", "pprint"}
STREAMS = {"sys.stdout", "sys.stderr"}
FORMULA_CALLS = {"sqrt", "abs", "hypot"}
OPERATORS = (ast.Add, ast.Sub, ast.Mult, ast.Div, ast.Pow)


class Import(NamedTuple):
    """One import statement: where it stands and what it names."""

    file: str
    line: int
    relative: bool
    names: tuple[str, ...]  # dotted from convert (relative) or as written
    in_function: bool

    def __str__(self) -> str:
        return f"convert/{self.file}:{self.line}"


def files() -> list[str]:
    return sorted(path.relative_to(HOME).as_posix() for path in HOME.rglob("*.py"))


def tree_of(file: str) -> ast.Module:
    return ast.parse((HOME / file).read_text(encoding="utf-8"))


def room_of(file: str) -> str:
    return Path(file).parts[0].removesuffix(".py")


def walk(node: ast.AST, in_function: bool, skip_types: bool) -> Iterator[tuple[ast.stmt, bool]]:
    for child in ast.iter_child_nodes(node):
        if isinstance(child, (ast.Import, ast.ImportFrom)):
            yield child, in_function
        elif skip_types and isinstance(child, ast.If) and "TYPE_CHECKING" in ast.dump(child.test):
            continue
        else:
            inside = in_function or isinstance(child, (ast.FunctionDef, ast.AsyncFunctionDef))
            yield from walk(child, inside, skip_types)


def imports(file: str) -> Iterator[Import]:
    package = Path(file).parts[:-1]
    for node, inside in walk(tree_of(file), False, skip_types=file == "__init__.py"):
        if isinstance(node, ast.Import):
            yield Import(file, node.lineno, False, tuple(a.name for a in node.names), inside)
        elif not node.level:
            yield Import(file, node.lineno, False, (node.module or "",), inside)
        else:
            base = ".".join((*package[: len(package) - node.level + 1], node.module or ""))
            base = base.strip(".")
            # `from . import chain` names a room by each alias, `from .chain import run` by module
            names = tuple(f"{base}.{a.name}".strip(".") for a in node.names)
            yield Import(file, node.lineno, True, names, inside)


ALL_IMPORTS = [found for file in files() for found in imports(file)]


def test_every_file_stands_in_a_room_and_every_room_has_a_file():
    rooms = {room_of(file) for file in files()} - {"__init__"}
    assert rooms == set(LEVEL)


def test_the_walk_sees_imports_inside_functions_too():
    inside = {(found.file, name) for found in ALL_IMPORTS for name in found.names
              if found.in_function}  # fmt: skip
    assert ("cli.py", "study.examine") in inside
    assert ("proof.py", "pandapower") in inside


def test_a_file_imports_only_from_rooms_to_its_right():
    wrong = []
    for found in ALL_IMPORTS:
        own = room_of(found.file)
        for name in found.names if found.relative and found.file != "__init__.py" else ():
            other = name.split(".")[0]
            if other not in {own, *FOR_ALL} and LEVEL[other] <= LEVEL[own]:
                wrong.append(f"{found}: {own} imports {other}")
    assert wrong == []


def test_the_package_itself_imports_nothing_of_its_own_until_asked():
    assert [str(found) for found in ALL_IMPORTS if found.file == "__init__.py" and found.relative
            and not found.in_function] == []  # fmt: skip


def test_own_parts_are_imported_relatively():
    wrong = [str(found) for found in ALL_IMPORTS if not found.relative
             and any(name.split(".")[0] == "convert" for name in found.names)]  # fmt: skip
    assert wrong == []


def test_the_proof_does_not_know_how_its_numbers_were_made():
    known = {name.split(".")[0] for found in ALL_IMPORTS if found.file == "proof.py"
             and found.relative for name in found.names}  # fmt: skip
    assert known  # or the walk found nothing
    assert known & PROOF_KNOWS_NOT == set()


@pytest.mark.parametrize("package", HEAVY)
def test_a_heavy_package_has_one_home(package: str):
    homes, only_inside = HEAVY[package]
    found = [i for i in ALL_IMPORTS if any(n.split(".")[0] == package for n in i.names)]
    assert {i.file for i in found} <= homes
    assert found, f"{package} is imported nowhere: take it off the list"
    assert [str(i) for i in found if only_inside and not i.in_function] == []


def test_pandas_stays_out_of_the_calculation():
    found = [i for i in ALL_IMPORTS if any(n.split(".")[0] == "pandas" for n in i.names)]
    assert {room_of(i.file) for i in found} <= PANDAS_ROOMS


# --- functions ----------------------------------------------------------------------------------


def functions(file: str) -> Iterator[ast.FunctionDef]:
    for node in ast.walk(tree_of(file)):
        if isinstance(node, ast.FunctionDef):
            yield node


def test_every_function_is_typed():
    bare = []
    for file in files():
        for function in functions(file):
            a = function.args
            every = [*a.posonlyargs, *a.args, *a.kwonlyargs]
            every += [x for x in (a.vararg, a.kwarg) if x]
            untyped = [x.arg for x in every if x.annotation is None
                       and x.arg not in ("self", "cls")]  # fmt: skip
            if untyped or function.returns is None:
                bare.append(f"convert/{file}:{function.lineno} {function.name} {untyped}")
    assert bare == []


def test_nothing_but_the_commands_prints():
    printing = []
    for file in files():
        if file == "cli.py":
            continue
        for node in ast.walk(tree_of(file)):
            if isinstance(node, ast.Call) and ast.unparse(node.func) in PRINTING:
                printing.append(f"convert/{file}:{node.lineno}")
            if isinstance(node, ast.Attribute) and ast.unparse(node) in (
                "sys.stdout",
                "sys.stderr",
            ):
                printing.append(f"convert/{file}:{node.lineno}")
    assert printing == []


# --- formulas -----------------------------------------------------------------------------------


def formulas() -> list[object]:
    found = []
    for info in pkgutil.walk_packages(convert.__path__, "convert."):
        module = importlib.import_module(info.name)
        found += [item for item in vars(module).values() if inspect.isfunction(item)
                  and hasattr(item, "source") and item.__module__ == info.name]  # fmt: skip
    return found


FORMULAS = {f"{f.__module__.removeprefix('convert.')}.{f.__name__}": f for f in formulas()}


def text_of(formula: object) -> ast.FunctionDef:
    node = ast.parse(textwrap.dedent(inspect.getsource(formula))).body[0]
    assert isinstance(node, ast.FunctionDef)
    return node


def bad_parts(node: ast.AST, names: set[str]) -> Iterator[str]:
    """Name every part of an expression that a formula may not have."""
    match node:
        case ast.BinOp():
            if not isinstance(node.op, OPERATORS):
                yield ast.unparse(node)
            yield from bad_parts(node.left, names)
            yield from bad_parts(node.right, names)
        case ast.UnaryOp(op=ast.USub()):
            yield from bad_parts(node.operand, names)
        case ast.Constant(value=int() | float() | complex()) if not isinstance(node.value, bool):
            pass
        case ast.Name() if node.id in names:
            pass
        case ast.Attribute(attr="real" | "imag"):
            yield from bad_parts(node.value, names)
        case ast.Call(func=ast.Name()) if node.func.id in FORMULA_CALLS and not node.keywords:
            for argument in node.args:
                yield from bad_parts(argument, names)
        case _:
            yield ast.unparse(node)


def test_the_formulas_are_found():
    decorated = {
        f"{Path(file).with_suffix('').as_posix().replace('/', '.')}.{node.name}"
        for file in files()
        for node in functions(file)
        if any(isinstance(d, ast.Call) and ast.unparse(d.func) == "source"
               for d in node.decorator_list)
    }  # fmt: skip
    assert decorated == set(FORMULAS)
    assert len(FORMULAS) > 40


@pytest.mark.parametrize("name", FORMULAS)
def test_a_formula_is_assignments_and_one_return_of_plain_arithmetic(name: str):
    node = text_of(FORMULAS[name])
    assert ast.get_docstring(node)
    *steps, last = node.body[1:]
    names = {argument.arg for argument in (*node.args.args, *node.args.kwonlyargs)}
    wrong: list[str] = []
    for step in steps:
        assert isinstance(step, ast.Assign), ast.unparse(step)
        (target,) = step.targets
        assert isinstance(target, ast.Name), ast.unparse(step)
        wrong += bad_parts(step.value, names)
        names.add(target.id)
    assert isinstance(last, ast.Return)
    assert last.value is not None
    wrong += bad_parts(last.value, names)
    assert wrong == []


@pytest.mark.parametrize("name", FORMULAS)
def test_a_formula_names_its_source_and_calls_numpy(name: str):
    formula = FORMULAS[name]
    assert isinstance(formula.source, Source)
    assert formula.source.document
    assert formula.source.status in ("read", "from memory", "derived here")
    for call in FORMULA_CALLS & set(formula.__code__.co_names):
        assert formula.__globals__[call] is getattr(np, call)


@pytest.mark.parametrize(
    "text", ["a if b else c", "max(a, b)", "a @ b", "a // b", "a and b", "sin(a)", "a[0]", "'a'",
             "d", "True", "+a", "a.shape", "sqrt(a, out=b)"]
)  # fmt: skip
def test_the_walk_of_formulas_refuses_what_is_no_arithmetic(text: str):
    assert list(bad_parts(ast.parse(text, mode="eval").body, {"a", "b", "c"}))
