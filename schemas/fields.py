"""Fields that read JSON types exactly, and say in the contract what they read.

A stock float field takes ``"1.5"`` and ``true`` for numbers, so that what is
published and what is done would differ; these do not. Each field carries the
constraints that :mod:`schemas.contract` writes into the JSON Schema.
"""

from __future__ import annotations

import re
from collections.abc import Callable, Iterable, Mapping
from dataclasses import replace
from functools import lru_cache
from typing import Any

from marshmallow import Schema, ValidationError, fields

from schemas.quantities import (
    LARGEST,
    MAX_UNIT_LENGTH,
    NUMBER_PATTERN,
    QUANTITY_PATTERN,
    READING_PATTERN,
    UNIT_PATTERN,
    RawQuantity,
    check_magnitude,
    clip,
    parse_quantity,
)
from schemas.shape import ClosedSchema, Message, Reader, kind_of, message, reader_of

MAX_SUBSTANCES = 100
MAX_NAME_LENGTH = 80
NAME_PATTERN = r"^[^\x00-\x1f]{1,80}$"

Published = dict[str, Any]
Converter = Callable[[fields.Field[Any]], Published]


def describe(text: str, **more: Any) -> dict[str, Any]:
    """Return the metadata that puts a description into the contract."""
    return {"description": text, **more} if text else more


class StrictField(fields.Field[Any]):
    """A field that publishes its own JSON Schema."""

    def published(self, convert: Converter) -> Published:
        """Return the JSON Schema of the field; ``convert`` does the same for inner fields."""
        raise NotImplementedError


def _wrong_type(wanted: str, value: object) -> ValidationError:
    return ValidationError(message("wrong-type", f"found {kind_of(value)}; {wanted} is needed"))


class Number(StrictField):
    """A finite JSON number within bounds."""

    def __init__(
        self,
        *,
        at_least: float = -LARGEST,
        above: float | None = None,
        at_most: float = LARGEST,
        integer: bool = False,
        **kwargs: Any,
    ) -> None:
        super().__init__(**kwargs)
        self.at_least, self.above, self.at_most, self.integer = at_least, above, at_most, integer

    def _deserialize(self, value: Any, attr: Any, data: Any, **kwargs: Any) -> float:
        if isinstance(value, bool) or not isinstance(value, int | float):
            raise _wrong_type("a number", value)
        if self.integer and value != int(value):
            raise _wrong_type("a whole number", value)
        low = self.at_least if self.above is None else self.above
        if not self.at_least <= value <= self.at_most or (
            self.above is not None and value <= self.above
        ):
            kind = "at least" if self.above is None else "above"
            raise ValidationError(
                message(
                    "out-of-range",
                    f"found {value:g}; allowed: {kind} {low:g} and at most {self.at_most:g}",
                )
            )
        return int(value) if self.integer else float(value)

    def published(self, convert: Converter) -> Published:
        """Return type and bounds."""
        low = {"minimum": self.at_least} if self.above is None else {"exclusiveMinimum": self.above}
        return {"type": "integer" if self.integer else "number", **low, "maximum": self.at_most}


class Flag(StrictField):
    """A JSON boolean."""

    def _deserialize(self, value: Any, attr: Any, data: Any, **kwargs: Any) -> bool:
        if not isinstance(value, bool):
            raise _wrong_type("true or false", value)
        return value

    def published(self, convert: Converter) -> Published:
        """Return the boolean type."""
        return {"type": "boolean"}


class Text(StrictField):
    """A JSON string that matches a pattern (linear-time, anchored)."""

    def __init__(
        self,
        pattern: str = NAME_PATTERN,
        wanted: str = "",
        longest: int | None = None,
        **kwargs: Any,
    ) -> None:
        super().__init__(**kwargs)
        self.pattern = pattern
        self.longest = longest
        self.wanted = wanted or "1 to 80 characters without control characters are allowed"
        self._match = re.compile(pattern).fullmatch

    def _deserialize(self, value: Any, attr: Any, data: Any, **kwargs: Any) -> str:
        if not isinstance(value, str):
            raise _wrong_type("a string", value)
        too_long = self.longest is not None and len(value) > self.longest
        if too_long or self._match(value) is None:
            raise ValidationError(message("bad-text", f"found {clip(value)!r}; {self.wanted}"))
        return value

    def published(self, convert: Converter) -> Published:
        """Return the string type and its pattern."""
        longest = {} if self.longest is None else {"maxLength": self.longest}
        return {"type": "string", "pattern": self.pattern, **longest}


