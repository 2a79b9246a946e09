"""The public names say what they take, what they give, and what their attributes are."""

import dataclasses
import inspect
import re

import pytest

import simimg
from simimg.resolving.limits import Limits
from simimg.scene.table import Table

RETURNED = {"Limits": Limits}
PUBLIC = {name: getattr(simimg, name) for name in simimg.__all__ if not name.startswith("_")}
CLASSES = {name: one for name, one in (PUBLIC | RETURNED).items() if inspect.isclass(one)}
FUNCTIONS = {name: one for name, one in PUBLIC.items() if inspect.isfunction(one)}


def section(text, name):
    """The part of a numpydoc docstring under a heading; empty where there is none."""
    found = re.search(
        rf"^{name}\n-{{3,}}\n(.*?)(?=^\S[^\n]*\n-{{3,}}$|\Z)", text, flags=re.M | re.S
    )
    return found[1] if found else ""


def named(part):
    """The names that a section describes: those before the colon, with commas between them."""
    heads = re.findall(r"^(\S[^:\n]*?)(?: :.*)?$", part, flags=re.M)
    return {name.strip().lstrip("*") for head in heads for name in head.split(",")}


def mistakes(function):
    """What the docstring of a function lacks."""
    text = inspect.getdoc(function) or ""
    found = [] if text else ["no docstring"]
    signature = inspect.signature(function)
    wanted = {name for name in signature.parameters if name not in ("self", "cls")}
    lacking = wanted - named(section(text, "Parameters"))
    found += [f"parameter {name} is not described" for name in sorted(lacking)]
    extra = named(section(text, "Parameters")) - wanted
    found += [f"there is no parameter {name}" for name in sorted(extra)]
    returned = signature.return_annotation
    if wanted and returned not in (None, "None") and not section(text, "Returns"):
        found.append(f"what is returned, {returned}, is not described")
    return found


def methods(one):
    """The public methods of a class that are its own, and no hooks of a scene's tables."""
    for name, value in vars(one).items():
        plain = value.__func__ if isinstance(value, classmethod | staticmethod) else value
        if name.startswith(("_", "model_")) or not inspect.isfunction(plain):
            continue
        if not hasattr(Table, name):
            yield name, plain


def test_there_are_public_names():
    assert len(FUNCTIONS) >= 7
    assert len(CLASSES) >= 9
    for name, one in PUBLIC.items():
        assert inspect.isclass(one) or inspect.isfunction(one), name


@pytest.mark.parametrize("name", FUNCTIONS)
def test_functions_describe_their_arguments(name):
    assert mistakes(FUNCTIONS[name]) == []
    # Whatever reads a scene or a frame can be given a wrong one.
    assert section(inspect.getdoc(FUNCTIONS[name]), "Raises")


@pytest.mark.parametrize("name", CLASSES)
def test_methods_describe_their_arguments(name):
    for method, function in methods(CLASSES[name]):
        assert mistakes(function) == [], f"{name}.{method}"


@pytest.mark.parametrize("name", CLASSES)
def test_classes_describe_their_attributes(name):
    one = CLASSES[name]
    text = inspect.cleandoc(one.__doc__ or "")
    assert text.split("\n")[0].endswith("."), name
    for attribute, value in vars(one).items():
        if isinstance(value, property) and not attribute.startswith("_"):
            assert value.__doc__, f"{name}.{attribute}"
    if issubclass(one, Table):
        for key, field in one.model_fields.items():
            assert field.description, f"{name}.{key}"
        return
    fields = {field.name for field in dataclasses.fields(one)} if _is_data(one) else {"lines"}
    public = {field for field in fields if not field.startswith("_")}
    assert public - named(section(text, "Attributes")) == set()


def _is_data(one):
    return dataclasses.is_dataclass(one)


def test_the_check_can_fail():
    def undescribed(scene, *, count=1):
        """Do it.

        Parameters
        ----------
        scene : Scene
        counts : int
        """
        return scene, count

    assert mistakes(undescribed) == [
        "parameter count is not described",
        "there is no parameter counts",
        "what is returned, <class 'inspect._empty'>, is not described",
    ]
