"""Docstrings: parameters agree with signatures, examples run, public functions say what they take, return and raise."""

import ast
import doctest
import importlib
import inspect
import re
from pathlib import Path

import pytest

import unmix

PACKAGE = Path(__file__).parent.parent / "unmix"
FILES = sorted(path for path in PACKAGE.rglob("*.py") if path.name != "__main__.py")

_HEADING = re.compile(r"^(?P<title>[A-Z][A-Za-z ]+)\n-{3,}\n", re.MULTILINE)


def module_name(path):
    parts = path.relative_to(PACKAGE.parent).with_suffix("").parts
    return ".".join(parts[:-1] if parts[-1] == "__init__" else parts)


def sections(doc):
    """Sections of a numpydoc docstring, heading to text."""
    found = list(_HEADING.finditer(doc))
    ends = [*(match.start() for match in found), len(doc)][1:]
    return {match["title"]: doc[match.end() : end] for match, end in zip(found, ends, strict=True)}


def documented(section):
    """Names that a parameter section lists, stars taken off: ``a, b : float`` counts as two."""
    names = []
    for line in section.splitlines():
        if line and not line[0].isspace():
            names += [name.strip().lstrip("*") for name in line.split(" : ")[0].split(",")]
    return names


def signature_of(node):
    a = node.args
    names = [one.arg for one in (*a.posonlyargs, *a.args, *a.kwonlyargs)]
    names += [one.arg for one in (a.vararg, a.kwarg) if one is not None]
    return [name for name in names if name not in ("self", "cls")]


def functions(tree, prefix=""):
    """Functions, methods and classes with their dotted names; a class brings the signature of its ``__init__``."""
    for node in tree.body:
        if isinstance(node, ast.FunctionDef | ast.AsyncFunctionDef):
            yield f"{prefix}{node.name}", node, signature_of(node)
        elif isinstance(node, ast.ClassDef):
            own = next((f for f in node.body if isinstance(f, ast.FunctionDef) and f.name == "__init__"), None)
            yield f"{prefix}{node.name}", node, None if own is None else signature_of(own)
            yield from functions(node, f"{prefix}{node.name}.")


def every_documented():
    for path in FILES:
        for name, node, signature in functions(ast.parse(path.read_text(encoding="utf-8"))):
            doc = ast.get_docstring(node)
            if doc and signature is not None and "Parameters" in sections(doc):
                yield pytest.param(doc, signature, id=f"{module_name(path)}.{name}")


@pytest.mark.parametrize(("doc", "signature"), list(every_documented()))
def test_documented_parameters_are_those_of_the_signature(doc, signature):
    # parameters of one kind may share a line, so the order is free
    assert sorted(documented(sections(doc)["Parameters"])) == sorted(signature)


@pytest.mark.parametrize("name", unmix.__all__)
def test_public_functions_are_described_in_full(name):
    found = getattr(unmix, name)
    found_sections = sections(inspect.getdoc(found))
    wanted = {"Parameters", "Returns", "Raises", "Examples"}
    if name == "load":
        wanted -= {"Examples"}  # the example of `save` loads what it saved
    assert wanted <= found_sections.keys()
    first = inspect.getdoc(found).splitlines()[0]
    assert first.endswith(".")
    assert documented(found_sections["Parameters"]) == list(inspect.signature(found).parameters)


@pytest.mark.parametrize("path", FILES, ids=module_name)
def test_everything_public_has_a_docstring(path):
    tree = ast.parse(path.read_text(encoding="utf-8"))
    bare = [
        name
        for name, node, _ in functions(tree)
        if not any(part.startswith("_") for part in name.split(".")) and not ast.get_docstring(node)
    ]
    assert bare == []


@pytest.mark.parametrize("path", FILES, ids=module_name)
def test_first_line_is_a_sentence(path):
    tree = ast.parse(path.read_text(encoding="utf-8"))
    for name, node, _ in functions(tree):
        doc = ast.get_docstring(node)
        if doc and not any(part.startswith("_") for part in name.split(".")):
            paragraph = doc.split("\n\n")[0]
            assert paragraph.rstrip()[-1] in ".:", f"{name}: {paragraph}"


def every_example():
    for path in FILES:
        if ">>>" in path.read_text(encoding="utf-8"):
            yield pytest.param(module_name(path), id=module_name(path))


@pytest.mark.parametrize("name", list(every_example()))
def test_examples_run_and_give_what_they_say(name, tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    module = importlib.import_module(name)
    tests = [test for test in doctest.DocTestFinder().find(module) if test.examples]
    assert tests, "the examples are not found: are they in a docstring?"
    runner = doctest.DocTestRunner(optionflags=doctest.NORMALIZE_WHITESPACE)
    for test in tests:
        output = []
        runner.run(test, out=output.append)
        assert runner.failures == 0, "".join(output)


def test_the_comparison_sees_a_wrong_name():
    # counter-test: a docstring that has outlived its function is caught
    doc = "Do.\n\nParameters\n----------\na, b : float\n    Two.\n*rest : int\n    More.\n\nReturns\n-------\nfloat\n"
    assert documented(sections(doc)["Parameters"]) == ["a", "b", "rest"]
    assert list(sections(doc)) == ["Parameters", "Returns"]
    node = ast.parse("def f(self, a, c, *rest): pass").body[0]
    assert signature_of(node) == ["a", "c", "rest"]