class Choice(StrictField):
    """One of a few strings."""

    def __init__(self, *choices: str, **kwargs: Any) -> None:
        super().__init__(**kwargs)
        self.choices = choices

    def _deserialize(self, value: Any, attr: Any, data: Any, **kwargs: Any) -> str:
        if value not in self.choices or not isinstance(value, str):
            found = repr(clip(value)) if isinstance(value, str) else kind_of(value)
            raise ValidationError(
                message("not-a-choice", f"found {found}; allowed: {', '.join(self.choices)}")
            )
        return value

    def published(self, convert: Converter) -> Published:
        """Return the enumeration, or the one value."""
        if len(self.choices) == 1:
            return {"type": "string", "const": self.choices[0]}
        return {"type": "string", "enum": list(self.choices)}


class List(StrictField):
    """A JSON array of one kind of thing."""

    def __init__(
        self, each: fields.Field[Any], *, at_least: int = 1, at_most: int, **kwargs: Any
    ) -> None:
        super().__init__(**kwargs)
        self.each, self.at_least, self.at_most = each, at_least, at_most
        self._read = reader_of(each)

    def _deserialize(self, value: Any, attr: Any, data: Any, **kwargs: Any) -> list[Any]:
        if not isinstance(value, list):
            raise _wrong_type("an array", value)
        if not self.at_least <= len(value) <= self.at_most:
            raise ValidationError(
                message(
                    "wrong-length",
                    f"found {len(value)} entries; allowed: {self.at_least} to {self.at_most}",
                )
            )
        return list(_each(enumerate(value), self._read, value).values())

    def published(self, convert: Converter) -> Published:
        """Return the array and what it holds."""
        return {
            "type": "array",
            "items": convert(self.each),
            "minItems": self.at_least,
            "maxItems": self.at_most,
        }


class Map(StrictField):
    """A JSON object from the caller's own names to one kind of thing.

    Faults stand under the caller's name, so that the pointer is the one in the
    document.
    """

    def __init__(
        self,
        each: fields.Field[Any],
        *,
        at_least: int = 1,
        at_most: int = MAX_SUBSTANCES,
        **kwargs: Any,
    ) -> None:
        super().__init__(**kwargs)
        self.each, self.at_least, self.at_most = each, at_least, at_most
        self._read = reader_of(each)

    def _deserialize(self, value: Any, attr: Any, data: Any, **kwargs: Any) -> dict[str, Any]:
        if not isinstance(value, dict):
            raise _wrong_type("an object", value)
        if not self.at_least <= len(value) <= self.at_most:
            raise ValidationError(
                message(
                    "wrong-length",
                    f"found {len(value)} members; allowed: {self.at_least} to {self.at_most}",
                )
            )
        if not all(map(_good_name, value)):
            bad = {name: [_bad_name(name)] for name in value if not _good_name(name)}
            raise ValidationError(bad)
        return _each(value.items(), self._read, value)

    def published(self, convert: Converter) -> Published:
        """Return the object, its names and what stands under them."""
        return {
            "type": "object",
            "additionalProperties": convert(self.each),
            "propertyNames": {"type": "string", "pattern": NAME_PATTERN},
            "minProperties": self.at_least,
            "maxProperties": self.at_most,
        }


@lru_cache(maxsize=4096)
def _good_name(name: str) -> bool:
    return re.fullmatch(NAME_PATTERN, name) is not None


def _bad_name(name: str) -> Message:
    return message(
        "bad-text",
        f"found the name {clip(name)!r}; names are 1 to {MAX_NAME_LENGTH} characters long"
        " and have no control characters",
    )


