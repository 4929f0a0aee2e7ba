"""Local densities of states as settings, read from a worksheet's own words."""

from __future__ import annotations

from pathlib import Path

from derive.problem.setting import Setting
from derive.worksheet.reader import survey_bytes

HEAD = """title = "a density"
symbols = {{ {symbols} }}
assume = [{assume}]
interval.length = "{length}"
detector.at = 0
start.at = "detector"
derive.asymptotics = {{}}
[graph]
family = "density"
"""
Point = tuple[str, str, str]
"""energy, power, side; with bands the amplitude follows."""


def density(
    points: list[Point],
    bands: list[tuple[str, str, str]] | None = None,
    amplitudes: list[str] | None = None,
    assume: str = "",
    symbols: str = 'g = "positive"',
    length: str = "tau",
) -> Setting:
    body = HEAD.format(symbols=symbols, assume=f'"{assume}"' if assume else "", length=length)
    for k, (energy, power, side) in enumerate(points):
        body += f'[[graph.singular]]\nenergy = "{energy}"\npower = "{power}"\nside = "{side}"\n'
        body += f'amplitude = "{amplitudes[k]}"\n' if amplitudes else ""
    for low, high, factor in bands or []:
        body += f'[[graph.band]]\nfrom = "{low}"\nto = "{high}"\nfactor = "{factor}"\n'
    found = survey_bytes(body.encode(), "w.toml", Path("."))
    assert not found.faults and not found.unserved, found.faults
    return found.taken().setting


def two_edges(low: str, high: str, factor: str, below: bool = True) -> Setting:
    """One band from -2 g to 2 g."""
    ends = [("-2*g", low, "above"), ("2*g", high, "below")]
    return density(ends, [("-2*g", "2*g", factor)], assume="2*g*tau < pi" if below else "")


def line_by_its_edges(length: str = "tau") -> Setting:
    """The line's density is 1/(pi sqrt(4 g^2 - E^2)): (E + 2g)^(-1/2)/(2 pi sqrt(g)) at its lower edge."""
    ends = [("-2*g", "-1/2", "above"), ("2*g", "-1/2", "below")]
    return density(ends, amplitudes=["1/(2*pi*sqrt(g))"] * 2, length=length)


SEMICIRCLE = ("1/2", "1/2", "1/(2*pi*g^2)")
"""The end of a half line."""
TUNED_END = ("1/2", "-1/2", "1/(2*pi*g)")
"""The end of a half line, its energy g above the others."""
LINE = ("-1/2", "-1/2", "1/pi")


def two_bands() -> Setting:
    """A row of pairs, E^2 between (g - h)^2 and (g + h)^2: edges a = |g - h| and b = g + h, written a and b."""
    ends = [("-b", "-1/2", "above"), ("-a", "-1/2", "below"), ("a", "-1/2", "above"), ("b", "-1/2", "below")]
    bands = [("-b", "-a", "-E/(pi*sqrt((a - E)*(b - E)))"), ("a", "b", "E/(pi*sqrt((a + E)*(b + E)))")]
    return density(ends, bands, assume="a < b", symbols='a = "positive", b = "positive"')
