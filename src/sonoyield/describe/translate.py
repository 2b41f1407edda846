"""Pydantic's list of errors turned into one message about one key."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from typing import Any, cast

from pydantic import BaseModel, BeforeValidator, ValidationError
from pydantic.fields import FieldInfo

from sonoyield.describe.errors import MISSING, ProtocolError, RefusalError
from sonoyield.describe.fields import nearest
from sonoyield.describe.later import LATER_KEYS

# A misspelt key also leaves its right name missing: name the misspelling.
_ORDER = {"extra_forbidden": 0, "missing": 2}
_OTHER_NAMES: dict[tuple[str, ...], str] = {("model", "accommodation", "H2O"): "water"}


def protocol_error(
    error: ValidationError, root: type[BaseModel], data: Mapping[str, Any], file: str
) -> ProtocolError:
    """Choose the first error worth telling and word it.

    Parameters
    ----------
    error : what pydantic raised.
    root : the model that was validated.
    data : the table as the user wrote it.
    file : name for the message.
    """
    found = error.errors(include_url=False)
    first = cast("dict[str, Any]", min(found, key=lambda e: _ORDER.get(e["type"], 1)))
    path = tuple(str(part) for part in first["loc"])
    if first["type"] == "extra_forbidden":
        return _unknown_key(root, path, data, file)
    if first["type"] == "missing":
        return ProtocolError(file, ".".join(path), MISSING, "missing", _allowed(root, path))
    cause = first.get("ctx", {}).get("error")
    if isinstance(cause, RefusalError):
        path += tuple(cause.key.split(".")) if cause.key else ()
        value = _value_at(data, path)
        return ProtocolError(file, ".".join(path), value, cause.problem, cause.allowed)
    problem = "a table is due" if first["type"] == "model_type" else str(first["msg"])
    return ProtocolError(file, ".".join(path), _value_at(data, path), problem, _allowed(root, path))


def _unknown_key(
    root: type[BaseModel], path: tuple[str, ...], data: Mapping[str, Any], file: str
) -> ProtocolError:
    key = ".".join(path)
    value = _value_at(data, path)
    home = _model_at(root, path[:-1]) or root
    names = tuple(home.model_fields)
    sentence = LATER_KEYS.get(key, "")
    if sentence:
        return ProtocolError(file, key, value, sentence, ", ".join(names))
    near = _nearest_key(root, path, names)
    problem = f"unknown key (did you mean {near}?)" if near else "unknown key"
    return ProtocolError(file, key, value, problem, ", ".join(names))


def _nearest_key(root: type[BaseModel], path: tuple[str, ...], names: tuple[str, ...]) -> str:
    """Look in the same table first, then among the last parts of all keys."""
    near = _OTHER_NAMES.get(path, "") or nearest(path[-1], names)
    if near:
        return ".".join((*path[:-1], near))
    everywhere = {known[-1]: ".".join(known) for known in _all_keys(root)}
    return everywhere.get(nearest(path[-1], everywhere), "")


def _all_keys(model: type[BaseModel], above: tuple[str, ...] = ()) -> Iterator[tuple[str, ...]]:
    for name, info in model.model_fields.items():
        yield (*above, name)
        inner = _model_of(info)
        if inner:
            yield from _all_keys(inner, (*above, name))


def _allowed(root: type[BaseModel], path: tuple[str, ...]) -> str:
    """Words for what may stand at a key: its reader's, or the keys of its table."""
    table = _model_at(root, path)
    if table:
        return "a table with " + ", ".join(table.model_fields)
    home = _model_at(root, path[:-1])
    info = home.model_fields.get(path[-1]) if home else None
    for mark in info.metadata if info else ():
        if isinstance(mark, BeforeValidator):
            return str(getattr(mark.func, "allowed", ""))
    return ""


def _model_at(root: type[BaseModel], path: tuple[str, ...]) -> type[BaseModel] | None:
    here: type[BaseModel] | None = root
    for name in path:
        info = here.model_fields.get(name) if here else None
        here = _model_of(info) if info else None
    return here


def _model_of(info: FieldInfo) -> type[BaseModel] | None:
    kinds = (info.annotation, *getattr(info.annotation, "__args__", ()))
    for kind in kinds:
        if isinstance(kind, type) and issubclass(kind, BaseModel):
            return kind
    return None


def _value_at(data: Any, path: tuple[str, ...]) -> object:
    if not path:
        return data
    if not isinstance(data, Mapping):
        return MISSING
    for end in range(1, len(path) + 1):  # a name may itself hold dots
        name = ".".join(path[:end])
        found = _value_at(data[name], path[end:]) if name in data else MISSING
        if found is not MISSING:
            return found
    return MISSING
