"""Examples in the documentation of the classes and plots, run as they stand there."""

import doctest
import importlib.util
import inspect

import pytest

import perpend
from perpend import _core

MODULES = ["perpend", "perpend.plot"] if importlib.util.find_spec("matplotlib") else ["perpend"]


def documented():
    """Everything a person may ask help for, by its name."""
    for module in map(importlib.import_module, MODULES):
        yield module.__name__, module
        for name in module.__all__:
            yield f"{module.__name__}.{name}", getattr(module, name)
    for name in ("Basis", "Reading", "Step", "Tracker", "Watch"):
        for member, value in vars(getattr(_core, name)).items():
            yield f"perpend.{name}.{member}", value


EXAMPLES = [(name, doc) for name, each in documented() if ">>>" in (doc := inspect.getdoc(each) or "")]


@pytest.mark.parametrize(("name", "doc"), EXAMPLES, ids=[name for name, _ in EXAMPLES])
def test_the_example_does_what_it_says(name, doc):
    example = doctest.DocTestParser().get_doctest(doc, {"perpend": perpend}, name, None, None)
    told: list[str] = []
    failed, tried = doctest.DocTestRunner(verbose=False).run(example, out=told.append)
    assert tried > 0
    assert not failed, "".join(told)
