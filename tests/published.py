"""Published values, with their sources in tests/data/published.json."""

import json
from functools import lru_cache
from pathlib import Path


@lru_cache
def _entries():
    text = (Path(__file__).parent / "data" / "published.json").read_text(encoding="utf-8")
    return {entry["id"]: entry["data"] for entry in json.loads(text)}


def published(name):
    """Return the data of one entry."""
    return _entries()[name]
