"""Messages for a description that cannot be used: file, key, value and what is allowed."""

from __future__ import annotations

import json
from collections.abc import Mapping
from datetime import date, time
from typing import Any

LONGEST_VALUE = 60


class _Missing:
    """Stands for the value of a key that is not there."""

    def __repr__(self) -> str:
        return "MISSING"

    def __reduce__(self) -> str:
        return "MISSING"


MISSING = _Missing()


class RefusalError(ValueError):
    """One value refused where it is read, before the file and the whole key are known.

    Parameters
    ----------
    problem : what is wrong, in a few words.
    allowed : what would be right; may be empty.
    key : dotted key below the place that refuses; empty for the place itself.
    """

    def __init__(self, problem: str, allowed: str = "", key: str = "") -> None:
        super().__init__(problem, allowed, key)
        self.problem = problem
        self.allowed = allowed
        self.key = key

    def __str__(self) -> str:
        return one_line(_sentence(self.problem, self.allowed))


class ProtocolError(ValueError):
    """A protocol that cannot be used; ``str()`` is one line.

    Parameters
    ----------
    file : name of the file, empty when there is none.
    key : dotted key, empty when the whole file is meant.
    value : the value found, or ``MISSING``.
    problem : what is wrong, in a few words.
    allowed : what would be right; may be empty.
    """

    def __init__(self, file: str, key: str, value: object, problem: str, allowed: str = "") -> None:
        super().__init__(file, key, value, problem, allowed)
        self.file = file
        self.key = key
        self.value = value
        self.problem = problem
        self.allowed = allowed

    def __str__(self) -> str:
        where = f"{self.file}: " if self.file else ""
        sentence = _sentence(self.problem, self.allowed)
        if not self.key:
            return one_line(f"{where}{sentence}")
        if self.value is MISSING:
            return one_line(f"{where}{self.key}: {sentence}")
        return one_line(f"{where}{self.key} = {show_value(self.value)}: {sentence}")


def show_value(value: object) -> str:
    """Write a value as it would stand in the file, shortened to 60 characters."""
    try:
        text = _as_toml(value)
    except (ValueError, RecursionError):
        text = f"a {type(value).__name__} too large to print"
    return text if len(text) <= LONGEST_VALUE else text[: LONGEST_VALUE - 3] + "..."


def one_line(text: str) -> str:
    """Remove line breaks, control characters and lone surrogates, so that any screen shows it."""
    printable = "".join(c if c.isprintable() or "\ud800" <= c <= "\udfff" else " " for c in text)
    return printable.encode("utf-8", "backslashreplace").decode("utf-8")


def _sentence(problem: str, allowed: str) -> str:
    return f"{problem}; allowed {allowed}" if allowed else problem


def _as_toml(value: Any) -> str:
    if isinstance(value, Mapping) and not value:
        return "{}"
    if isinstance(value, Mapping):
        return "{ " + ", ".join(f"{k} = {_as_toml(v)}" for k, v in value.items()) + " }"
    if isinstance(value, (list, tuple)):
        return "[" + ", ".join(_as_toml(v) for v in value) + "]"
    if isinstance(value, (date, time)):
        return value.isoformat()
    if isinstance(value, float):
        return repr(value)
    if isinstance(value, (str, bool, int)):
        return json.dumps(value, ensure_ascii=False)
    return repr(value)
