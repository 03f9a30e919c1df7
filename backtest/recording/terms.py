"""The terms a review is judged by, fixed before judging: battery, criteria, spans, cut-off. Their hash is kept."""

import hashlib
import json
from collections.abc import Mapping
from typing import Any

from backtest.recording.manifest import plain

NOT_COMPARED = ("as_of",)
"""Terms that change with every review."""


def hashed_terms(terms: Mapping[str, Any]) -> dict[str, object]:
    """Return the terms as the manifest keeps them: ``values`` (JSON-ready) and their ``sha256``."""
    values = plain(dict(terms))
    text = json.dumps(values, sort_keys=True, allow_nan=False)
    return {"values": values, "sha256": hashlib.sha256(text.encode()).hexdigest()}


def changed_terms(now: Mapping[str, Any], before: Mapping[str, Any]) -> list[str]:
    """Return what differs between the values of two reviews, the cut-off aside, as lines "key: before, now"."""
    keys = sorted((set(now) | set(before)) - set(NOT_COMPARED))
    changed = [key for key in keys if plain(now.get(key)) != plain(before.get(key))]
    return [f"{key}: {_text(before.get(key))} before, {_text(now.get(key))} now" for key in changed]


def _text(value: Any) -> str:
    if value is None:
        return "none"
    return value if isinstance(value, str) else json.dumps(plain(value), sort_keys=True, ensure_ascii=False)
