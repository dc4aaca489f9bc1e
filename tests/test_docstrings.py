"""Docstrings keep their word: what a public function raises is what it says it raises."""

import ast
import builtins
import re
from pathlib import Path

import pytest

import livelag
from livelag import errors

PACKAGE = Path(livelag.__file__).parent
FILES = sorted(PACKAGE.rglob("*.py"))
OURS = {name for name in vars(errors) if isinstance(getattr(errors, name), type)}


def public_functions(tree):
    """Each public function with the docstrings that speak for it: its own and its class's."""
    for node in ast.walk(tree):
        if isinstance(node, ast.ClassDef) and not node.name.startswith("_"):
            of_class = ast.get_docstring(node) or ""
            functions = [inner for inner in node.body if isinstance(inner, ast.FunctionDef)]
            for inner in functions:
                special = inner.name in ("__init__", "__post_init__")
                if special or not inner.name.startswith("_"):
                    # A property's getter speaks for its setter.
                    same = [ast.get_docstring(f) or "" for f in functions if f.name == inner.name]
                    text = "\n".join([*same, of_class if special else ""])
                    yield f"{node.name}.{inner.name}", inner, text
    for node in tree.body:
        if isinstance(node, ast.FunctionDef) and not node.name.startswith("_"):
            yield node.name, node, ast.get_docstring(node) or ""


def named_in_raises(text):
    section = re.search(r"Raises:\n((?:[ ]+.*\n?|\n)+)", text)
    return set(re.findall(r"^\s+(\w+):", section[1], re.MULTILINE)) if section else set()


def raised_here(function):
    for node in ast.walk(function):
        if isinstance(node, ast.Raise) and isinstance(node.exc, ast.Call):
            called = node.exc.func
            if isinstance(called, ast.Name) and called.id in OURS:
                yield called.id


@pytest.mark.parametrize("path", FILES, ids=lambda p: str(p.relative_to(PACKAGE)))
def test_what_is_raised_is_told(path):
    tree = ast.parse(path.read_text(encoding="utf-8"))
    for name, function, text in public_functions(tree):
        told = named_in_raises(text)
        for raised in raised_here(function):
            assert raised in told, f"{name} raises {raised} and does not say so"
        for exception in told:
            known = exception in OURS or isinstance(getattr(builtins, exception, None), type)
            assert known, f"{name} says it raises {exception}, which does not exist"