def _each(items: Iterable[tuple[Any, Any]], read: Reader, data: Any) -> dict[Any, Any]:
    done: dict[Any, Any] = {}
    faults: dict[Any, Any] = {}
    for name, item in items:
        try:
            done[name] = read(item, name, data)
        except ValidationError as error:
            faults[name] = error.messages
    if faults:
        raise ValidationError(faults)
    return done


class Quantity(StrictField):
    """A number with a unit: ``"12.5 kmol/h"``, an object, or a bare dimensionless number.

    With ``reading`` the limits of an analyser are understood too (``"<0.05 %"``).
    """

    def __init__(self, *, reading: bool = False, **kwargs: Any) -> None:
        super().__init__(**kwargs)
        self.reading = reading

    def _deserialize(self, value: Any, attr: Any, data: Any, **kwargs: Any) -> RawQuantity:
        if isinstance(value, str):
            parsed: RawQuantity = parse_quantity(value, self.reading)
            return parsed
        if isinstance(value, int | float) and not isinstance(value, bool):
            check_magnitude(value)
            return RawQuantity(float(value))
        if not isinstance(value, dict):
            raise _wrong_type('a quantity such as "12.5 kmol/h"', value)
        if self.reading and "value" not in value and ("below" in value or "above" in value):
            limit: dict[str, Any] = _limit.load(value)
            return _limit_quantity(limit)
        return _uncertain_quantity(_uncertain.load(value))

    def published(self, convert: Converter) -> Published:
        """Return a reference to the shared component."""
        return {"$ref": f"#/components/schemas/{'Reading' if self.reading else 'Quantity'}"}


class OneOf(StrictField):
    """A value whose form is told by its JSON type or by a field that only it has.

    Parameters
    ----------
    forms : Mapping[str, Field]
        By ``"string"`` or ``"number"`` for these JSON types; by the name of a
        field for an object that has it; ``"otherwise"`` for the rest.
    """

    def __init__(self, forms: Mapping[str, fields.Field[Any]], **kwargs: Any) -> None:
        super().__init__(**kwargs)
        self.forms = dict(forms)
        self._readers = {name: reader_of(field) for name, field in forms.items()}

    def _deserialize(self, value: Any, attr: Any, data: Any, **kwargs: Any) -> Any:
        readers = self._readers
        if isinstance(value, dict):
            for name, read in readers.items():
                if name in value:
                    return read(value, attr, data)
        elif isinstance(value, str) and "string" in readers:
            return readers["string"](value, attr, data)
        elif isinstance(value, list) and "array" in readers:
            return readers["array"](value, attr, data)
        if "otherwise" in readers:
            return readers["otherwise"](value, attr, data)
        raise _wrong_type(f"one of these forms ({', '.join(readers)})", value)

    def published(self, convert: Converter) -> Published:
        """Return the alternatives."""
        return {"anyOf": [convert(field) for field in self.forms.values()]}


class UncertainSchema(ClosedSchema):
    """The object form of a quantity."""

    requires = ', such as {"value": 12.5, "unit": "kmol/h"}'

    value = Number(required=True, metadata=describe("In its unit."))
    unit = Text(
        pattern=r"^[^\x00-\x1f]{0,40}$",
        wanted=f"a unit is at most {MAX_UNIT_LENGTH} characters long",
        metadata=describe("Left out: the quantity is dimensionless."),
    )
    u = OneOf(
        {
            "string": Text(
                pattern=QUANTITY_PATTERN.replace("[+-]?", "", 1),
                longest=80,
                wanted='an uncertainty is a number of zero or more and a unit, such as "0.5 K"',
            ),
            "otherwise": Number(at_least=0),
        },
        metadata=describe(
            "Standard uncertainty, a difference: a number in the unit of the value, or a quantity"
            " of the same kind. 0 is exact."
        ),
    )
    u_rel = Number(
        at_least=0, at_most=10, metadata=describe("Standard uncertainty over the value.")
    )
    u_shared = Number(
        at_least=0,
        metadata=describe(
            "Standard uncertainty, in the unit of the value, of the part that is constant over a"
            " series and common to readings of the same instrument."
        ),
    )
    instrument = Text(metadata=describe("Name of the instrument that gave the reading."))


