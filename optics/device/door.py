"""From the raw document to parsed parts: every fault of keys, types and single values at once."""

from __future__ import annotations

import types
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from typing import Annotated, Any, Union, get_args, get_origin

from pydantic import BaseModel, ValidationError
from pydantic_core import ErrorDetails

from optics.device.errors import Fault, nearest
from optics.device.schema import TAGS, CaseModel
from optics.device.schema_parts import TAG_MARK

_NAMED_LISTS = ("layers", "emitters")

_EXPECTED = {
    "float_type": "a number",
    "int_type": "a whole number",
    "string_type": "text in quotes",
    "list_type": "a list",
    "dict_type": "a table",
    "model_type": "a table",
    "model_attributes_type": "a table",
    "bool_type": "true or false",
    "finite_number": "a finite number",
    "string_pattern_mismatch": "letters, digits, _ and - only",
}

_RANGE_KINDS = ("greater_than", "greater_than_equal", "less_than", "less_than_equal")


@dataclass(slots=True)
class Faults:
    """Faults found so far in one file.

    Attributes
    ----------
    where : str
        How messages call the file.
    found : list of Fault
        In the order in which they were noticed.
    """

    where: str
    found: list[Fault] = field(default_factory=list)

    def add(self, key: str, found: str, expected: str, near: str | None = None) -> None:
        """Note one fault."""
        self.found.append(Fault(self.where, key, found, expected, near))


def shown(value: Any) -> str:
    """How a message quotes a value of the document."""
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, str):
        return f'"{value}"'
    if isinstance(value, int):
        return (
            str(value)
            if abs(value) < 10**15
            else f"{str(value)[:5]}... of {len(str(value))} digits"
        )
    if isinstance(value, float):
        return f"{value:.10g}"
    if isinstance(value, Mapping):
        return "a table with " + (", ".join(map(str, value)) or "nothing in it")
    if isinstance(value, Sequence):
        return f"a list of {len(value)}"
    return f"the {type(value).__name__} {value}"


def entry_key(document: Mapping[str, Any], section: str, index: int) -> str:
    """Dotted key of a list entry: by its name, or by its index where that is no name of its own."""
    entries = document.get(section)
    names = [entry.get("name") if isinstance(entry, Mapping) else None for entry in entries or []]
    name = names[index]
    if isinstance(name, str) and name and names.count(name) == 1:
        return f"{section}.{name}"
    return f"{section}[{index}]"


def parse(document: Mapping[str, Any], faults: Faults) -> CaseModel | None:
    """Parse a document; on faults note them all and return None (see `salvage`)."""
    try:
        return CaseModel.model_validate(dict(document))
    except ValidationError as error:
        for details in error.errors(include_url=False):
            _note(details, document, faults)
        return None


def _note(details: ErrorDetails, document: Mapping[str, Any], faults: Faults) -> None:
    """Turn one validation error into a fault in the words of the case file."""
    location = [part for part in details["loc"] if part != "[key]"]
    key = _dotted(location, document)
    value = details["input"]
    kind = details["type"]
    context = details.get("ctx", {})
    owner = _model_at(location[:-1])
    if kind == "extra_forbidden":
        allowed = field_names(owner) if owner else ()
        name = str(location[-1])
        near = nearest(name, allowed)
        faults.add(key, f"unknown key with {shown(value)}", f"one of {', '.join(allowed)}", near)
    elif kind == "missing":
        name = str(location[-1])
        faults.add(key, "nothing", _description(owner, name) or "a value")
    elif kind == "kind":
        _note_kind(key, value, context, faults)
    elif kind == "string_pattern_mismatch" and "[key]" in details["loc"]:
        faults.add(key, f'the name "{location[-1]}"', _EXPECTED[kind])
    elif kind in _RANGE_KINDS:
        faults.add(key, shown(value), _range(owner, location[-1], context))
    else:
        faults.add(key, shown(value), _expected(kind, context), _near_literal(kind, value, context))


