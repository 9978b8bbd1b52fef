"""What must agree before a run is continued, as a dictionary, its canonical text and its hash."""

import hashlib
import json
import math
from collections.abc import Mapping
from enum import Enum
from typing import Any

NOT_THERE = "(not there)"


def plain(value: Any) -> Any:
    """Reduce a value to what JSON can hold without loss; NaN ("not given") becomes None, infinities a word."""
    if isinstance(value, Mapping):
        return {str(key): plain(item) for key, item in value.items()}
    if isinstance(value, list | tuple):
        return [plain(item) for item in value]
    if isinstance(value, Enum):
        return plain(value.value)
    if isinstance(value, float) and not math.isfinite(value):
        return None if math.isnan(value) else str(value)
    if value is None or isinstance(value, str | bool | int | float):
        return value
    raise TypeError(f"{value!r} ({type(value).__name__}) cannot be part of a run's identity")


def canonical_text(identity: Mapping[str, Any]) -> str:
    """Write an identity so that equal ones have equal text: keys sorted, each double in its shortest form."""
    return json.dumps(plain(identity), sort_keys=True, separators=(",", ":"), ensure_ascii=True, allow_nan=False)


def digest(text: str) -> str:
    """Hash the canonical text (SHA-256, hexadecimal)."""
    return hashlib.sha256(text.encode()).hexdigest()


def flattened(value: Any, name: str = "") -> dict[str, Any]:
    """Turn nested dictionaries and lists into one level: ``scenario.planets.c.mass``."""
    if isinstance(value, dict) and value:
        items: Any = value.items()
    elif isinstance(value, list) and value:
        items = enumerate(value)
    else:
        return {name: value}
    flat: dict[str, Any] = {}
    for key, item in items:
        flat |= flattened(item, f"{name}.{key}" if name else str(key))
    return flat


def differing(then: Mapping[str, Any], now: Mapping[str, Any]) -> dict[str, tuple[Any, Any]]:
    """List the items that do not agree.

    Returns
    -------
    dict of str to (then, now)
        Sorted by item; what only one side has stands against ``(not there)``.
    """
    old, new = flattened(plain(then)), flattened(plain(now))
    pairs = {item: (old.get(item, NOT_THERE), new.get(item, NOT_THERE)) for item in sorted(old.keys() | new.keys())}
    # The type is compared too: True == 1 in Python, but not in a scenario.
    return {item: (a, b) for item, (a, b) in pairs.items() if a != b or type(a) is not type(b)}
