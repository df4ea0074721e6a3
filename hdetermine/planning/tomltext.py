"""TOML content as text: what a run sheet needs, in a fixed order of its own keys."""

from __future__ import annotations

import datetime
import json
import math
import re
from collections.abc import Mapping
from typing import Any

_BARE = re.compile(r"[A-Za-z0-9_-]+")


def toml_text(content: Mapping[str, Any]) -> str:
    """Write TOML.

    Tables with a key ``value`` (quantities), tables inside lists of values and tables inside
    those stand on one line; other tables get a header, lists of tables a double one.

    Parameters
    ----------
    content : mapping
        Text, numbers, truth values, dates, lists and mappings.

    Returns
    -------
    str
        Ends with a line break.
    """
    return "\n".join(_table(content, ())).strip() + "\n"


def _table(table: Mapping[str, Any], path: tuple[str, ...]) -> list[str]:
    plain, inner = [], []
    for key, value in table.items():
        if _is_own_table(value):
            inner.append((key, value))
        else:
            plain.append(f"{_key(key)} = {_value(value)}")
    lines = list(plain)
    for key, value in inner:
        name = (*path, key)
        header = ".".join(_key(part) for part in name)
        for item in value if isinstance(value, list | tuple) else [value]:
            bracketed = f"[[{header}]]" if isinstance(value, list | tuple) else f"[{header}]"
            body = _table(item, name)
            # A table of nothing but tables needs no header of its own.
            if isinstance(value, list | tuple) or not body or body[0]:
                lines += ["", bracketed]
            lines += body
    return lines


def _is_own_table(value: object) -> bool:
    if isinstance(value, Mapping):
        return "value" not in value
    if isinstance(value, list | tuple):
        return bool(value) and all(isinstance(item, Mapping) for item in value)
    return False


def _key(key: str) -> str:
    return key if _BARE.fullmatch(key) else _text(key)


def _text(text: str) -> str:
    # JSON's escapes are TOML's too, but TOML forbids DEL unescaped.
    return json.dumps(text, ensure_ascii=False).replace("\x7f", "\\u007f")


def _value(value: object) -> str:
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, int):
        return str(value)
    if isinstance(value, float):
        if math.isnan(value):
            return "nan"
        return repr(value) if math.isfinite(value) else ("inf" if value > 0 else "-inf")
    if isinstance(value, datetime.date | datetime.time):
        return value.isoformat()
    if isinstance(value, Mapping):
        pairs = ", ".join(f"{_key(key)} = {_value(item)}" for key, item in value.items())
        return f"{{ {pairs} }}" if pairs else "{}"
    if isinstance(value, list | tuple):
        return "[" + ", ".join(_value(item) for item in value) + "]"
    return _text(str(value))
