"""Who may import whom: only downwards, rooms on one rung do not know each other, and no cycle anywhere.

Found by parsing, so that an import that never runs counts as well.
"""

import ast
import sys
from pathlib import Path

import pytest

PACKAGE = Path(__file__).parent.parent / "unmix"

#: the ladder, from top to bottom; a room may import what stands below it
LADDER = [
    ["__main__"],
    ["cli"],
    ["report", "archive", "stream"],
    ["solve"],
    ["method"],
    ["methodfile"],
    ["read", "prepare", "diagnose"],
    ["chunked"],
    ["spectra", "provenance", "files"],
    ["units", "ordinate_units"],
    ["errors", "kernels"],
]

#: rooms that may know another on their own rung, and why
BESIDE = {("ordinate_units", "units"): "an ordinate unit names an amount and a path"}

#: what kernels may import
KERNEL_PACKAGES = {"numpy", "scipy", "numba"}

#: modules that load others by name, on first use
DOORS = {"unmix/__init__.py", "unmix/cli/__init__.py", "unmix/solve/__init__.py", "unmix/prepare/__init__.py"}


def may_load_late(path, module):
    """A command's help does not wait for the command's work; numba is loaded only where it is worth its compiler."""
    return own_room(path) == "cli" or module.endswith("_compiled")


FILES = sorted(PACKAGE.rglob("*.py"))
RUNG = {room: level for level, rooms in enumerate(LADDER) for room in rooms}


def name_of(path):
    return str(path.relative_to(PACKAGE.parent))


def tree_of(path):
    return ast.parse(path.read_text(encoding="utf-8"))


def imported(tree):
    """Names of imported modules with their nodes."""
    for node in ast.walk(tree):
        if isinstance(node, ast.Import):
            for alias in node.names:
                yield alias.name, node
        elif isinstance(node, ast.ImportFrom):
            assert node.level == 0, f"relative import on line {node.lineno}"
            yield node.module, node
            if node.module == "unmix" or node.module.startswith("unmix."):
                for alias in node.names:
                    yield f"{node.module}.{alias.name}", node


def room_of(module):
    return module.split(".")[1] if "." in module else ""


def own_room(path):
    inside = path.relative_to(PACKAGE)
    return inside.parts[0] if len(inside.parts) > 1 else inside.stem


def test_every_room_stands_on_the_ladder():
    assert {own_room(path) for path in FILES} - {"__init__", "__main__"} <= set(RUNG)


@pytest.mark.parametrize("path", FILES, ids=name_of)
def test_imports_go_down(path):
    room = own_room(path)
    if room in ("__init__", "__main__"):
        return
    for module, node in imported(tree_of(path)):
        other = room_of(module)
        if module.split(".")[0] != "unmix" or (module == "unmix" and isinstance(node, ast.ImportFrom)):
            continue
        place = f"{name_of(path)}, line {node.lineno}: {module}"
        assert other or room == "cli", f"{place} (import from the module, not from the door)"
        if other and other != room and (room, other) not in BESIDE:
            assert RUNG[other] > RUNG[room], place


@pytest.mark.parametrize("path", FILES, ids=name_of)
def test_own_imports_stand_at_the_top(path):
    if name_of(path) in DOORS:
        return
    tree = tree_of(path)
    inside = {
        child
        for node in ast.walk(tree)
        if isinstance(node, ast.FunctionDef | ast.AsyncFunctionDef | ast.ClassDef)
        for child in ast.walk(node)
        if isinstance(child, ast.Import | ast.ImportFrom)
    }
    named = {}
    for module, node in imported(tree):
        if module.split(".")[0] == "unmix" and node in inside:
            named.setdefault(node.lineno, []).append(module)
    refused = [line for line, modules in named.items() if not any(may_load_late(path, name) for name in modules)]
    assert refused == []


@pytest.mark.parametrize("path", FILES, ids=name_of)
def test_modules_are_loaded_by_name_at_the_doors_alone(path):
    if name_of(path) in DOORS or own_room(path) == "cli":
        return
    by_name = {"import_module", "__import__"}
    calls = [
        node.lineno
        for node in ast.walk(tree_of(path))
        if isinstance(node, ast.Name | ast.Attribute)
        and (node.id if isinstance(node, ast.Name) else node.attr) in by_name
    ]
    assert calls == []


@pytest.mark.parametrize("path", [p for p in FILES if own_room(p) == "kernels"], ids=name_of)
def test_kernels_know_arrays_alone(path):
    known = KERNEL_PACKAGES | set(sys.stdlib_module_names)
    for module, node in imported(tree_of(path)):
        if module.split(".")[0] != "unmix":
            assert module.split(".")[0] in known, f"line {node.lineno}: {module}"
    assert {"logging", "warnings"}.isdisjoint(module for module, _ in imported(tree_of(path)))


def test_no_module_imports_itself_in_a_circle():
    graph = {}
    for path in FILES:
        parts = path.relative_to(PACKAGE.parent).with_suffix("").parts
        module = ".".join(parts[:-1] if parts[-1] == "__init__" else parts)
        # a compiled twin is loaded late, by the module whose functions it compiles
        graph[module] = {name for name, _ in imported(tree_of(path)) if not name.endswith("_compiled")} - {module}
    graph = {module: others & graph.keys() for module, others in graph.items()}
    for door in ("unmix", "unmix.solve", "unmix.prepare", "unmix.cli"):
        graph[door] = set()  # what the doors hold for the type checker is loaded on first use
    while graph:
        leaves = [module for module, others in graph.items() if not others & graph.keys()]
        assert leaves, f"a circle among {sorted(graph)}"
        for leaf in leaves:
            del graph[leaf]


@pytest.mark.parametrize("path", FILES, ids=name_of)
def test_modules_are_short_and_say_what_they_hold(path):
    text = path.read_text(encoding="utf-8")
    assert len(text.splitlines()) <= 400
    assert len(ast.get_docstring(tree_of(path)) or "") > 20


@pytest.mark.parametrize("path", FILES, ids=name_of)
def test_functions_are_short(path):
    for node in ast.walk(tree_of(path)):
        if isinstance(node, ast.FunctionDef | ast.AsyncFunctionDef):
            body = node.body[1:] if ast.get_docstring(node) else node.body
            lines = node.end_lineno - body[0].lineno + 1 if body else 0
            assert lines <= 60, f"{node.name} on line {node.lineno} has {lines} lines"


@pytest.mark.parametrize("path", FILES, ids=name_of)
def test_nothing_is_printed_outside_the_commands_and_nothing_run_from_text(path):
    banned = {"eval", "exec", "compile"} | (set() if own_room(path) == "cli" else {"print"})
    calls = [node.func for node in ast.walk(tree_of(path)) if isinstance(node, ast.Call)]
    assert {function.id for function in calls if isinstance(function, ast.Name)} & banned == set()
    assert {"pickle", "shelve", "marshal", "dill", "cloudpickle", "joblib"}.isdisjoint(
        module.split(".")[0] for module, _ in imported(tree_of(path))
    )


def test_the_checks_see_an_import_that_goes_up():
    # counter-test: the parser must find what it is there for
    tree = ast.parse("def f():\n    from unmix.cli import main\n")
    (module, node), *_ = imported(tree)
    assert module == "unmix.cli"
    assert node.lineno == 2
    assert RUNG[room_of(module)] < RUNG["kernels"]
