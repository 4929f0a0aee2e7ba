"""Balls as decimal strings: with a radius, for a sentence, and for a figure."""

from __future__ import annotations

from flint import acb, arb


def with_radius(x: arb, digits: int) -> tuple[str, str]:
    """(value, radius): x lies within radius of value, both plain decimals; about `digits` digits of value.

    >>> with_radius(arb(1) / 3, 5)    # doctest: +SKIP
    ('0.333333', '4e-7')
    """
    middle, radius, exponent = (int(n) for n in x.mid_rad_10exp(digits))
    length = len(str(abs(middle)))
    if length > digits + 1:
        drop = length - digits - 1
        unit = 10**drop
        rounded = (abs(middle) + unit // 2) // unit * (1 if middle >= 0 else -1)
        radius = -(-(radius + unit // 2 + 1) // unit) if radius else _lost(middle, rounded * unit, unit)
        middle, exponent = rounded, exponent + drop
    return _plain(middle, exponent), _short(radius, exponent)


def _lost(middle: int, rounded: int, unit: int) -> int:
    return 0 if middle == rounded else 1


def _plain(mantissa: int, exponent: int) -> str:
    """mantissa * 10^exponent: in full for common sizes, else with a power of ten."""
    if mantissa == 0:
        return "0"
    sign, digits = ("-" if mantissa < 0 else ""), str(abs(mantissa))
    point = len(digits) + exponent
    if -4 < point <= 12:
        return sign + _placed(digits, point)
    digits = digits.rstrip("0") or "0"
    tail = "." + digits[1:] if len(digits) > 1 else ""
    return f"{sign}{digits[0]}{tail}e{point - 1}"


def _placed(digits: str, point: int) -> str:
    if point <= 0:
        return ("0." + "0" * -point + digits).rstrip("0")
    if point >= len(digits):
        return digits + "0" * (point - len(digits))
    return (digits[:point] + "." + digits[point:]).rstrip("0").rstrip(".")


def _short(radius: int, exponent: int) -> str:
    """An upper bound of radius * 10^exponent with one digit."""
    if radius == 0:
        return "0"
    digits = str(radius)
    lead, power = int(digits[0]), exponent + len(digits) - 1
    if digits[1:].strip("0"):
        lead += 1
    if lead == 10:
        lead, power = 1, power + 1
    return f"{lead}e{power}"


def rounded(x: arb, digits: int = 6) -> str:
    """The midpoint to `digits` significant digits, for a figure; no promise about the last one."""
    return _plain(*_mantissa(x, digits))


def _mantissa(x: arb, digits: int) -> tuple[int, int]:
    middle, _, exponent = (int(n) for n in arb(x.mid()).mid_rad_10exp(digits + 10))
    drop = len(str(abs(middle))) - digits
    if drop <= 0:
        return middle, exponent
    unit = 10**drop
    return (abs(middle) + unit // 2) // unit * (1 if middle >= 0 else -1), exponent + drop


def spoken(x: acb, digits: int = 10) -> str:
    """A complex midpoint for a sentence: -0.0846560847, 0.5*i or 1 - 2*i."""
    real, imag = rounded(x.real, digits), rounded(x.imag, digits)
    if x.imag.contains(0):
        return real
    shown = "i" if imag == "1" else "-i" if imag == "-1" else f"{imag}*i"
    if x.real.contains(0):
        return shown
    return f"{real} - {shown[1:]}" if shown.startswith("-") else f"{real} + {shown}"
