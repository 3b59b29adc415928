"""What can be used of a table at fault, so that every check runs that rests on the rest of it.

A salvaged part is a model with the fields that parsed. Checks read it with `known`, which gives
None for a field at fault, and ask with `stated` and `doubtful` which keys stand there.
"""

from __future__ import annotations

from collections.abc import Mapping
from functools import cache
from types import UnionType
from typing import Annotated, Any, Union, get_args, get_origin

from pydantic import BaseModel, ConfigDict, Discriminator, Tag, TypeAdapter, ValidationError

from optics.device.errors import nearest

_LOST = object()
# Single fields are read as strictly as whole tables (`Part`).
_STRICT = ConfigDict(strict=True, allow_inf_nan=False)


def known(part: BaseModel | None, name: str) -> Any:
    """Value of a field; None where it is at fault or left out without a default."""
    return None if part is None else part.__dict__.get(name)


def stated(part: BaseModel, *names: str) -> list[str]:
    """Fields that stand in the file, whether or not their values are at fault."""
    here = part.model_fields_set
    return [name for name in names if name in here and part.__dict__.get(name, _LOST) is not None]


def doubtful(part: BaseModel, *names: str) -> bool:
    """Whether one of the fields may stand in the file under a misspelled key, or is missing."""
    return any(name not in part.__dict__ and name not in part.model_fields_set for name in names)


def intact(value: Any) -> bool:
    """Whether nothing of a parsed or salvaged value is at fault."""
    if isinstance(value, BaseModel):
        values = value.__dict__
        return all(name in values for name in type(value).model_fields) and all(
            inner is None or intact(inner) for inner in values.values()
        )
    if isinstance(value, dict):
        return all(inner is not None and intact(inner) for inner in value.values())
    if isinstance(value, list):
        return all(inner is not None and intact(inner) for inner in value)
    return True


def plain_types(value: Any) -> Any:
    """Salvaged part as plain dictionaries by the keys of the file, without what is at fault."""
    if isinstance(value, BaseModel):
        fields = type(value).model_fields
        return {
            fields[name].alias or name: plain_types(inner)
            for name, inner in value.__dict__.items()
            if inner is not None
        }
    if isinstance(value, dict):
        return {key: plain_types(inner) for key, inner in value.items() if inner is not None}
    if isinstance(value, list):
        return [{} if inner is None else plain_types(inner) for inner in value]
    return value


def salvage(model: type[BaseModel], raw: Mapping[str, Any]) -> BaseModel:
    """Read of a table what can be.

    Parameters
    ----------
    model : type of BaseModel
        What the table should be.
    raw : mapping
        The table as it stands in the document.

    Returns
    -------
    BaseModel
        With a field for everything that parsed and the defaults of keys left out. A key that
        resembles no key is passed over; one that looks misspelled leaves the field it may have
        meant unknown. Lists and dictionaries keep their places, None where an entry is at fault.
    """
    keys = {name: info.alias or name for name, info in model.model_fields.items()}
    meant = {nearest(str(key), keys.values()) for key in raw if key not in keys.values()}
    values = {}
    for name, key in keys.items():
        info = model.model_fields[name]
        if key in raw:
            value = _salvaged(model, name, raw[key])
        elif info.is_required() or key in meant:
            continue
        else:
            value = info.get_default(call_default_factory=True)
        if value is not _LOST:
            values[name] = value
    part = model.model_construct(_fields_set={name for name, key in keys.items() if key in raw})
    # The defaults that construction fills in would pass for values of fields at fault.
    part.__dict__.clear()
    part.__dict__.update(values)
    return part


def _salvaged(model: type[BaseModel], name: str, raw: Any) -> Any:
    try:
        return _adapter(model, name).validate_python(raw)
    except ValidationError:
        return _pieces(_kind(model, name), raw)


@cache
def _kind(model: type[BaseModel], name: str) -> Any:
    """Type of a field with its constraints, which pydantic takes out of the annotation."""
    info = model.model_fields[name]
    extras = (*info.metadata, *([info.discriminator] if info.discriminator is not None else []))
    return Annotated[(info.annotation, *extras)] if extras else info.annotation


@cache
def _adapter(model: type[BaseModel], name: str) -> TypeAdapter[Any]:
    return _strict_adapter(_kind(model, name))


def _strict_adapter(kind: Any) -> TypeAdapter[Any]:
    is_model = isinstance(kind, type) and issubclass(kind, BaseModel)
    return TypeAdapter(kind) if is_model else TypeAdapter(kind, config=_STRICT)


def _pieces(kind: Any, raw: Any) -> Any:
    """Usable pieces of a value at fault."""
    kind = _chosen(kind, raw)
    if isinstance(kind, type) and issubclass(kind, BaseModel):
        return salvage(kind, raw) if isinstance(raw, Mapping) else _LOST
    if get_origin(kind) is dict and isinstance(raw, Mapping):
        entries = {key: _entry(kind, value) for key, value in raw.items() if isinstance(key, str)}
        return entries if _has_tables(kind) or None in entries.values() else _LOST
    if get_origin(kind) is list and isinstance(raw, list):
        listed = [_entry(kind, value) for value in raw]
        return listed if _has_tables(kind) or None in listed else _LOST
    return _LOST


def _entry(kind: Any, raw: Any) -> Any:
    """Entry of a list or dictionary; None if nothing of it is of use."""
    inner = get_args(kind)[-1]
    try:
        return _strict_adapter(inner).validate_python(raw)
    except ValidationError:
        pieces = _pieces(inner, raw)
        return None if pieces is _LOST else pieces


def _has_tables(kind: Any) -> bool:
    """Whether the entries of a list or dictionary are tables of their own."""
    inner = get_args(kind)[-1]
    return any(
        isinstance(option, type) and issubclass(option, BaseModel)
        for option in (_bare(inner), *map(_bare, get_args(_bare(inner))))
    )


def _chosen(kind: Any, raw: Any) -> Any:
    """Bare type, of a union the member that the keys of the value tell; None if they do not."""
    extras = get_args(kind)[1:] if get_origin(kind) is Annotated else ()
    bare = _bare(kind)
    chooser = next((extra for extra in extras if isinstance(extra, Discriminator)), None)
    if chooser is not None and callable(chooser.discriminator):
        tag = Tag(str(chooser.discriminator(raw)))
        return next((_bare(option) for option in get_args(bare) if tag in get_args(option)), None)
    if get_origin(bare) in (Union, UnionType):
        options = [option for option in get_args(bare) if option is not type(None)]
        return _chosen(options[0], raw) if len(options) == 1 else None
    return bare


def _bare(kind: Any) -> Any:
    return _bare(get_args(kind)[0]) if get_origin(kind) is Annotated else kind