class LimitSchema(ClosedSchema):
    """A reading that is a limit, a non-detect or an off-scale value: exactly one of the two."""

    below = Quantity(metadata=describe("The value lies between 0 and this limit."))
    above = Quantity(metadata=describe("The value lies above this limit."))


_uncertain = UncertainSchema()
_limit = LimitSchema()


def _uncertain_quantity(loaded: dict[str, Any]) -> RawQuantity:
    u = loaded.pop("u", None)
    u_unit = None
    if isinstance(u, str):
        difference = parse_quantity(u)
        u, u_unit = difference.value, difference.unit
    loaded["unit"] = loaded.get("unit", "").strip() or "1"
    return RawQuantity(u=u, u_unit=u_unit, **loaded)


def _limit_quantity(loaded: dict[str, Any]) -> RawQuantity:
    if len(loaded) != 1:
        raise ValidationError(message("not-a-quantity", "state 'below' or 'above', not both"))
    bound, limit = next(iter(loaded.items()))
    said: RawQuantity = replace(limit, bound=bound)
    return said


class Tagged(StrictField):
    """An object whose form is told by a discriminator field such as ``kind``."""

    def __init__(self, tag: str, forms: Mapping[str, type[Schema]], **kwargs: Any) -> None:
        super().__init__(**kwargs)
        self.tag = tag
        self.forms = {name: form() for name, form in forms.items()}
        self.nested = [fields.Nested(form) for form in dict.fromkeys(forms.values())]

    def _deserialize(self, value: Any, attr: Any, data: Any, **kwargs: Any) -> Any:
        if not isinstance(value, dict):
            raise _wrong_type("an object", value)
        allowed = f"allowed: {', '.join(self.forms)}"
        if self.tag not in value:
            text = f"the field {self.tag!r} is required and was not sent; {allowed}"
            raise ValidationError({self.tag: [message("missing-field", text)]})
        name = value[self.tag]
        if not isinstance(name, str) or name not in self.forms:
            found = repr(clip(name)) if isinstance(name, str) else kind_of(name)
            text = f"found {found}; {allowed}"
            raise ValidationError({self.tag: [message("not-a-choice", text)]})
        return self.forms[name].load(value)

    def published(self, convert: Converter) -> Published:
        """Return the alternatives, one for each form."""
        forms = [convert(field) for field in self.nested]
        mapping = {name: form["$ref"] for name, form in zip(self.forms, forms, strict=True)}
        return {
            "oneOf": forms,
            "discriminator": {"propertyName": self.tag, "mapping": mapping},
        }


def quantity_components() -> dict[str, Published]:
    """Return the JSON Schemas of the quantity in its forms, to be shared by reference."""
    uncertain: Published = {"$ref": "#/components/schemas/Uncertain"}
    bare = {"type": "number", "minimum": -LARGEST, "maximum": LARGEST}
    return {
        "Quantity": {
            "description": "A number with a unit: a string, an object that may carry an"
            " uncertainty, or a bare number where the quantity is dimensionless.",
            "anyOf": [
                bare,
                {"type": "string", "pattern": QUANTITY_PATTERN, "maxLength": 80},
                uncertain,
            ],
        },
        "Reading": {
            "description": "A quantity, or the limit that an analyser gave instead of one.",
            "anyOf": [
                bare,
                {"type": "string", "pattern": READING_PATTERN, "maxLength": 80},
                uncertain,
                {"$ref": "#/components/schemas/Limit"},
            ],
        },
    }


__all__ = [
    "MAX_SUBSTANCES",
    "NUMBER_PATTERN",
    "UNIT_PATTERN",
    "Choice",
    "Flag",
    "LimitSchema",
    "List",
    "Map",
    "Number",
    "OneOf",
    "Quantity",
    "StrictField",
    "Tagged",
    "Text",
    "UncertainSchema",
    "describe",
    "quantity_components",
]
