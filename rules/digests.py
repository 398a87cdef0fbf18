"""One canonical form for every record, and the short hash of it that names contents everywhere."""

import dataclasses
import hashlib
import json
from collections.abc import Mapping
from datetime import date
from enum import StrEnum
from typing import Any

import numpy as np


def plain(value: Any) -> Any:
    """A record, however nested, as JSON types; the same value always gives the same result."""
    if dataclasses.is_dataclass(value) and not isinstance(value, type):
        return {f.name: plain(getattr(value, f.name)) for f in dataclasses.fields(value)}
    if isinstance(value, Mapping):
        return {str(k): plain(v) for k, v in value.items()}
    if isinstance(value, list | tuple):
        return [plain(v) for v in value]
    if isinstance(value, date):
        return value.isoformat()
    if isinstance(value, StrEnum):
        return value.value
    if isinstance(value, np.generic):
        return value.item()
    return value


def canonical(value: Any) -> str:
    """Canonical JSON: sorted keys, no spaces, text as it is."""
    return json.dumps(plain(value), sort_keys=True, separators=(",", ":"), ensure_ascii=False, allow_nan=False)


def digest(value: Any) -> str:
    """The first 128 bits of the SHA-256 of the canonical form, as 32 hexadecimal digits."""
    return hashlib.sha256(canonical(value).encode()).hexdigest()[:32]
