"""Works cited: title, journal, volume, article or page, year.  No names of authors."""

from __future__ import annotations

from functools import lru_cache
from importlib import resources
from typing import Any


@lru_cache(maxsize=1)
def works() -> dict[str, dict[str, Any]]:
    """The bibliography by key."""
    import tomllib

    return tomllib.loads(resources.files("derive").joinpath("references.toml").read_text("utf-8"))


def reference(key: str) -> str:
    """One line for a bibliography; a key that is not in it is printed as it stands."""
    work = works().get(key)
    if work is None:
        return key
    title = f"“{work['title']}”, " if "title" in work else ""
    return f"{title}{work['journal']} {work['volume']}, {work['article']} ({work['year']})."
