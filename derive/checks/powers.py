"""Powers of n as combinations of rising ones: n^p from binomial(n+i-1, i), by Stirling's numbers of the second kind."""

from __future__ import annotations


def stirling(p: int) -> list[int]:
    """c_0 ... c_p with n^p = sum_i c_i binomial(n+i-1, i): n^p = sum_i (-1)^(p-i) S(p, i) n (n+1) ... (n+i-1)."""
    row = [1]
    for q in range(1, p + 1):
        row = [(i * row[i] if i < q else 0) + (row[i - 1] if i else 0) for i in range(q + 1)]
    out, factorial = [], 1
    for i, s in enumerate(row):
        factorial *= i or 1
        out.append((-1) ** (p - i) * s * factorial)
    return out
