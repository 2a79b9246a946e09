"""The base of every table of a scene: frozen, closed to unknown keys, mistakes in our own words.

A table may check its keys against one another in two ways. `Table.together` sees which keys were
given, so that it speaks even where some value is wrong; `Table.agree` sees the checked values, and
is asked only when each of them is right by itself.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from typing import Any, ClassVar, NamedTuple, Self

from pydantic import (
    BaseModel,
    ConfigDict,
    Field,
    ModelWrapValidatorHandler,
    ValidationError,
    model_validator,
)
from pydantic_core import InitErrorDetails

from simimg.quantities import shown
from simimg.scene.keys import FAULT, Reader, fault, nearest


class Fault(NamedTuple):
    """One mistake inside a table: where below it, what is wrong, what to write instead."""

    place: tuple[str | int, ...]
    what: str
    mend: str


def key(
    description: str,
    default: Any = ...,
    *,
    absent: str = "",
    meaning: str = "",
    unless: tuple[str, ...] = (),
    when: tuple[str, ...] = (),
) -> Any:
    """Field of a table.

    Parameters
    ----------
    description : str
        What the key means, for the reference of keys.
    default : optional
        Value of an absent key, in SI units; without it the key is required.
    absent : str, optional
        The default as a user would write it. Empty: an absent key is nothing to report.
    meaning : str, optional
        What the default means for the frame.
    unless : tuple of str, optional
        The default is not used where one of these keys is given.
    when : tuple of str, optional
        The default is used only where one of these keys is given and is not false.
    """
    extra: dict[str, Any] = {
        "absent": absent,
        "meaning": meaning,
        "unless": list(unless),
        "when": list(when),
    }
    return Field(default, description=description, json_schema_extra=extra)


class Table(BaseModel):
    """A table of a scene file.

    Built from a mapping of keys to values as TOML gives them; the attributes hold SI values.
    """

    model_config = ConfigDict(extra="forbid", frozen=True, hide_input_in_errors=True)

    heading: ClassVar[str] = ""
    """How the table stands in a file, such as ``[air]`` or ``[[pair]]``."""

    written: ClassVar[str] = ""
    """How a small table inside another is written, such as ``vanes = { count = 4 }``."""

    hints: ClassVar[Mapping[str, tuple[str, str]]] = {}
    """Keys that are not known, but foreseen: what is wrong with them, and the mend."""

    @classmethod
    def complete(cls, given: Mapping[str, Any]) -> Mapping[str, Any]:
        """The given keys with those added whose default hangs on other keys."""
        return given

    @classmethod
    def together(cls, given: Mapping[str, Any]) -> Iterator[Fault]:
        """Mistakes in which keys are given together."""
        del given
        yield from ()

    def agree(self) -> Iterator[Fault]:
        """Mistakes in how right values go together."""
        yield from ()

    @model_validator(mode="wrap")
    @classmethod
    def _in_own_words(cls, value: Any, handler: ModelWrapValidatorHandler[Self]) -> Self:
        if isinstance(value, cls):
            return value
        if not isinstance(value, Mapping):
            single = not cls.heading.startswith("[[")
            several = isinstance(value, list | tuple) and single
            raise fault(
                f"must be {'one' if single else 'a'} table, got {shown(value)}",
                f"write {cls.heading} once"
                if several
                else f"write {cls.written or f'a {cls.heading} table'}",
            )
        faults = list(cls.together(value))
        told = {one.place for one in faults}
        made = None
        try:
            made = handler(cls.complete(value))
        except ValidationError as error:
            details = error.errors(include_url=False, include_input=False)
            found = (cls._reworded(dict(one)) for one in details)
            faults[:0] = [one for one in found if one.place not in told]
        if made is not None and not faults:
            faults.extend(made.agree())
        if faults or made is None:
            raise ValidationError.from_exception_data(
                cls.__name__,
                [
                    InitErrorDetails(type=fault(one.what, one.mend), loc=one.place, input=None)
                    for one in faults
                ],
            )
        return made

    @classmethod
    def _reworded(cls, error: dict[str, Any]) -> Fault:
        """One error of pydantic as a mistake in our own words."""
        place: tuple[str | int, ...] = error["loc"]
        context = error.get("ctx", {})
        name = str(place[-1]) if place else ""
        if error["type"] == FAULT:
            return Fault(place, context["what"], context["mend"])
        if error["type"] == "missing":
            return Fault(place, "is required and missing", f"add {cls.sample(name)}")
        if error["type"] == "extra_forbidden":
            what, mend = cls.hints.get(name, ("is not a known key", ""))
            return Fault(place, what, mend or cls._where_to(name))
        return Fault(place, "must be an array of tables", f"write [[{name}]] for each of them")

    @classmethod
    def _where_to(cls, name: str) -> str:
        """Mend of an unknown key: the nearest one here, or the table that it belongs to."""
        mend = nearest(name, list(cls.model_fields))
        if mend.startswith("did you mean"):
            return mend
        homes = sorted(other.heading for other in table_types() if name in other.model_fields)
        if 0 < len(homes) <= 2:
            return f"it belongs under {' or '.join(homes)}"
        return mend

    @classmethod
    def reader(cls, name: str) -> Reader | None:
        """The reader of one key; None for a table or an unknown key."""
        field = cls.model_fields.get(name)
        if field is None:
            return None
        return next((one for one in field.metadata if isinstance(one, Reader)), None)

    @classmethod
    def sample(cls, name: str) -> str:
        """What gives a required key a good value."""
        reader = cls.reader(name)
        if reader is not None:
            return f"{name} = {reader.example}"
        lines = {"telescope": 'aperture = "2 m"', "band": 'name = "V"'}
        return f"a [{name}] table with {lines[name]}" if name in lines else f"a [{name}] table"


def table_types() -> Iterator[type[Table]]:
    """Every kind of table that has a heading."""
    waiting = list(Table.__subclasses__())
    while waiting:
        one = waiting.pop()
        waiting.extend(one.__subclasses__())
        if one.heading:
            yield one


MANY = ("star", "pair", "galaxy", "disc", "ring", "picture", "catalogue")
"""The objects, which may stand in a scene many times."""

REPEATED = (*MANY, "detector")
"""The tables that may stand in a scene many times: objects, and detectors of a mosaic."""