def _note_kind(key: str, value: Any, context: Mapping[str, Any], faults: Faults) -> None:
    """No kind, or more than one, of a table that comes in several kinds."""
    options = str(context["options"]).split()
    if not isinstance(value, Mapping):
        inside = f"{context['key']}, " if context["key"] else ""
        faults.add(key, shown(value), f"a table with {inside}{context['expected']}")
    elif context["key"]:
        shape_key = str(context["key"])
        shape = value.get(shape_key)
        found = "nothing" if shape is None else shown(shape)
        near = nearest(shape, options) if isinstance(shape, str) else None
        faults.add(f"{key}.{shape_key}", found, str(context["expected"]), near)
    else:
        near = None
        if not any(option in value for option in options):
            near = next((n for name in value if (n := nearest(str(name), options))), None)
        faults.add(key, shown(value), str(context["expected"]), near)


def _expected(kind: str, context: Mapping[str, Any]) -> str:
    """Say what was expected, from the type of a validation error."""
    if kind in _EXPECTED:
        return _EXPECTED[kind]
    if kind == "literal_error":
        return "one of " + str(context["expected"]).replace("'", '"').replace(" or ", ", ")
    if kind == "too_short":
        return f"at least {context['min_length']}"
    if kind == "too_long":
        return f"at most {context['max_length']}"
    return kind.replace("_", " ")


def _range(owner: type[BaseModel] | None, key: str | int, context: Mapping[str, Any]) -> str:
    """Range of a number, both ends where the model tells them."""
    schema: Mapping[str, Any] = {}
    if owner is not None:
        schema = owner.model_json_schema()["properties"].get(key, {})
        schema = next(iter(schema.get("anyOf", [])), schema)
    low, above = schema.get("minimum", context.get("ge")), schema.get("exclusiveMinimum")
    high, above = schema.get("maximum", context.get("le")), context.get("gt", above)
    ends = [] if above is None else [f"above {above:g}"]
    if low is not None and high is not None:
        return f"a number from {low:g} to {high:g}"
    ends += [] if low is None else [f"of at least {low:g}"]
    ends += [] if high is None else [f"of at most {high:g}"]
    return f"a number {' and '.join(ends)}"


def _near_literal(kind: str, value: Any, context: Mapping[str, Any]) -> str | None:
    if kind != "literal_error" or not isinstance(value, str):
        return None
    return nearest(
        value, str(context["expected"]).replace("'", "").replace(" or ", ", ").split(", ")
    )


def _dotted(location: Sequence[str | int], document: Mapping[str, Any]) -> str:
    """Dotted key of a location, tags left out and list entries by name."""
    key = ""
    for position, part in enumerate(location):
        if isinstance(part, str) and part.startswith(TAG_MARK):
            continue
        if position == 1 and isinstance(part, int) and location[0] in _NAMED_LISTS:
            key = entry_key(document, str(location[0]), part)
        elif isinstance(part, int):
            key += f"[{part}]"
        else:
            text = f'"{part}"' if "." in part else part
            key = f"{key}.{text}" if key else text
    return key


def field_names(model: type[BaseModel]) -> tuple[str, ...]:
    """Keys of a table as the case file spells them."""
    return tuple(info.alias or name for name, info in model.model_fields.items())


def _description(model: type[BaseModel] | None, key: str) -> str | None:
    if model is None:
        return None
    for name, info in model.model_fields.items():
        if key in (name, info.alias):
            return info.description
    return None


def _model_at(location: Sequence[str | int]) -> type[BaseModel] | None:
    """Model of the table at a location; None where there is none."""
    kind: Any = CaseModel
    for part in location:
        kind = _step(kind, part)
    return kind if isinstance(kind, type) and issubclass(kind, BaseModel) else None


def _step(kind: Any, part: str | int) -> Any:
    """Type one step further into a document."""
    if isinstance(part, str) and part.startswith(TAG_MARK):
        return TAGS.get(part.removeprefix(TAG_MARK), kind)
    if isinstance(kind, type) and issubclass(kind, BaseModel):
        for name, info in kind.model_fields.items():
            if part in (name, info.alias):
                return _plain(info.annotation)
        return None
    if get_origin(kind) in (list, dict):
        return _plain(get_args(kind)[-1])
    return None


def _plain(kind: Any) -> Any:
    """Strip annotation and None from a type."""
    if get_origin(kind) is Annotated:
        return _plain(get_args(kind)[0])
    if get_origin(kind) in (Union, types.UnionType):
        others = [option for option in get_args(kind) if option is not type(None)]
        return _plain(others[0]) if len(others) == 1 else kind
    return kind
