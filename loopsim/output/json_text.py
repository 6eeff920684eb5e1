"""JSON with what JSON cannot say - infinite, not a number - as null."""

from __future__ import annotations

import json
import math
from typing import Any


def json_text(data: Any) -> str:
    """One document; numbers read back bit for bit, keys in the order given."""
    return json.dumps(_plain(data), indent=2, ensure_ascii=False, allow_nan=False)


def _plain(data: Any) -> Any:
    if isinstance(data, dict):
        return {key: _plain(value) for key, value in data.items()}
    if isinstance(data, list | tuple):
        return [_plain(value) for value in data]
    if isinstance(data, float):
        return data if math.isfinite(data) else None
    return data
