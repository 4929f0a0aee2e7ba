"""The page's style sheet and font, package data read when a page is written."""

from __future__ import annotations

import base64
from functools import lru_cache
from importlib import resources


@lru_cache(maxsize=1)
def css() -> str:
    return resources.files("derive.report").joinpath("style.css").read_text("utf-8")


@lru_cache(maxsize=1)
def font_face() -> str:
    """The embedded font: a subset of STIX Two Math (see math-OFL.txt)."""
    data = resources.files("derive.report").joinpath("math.woff2").read_bytes()
    source = f'url("data:font/woff2;base64,{base64.b64encode(data).decode("ascii")}") format("woff2")'
    return f'@font-face {{ font-family: "watchpot math"; font-display: block; src: {source}; }}\n'
