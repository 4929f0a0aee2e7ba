"""How large a formula would become if it were multiplied out: an estimate that builds nothing.

Exact fields multiply out.  `(g + d + x + y)^300` has ten characters and four million terms; it is refused where it
stands instead of filling the memory later.
"""

from __future__ import annotations

from math import comb, log2

from derive.formula.tree import Formula

MOST_TERMS = 200_000
MOST_BITS = 400_000_000  # of all coefficients together

_FAR = 1e18


def too_large(f: Formula) -> str | None:
    """Why f is too large to be multiplied out, in a few words; None where it is not."""
    terms, bits = _size(f)
    if terms > MOST_TERMS:
        return f"multiplied out, this formula has {_said(terms)} terms"
    if terms * bits > MOST_BITS:
        return f"multiplied out, this formula has numbers of {_said(bits / 3.32)} digits"
    return None


def _said(n: float) -> str:
    return f"about {n:,.0f}" if n < 1e12 else "more than a million million"


def _size(f: Formula) -> tuple[float, float]:
    """(terms, bits of the largest coefficient), both from above."""
    if f.head == "number":
        q = f.args[0]
        return 1.0, float(max(abs(q.numerator), q.denominator).bit_length())
    if f.head in ("plus", "times"):
        parts = [_size(a) for a in f.args]
        if f.head == "plus":
            return _capped(sum(t for t, _ in parts)), max(b for _, b in parts) + log2(len(parts))
        terms, bits = 1.0, 0.0
        for t, b in parts:
            terms, bits = _capped(terms * t), bits + b + log2(max(t, 1))
        return terms, bits
    if f.head == "power":
        return _power_size(f)
    inner = [_size(a) for a in f.args if isinstance(a, Formula)]
    worst = max(inner, default=(1.0, 1.0), key=lambda s: s[0] * s[1])
    return worst if worst[0] * worst[1] > MOST_BITS or worst[0] > MOST_TERMS else (1.0, 1.0)


def _power_size(f: Formula) -> tuple[float, float]:
    base, exponent = f.args
    terms, bits = _size(base)
    if exponent.head != "number":
        other, more = _size(exponent)
        return max(terms, other), max(bits, more)
    n = abs(int(exponent.args[0])) or 1
    grown = (bits + log2(terms) + 1) * n if terms > 1 or base.head == "number" else 1.0
    return (float(comb(int(terms) + n - 1, n)) if _fits(terms, n) else _FAR) if terms > 1 else 1.0, grown


def _fits(terms: float, n: int) -> bool:
    """Whether comb(terms + n - 1, n) is worth computing: its smaller argument is small or its value is."""
    return min(terms - 1, n) * log2(terms + n) < 50


def _capped(n: float) -> float:
    return min(n, _FAR)
