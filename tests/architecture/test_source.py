"""Every module is short, and every public name says what it is."""

import ast
import importlib
import inspect
import pkgutil
import re
from pathlib import Path

import pytest

import rulecheck
import rulecheck.api

ROOT = Path(__file__).parents[2]
MOST_LINES = 400
SOURCES = sorted([*(ROOT / "rulecheck").rglob("*.py"), *(ROOT / "rules").glob("*.py")])
MODULES = ["rulecheck", *(info.name for info in pkgutil.walk_packages(rulecheck.__path__, "rulecheck."))]


def named(path):
    """Name of a file from the root of the project."""
    return str(path.relative_to(ROOT))


@pytest.mark.parametrize("source", SOURCES, ids=named)
def test_a_module_is_short_enough_to_read(source):
    """Beyond that it does more than one thing."""
    assert len(source.read_text().splitlines()) <= MOST_LINES


@pytest.mark.parametrize("source", SOURCES, ids=named)
def test_public_functions_and_classes_of_a_module_are_documented_and_annotated(source):
    """With the module itself, their methods, and every argument and result."""
    tree = ast.parse(source.read_text())
    assert ast.get_docstring(tree), "the module says nothing"
    bare = [node.name for node in definitions(tree) if not ast.get_docstring(node)]
    assert bare == []
    functions = [node for node in ast.walk(tree) if isinstance(node, ast.FunctionDef)]
    assert [node.name for node in functions if not is_annotated(node)] == []


def definitions(body):
    """Public functions and classes at the top of a module or class, and those within the classes."""
    for node in body.body:
        if isinstance(node, ast.FunctionDef | ast.ClassDef) and not node.name.startswith("_"):
            overloaded = isinstance(node, ast.FunctionDef) and any(
                "overload" in ast.unparse(d) for d in node.decorator_list
            )
            if not overloaded:
                yield node
            if isinstance(node, ast.ClassDef):
                yield from definitions(node)


def is_annotated(function):
    """Whether every argument but `self` and the result have a type."""
    arguments = function.args
    every = [*arguments.posonlyargs, *arguments.args, *arguments.kwonlyargs, arguments.vararg, arguments.kwarg]
    bare = [a for a in every if a is not None and a.annotation is None and a.arg not in ("self", "cls")]
    return not bare and function.returns is not None


def public_callables(module):
    """Public functions and classes that a module defines, with the methods of the classes."""
    for name, value in vars(module).items():
        if name.startswith("_") or getattr(value, "__module__", None) != module.__name__:
            continue
        if inspect.isfunction(value):
            yield f"{module.__name__}.{name}", value
        if inspect.isclass(value):
            yield f"{module.__name__}.{name}", value
            for inner, method in vars(value).items():
                if inspect.isfunction(method) and not inner.startswith("_"):
                    yield f"{module.__name__}.{name}.{inner}", method


def documented(docstring):
    """Names in the section of parameters, or None where there is no such section."""
    match = re.search(
        r"^Parameters\n-+\n(.*?)(?=^\S[^\n]*\n-+\n|\Z)", inspect.cleandoc(docstring), re.DOTALL | re.MULTILINE
    )
    if match is None:
        return None
    heads = [line for line in match[1].splitlines() if line and not line.startswith(" ")]
    return [name.strip().lstrip("*") for head in heads for name in head.split(" : ")[0].split(",")]


@pytest.mark.parametrize("module", MODULES)
def test_parameters_that_are_documented_are_those_there_are(module):
    """A section of parameters names all of them, and nothing that is gone."""
    wrong = {}
    for name, value in public_callables(importlib.import_module(module)):
        described = documented(value.__doc__ or "")
        if described is not None:
            taken = [p for p in parameters(value) if p != "self"]
            if sorted(described) != sorted(taken):
                wrong[name] = (described, taken)
    assert wrong == {}


def parameters(value):
    """Names of the parameters of a function, or of the constructor of a class."""
    return list(inspect.signature(value).parameters)


@pytest.mark.parametrize("name", rulecheck.api.__all__)
def test_every_name_of_the_public_api_is_there_and_documented(name):
    """What a rule may import exists, lazy or not, and classes and functions of ours say what they are."""
    value = getattr(rulecheck.api, name)
    if inspect.isclass(value) or inspect.isfunction(value):
        assert value.__doc__


def test_the_public_api_is_listed_in_full():
    """Completion shows all of it, and an unknown name is refused."""
    assert dir(rulecheck.api) == sorted(rulecheck.api.__all__)
    with pytest.raises(AttributeError, match="NoSuchName"):
        rulecheck.api.NoSuchName  # noqa: B018
