"""Shape faults: a document that breaks the published schema.

Marshmallow collects every fault as text in a tree that mirrors the document.
The texts here are strings that also carry a code of the catalogue, so that the
tree flattens to one fault per place, each with its JSON Pointer.
"""

from __future__ import annotations

import difflib
from collections.abc import Callable, Iterator
from dataclasses import dataclass
from functools import cached_property, lru_cache
from typing import Any, ClassVar

from marshmallow import RAISE, Schema, ValidationError, fields, missing


class Message(str):
    """The text of a shape fault, and its code."""

    __slots__ = ("allowed", "code")
    code: str
    allowed: tuple[str, ...]


def message(code: str, text: str, allowed: tuple[str, ...] = ()) -> Message:
    """Return ``text`` that carries ``code``."""
    made = Message(text)
    made.code, made.allowed = code, allowed
    return made


@dataclass(frozen=True)
class LocatedFault:
    """One fault and where in the request it stands: exactly one locator.

    ``locator`` is ``pointer``, ``line``, ``row``, ``parameter`` or ``header``;
    ``place`` its value.
    """

    code: str
    detail: str
    place: str
    locator: str = "pointer"


class RequestError(Exception):
    """A request that is not answered; ``faults`` says why, all of it."""

    def __init__(self, faults: tuple[LocatedFault, ...]) -> None:
        super().__init__(faults)
        self.faults = faults


class ShapeError(RequestError):
    """The document breaks the published schema: the caller's programming error."""


class MeaningError(RequestError):
    """The document obeys the schema and still cannot be computed."""


def token(name: object) -> str:
    """Return a reference token of a JSON Pointer (RFC 6901)."""
    return str(name).replace("~", "~0").replace("/", "~1")


@lru_cache(maxsize=8192)
def child(pointer: str, *names: str | int) -> str:
    """Return the pointer of what stands under ``pointer`` by these names."""
    return pointer + "".join(f"/{token(name)}" for name in names)


def kind_of(value: object) -> str:
    """Return the JSON type of a parsed value, as a caller knows it."""
    if value is None:
        return "null"
    if isinstance(value, bool):
        return "a boolean"
    if isinstance(value, int | float):
        return "a number"
    if isinstance(value, str):
        return "a string"
    return "an array" if isinstance(value, list) else "an object"


Reader = Callable[[Any, Any, Any], Any]
"""Reads a value; the name and the object that it stands under come with it."""


def reader_of(field: fields.Field[Any]) -> Reader:
    """Return what reads a value for ``field``; a null too, unless the field is an object's own.

    Marshmallow's own way around a field's judgement, for options that are not
    set here, takes several times as long as the judgement.
    """
    if field.validators or field.pre_load or field.post_load:
        return field.deserialize
    if not isinstance(field, fields.Nested):
        return field._deserialize
    if field.unknown or field.many:
        return field.deserialize
    load = field.schema.load

    def read(value: Any, _name: Any, _data: Any) -> Any:
        return field.deserialize(None) if value is None else load(value)

    return read


class ClosedSchema(Schema):
    """A request object: fields not named are refused, with the nearest known one."""

    class Meta:
        """Marshmallow's settings."""

        unknown = RAISE

    requires: ClassVar[str] = ""

    def __init__(self, **kwargs: Any) -> None:
        super().__init__(**kwargs)
        self._hooked = any(self._hooks.values())
        names = tuple(field.data_key or name for name, field in self.fields.items())
        self.error_messages = {
            "unknown": message("unknown-field", "", names),
            "type": message("wrong-type", f"an object is needed here{self.requires}"),
        }
        for name, field in self.fields.items():
            required = f"the field {field.data_key or name!r} is required and was not sent"
            null = "null is not a value here; leave the field out or give it a value"
            field.error_messages = {
                **field.error_messages,
                "required": message("missing-field", required),
                "null": message("wrong-type", null),
            }

    @cached_property
    def _members(self) -> dict[str, tuple[str, fields.Field[Any], Reader]]:
        """By name in the document: name in what is read, the field, and what reads it."""
        return {
            field.data_key or name: (field.attribute or name, field, reader_of(field))
            for name, field in self.load_fields.items()
        }

    @cached_property
    def _required(self) -> list[tuple[str, Any]]:
        return [
            (name, field.error_messages["required"])
            for name, (_, field, _) in self._members.items()
            if field.required
        ]

    @cached_property
    def _defaults(self) -> dict[str, Any]:
        members = self._members.values()
        return {
            name: field.load_default
            for name, field, _ in members
            if field.load_default is not missing
        }

    def load(self, data: Any, **options: Any) -> Any:
        """Read an object as marshmallow would, in one walk over the members that were sent.

        Marshmallow walks over every field that is declared, most of which are
        not sent, and allows for hooks that no request here has.
        """
        if options or self._hooked:
            return super().load(data, **options)
        if not isinstance(data, dict):
            raise ValidationError({ITSELF: [self.error_messages["type"]]})
        read = self._defaults.copy()
        faults: dict[Any, Any] = {}
        members = self._members
        for sent, value in data.items():
            member = members.get(sent)
            if member is None:
                faults[sent] = [self.error_messages["unknown"]]
                continue
            name, field, reader = member
            try:
                if value is None:
                    reader = field.deserialize
                read[name] = reader(value, sent, data)
            except ValidationError as error:
                faults[sent] = error.messages
        for name, text in self._required:
            if name not in data:
                faults[name] = [text]
        if faults:
            raise ValidationError(faults)
        return read


def load(schema: Schema, document: object) -> dict[str, Any]:
    """Return the document as the schema reads it.

    Raises
    ------
    ShapeError
        With every fault found.
    """
    try:
        loaded: dict[str, Any] = schema.load(document)  # type: ignore[arg-type]
    except ValidationError as error:
        found = sorted(_flatten(error.messages, ""), key=lambda fault: fault[0])
        # To look for the nearest known name takes a while, and few faults are ever shown.
        told = [_told(pointer, text, hint=k < SHOWN) for k, (pointer, text) in enumerate(found)]
        raise ShapeError(tuple(told)) from None
    return loaded


SHOWN = 100
"""Faults that a caller is shown, at most."""

ITSELF = object()
"""Files a fault of an object itself, where its members' faults stand under their names."""


def _flatten(tree: object, pointer: str) -> Iterator[tuple[str, str]]:
    if isinstance(tree, dict):
        for name, below in tree.items():
            yield from _flatten(below, pointer if name is ITSELF else child(pointer, name))
    elif isinstance(tree, list):
        for item in tree:
            yield from _flatten(item, pointer)
    else:
        yield pointer, tree if isinstance(tree, str) else str(tree)


def _told(pointer: str, text: str, *, hint: bool) -> LocatedFault:
    code = getattr(text, "code", "wrong-type")
    if code == "unknown-field":
        text = _unknown_field(pointer, text.allowed if hint else ())  # type: ignore[attr-defined]
    return LocatedFault(code, text, pointer)


def _unknown_field(pointer: str, allowed: tuple[str, ...]) -> str:
    name = pointer.rpartition("/")[2].replace("~1", "/").replace("~0", "~")
    near = difflib.get_close_matches(name[:80], allowed, n=1)
    hint = f" (did you mean {near[0]!r}?)" if near else ""
    return f"no field {name[:80]!r} is known here{hint}; allowed: {', '.join(sorted(allowed))}"
