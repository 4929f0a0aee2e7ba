"""A 7-site graph with complex bonds and a detector of rank two, order 4: every entry, through the whole worksheet.

Outside oracle: sympy's matrices over Gaussian rationals, the logarithm's series of Q U Q written out dense.
"""

from __future__ import annotations

import json
from pathlib import Path

import sympy as sp

from derive.pipeline import answer
from derive.report import write
from derive.worksheet import read

SHEET = """
title = "Seven sites, complex bonds, two modes watched"
[graph]
edges = [[0, 1, "1+i"], [1, 2, "-2"], [2, 3, "3*i"], [3, 4, "1-2*i"], [4, 5, "-1"], [5, 6, "2+i"], [6, 0, "i"],
         [1, 4, "1/2"], [2, 5, "-1-i"]]
energies = { 0 = 1, 2 = "-1/3", 5 = 2 }
[detector]
states = [{ 1 = "3/5", 4 = "4*i/5" }, { 1 = "4*i/5", 4 = "3/5" }]
[derive.generator]
order = 4
"""
UNIT, R = sp.I, sp.Rational
BONDS = [
    (0, 1, 1 + UNIT), (1, 2, -2), (2, 3, 3 * UNIT), (3, 4, 1 - 2 * UNIT), (4, 5, -1), (5, 6, 2 + UNIT), (6, 0, UNIT),
    (1, 4, R(1, 2)), (2, 5, -1 - UNIT),
]


def expanded(m: sp.Matrix) -> sp.Matrix:
    return m.applyfunc(sp.expand)


def hamiltonian() -> sp.Matrix:
    h = sp.zeros(7, 7)
    for x, y, v in BONDS:
        h[x, y], h[y, x] = v, sp.conjugate(v)
    h[0, 0], h[2, 2], h[5, 5] = 1, R(-1, 3), 2
    return h


def logarithm(h: sp.Matrix, q: sp.Matrix, n: int) -> list[sp.Matrix]:
    """L_1 ... L_n of log(1 + sum x^m q h^m q/m!)."""
    power, steps = sp.eye(7), {}
    for m in range(1, n + 1):
        power = expanded(power * h)
        steps[m] = expanded(q * power * q) / sp.factorial(m)
    total, product = dict(steps), dict(steps)
    for p in range(2, n + 1):
        product = {
            d: expanded(sum((steps[e] * product[d - e] for e in range(1, d - p + 2)), sp.zeros(7, 7)))
            for d in range(p, n + 1)
        }
        for d, term in product.items():
            total[d] += R((-1) ** (p + 1), p) * term
    return [total[d] for d in range(1, n + 1)]


def test_every_entry_is_exactly_right(tmp_path: Path) -> None:
    sheet = tmp_path / "seven.toml"
    sheet.write_text(SHEET, encoding="utf-8")
    entries = {e["id"]: e for e in json.loads(write(answer(read(sheet)))["ledger.json"])["entries"]}
    d = sp.zeros(7, 2)
    d[1, 0], d[4, 0], d[1, 1], d[4, 1] = R(3, 5), 4 * UNIT / 5, 4 * UNIT / 5, R(3, 5)
    logs = logarithm(hamiltonian(), sp.eye(7) - expanded(d * d.H), 5)
    for k, log in enumerate(logs):
        entry = entries[f"generator.{k}"]
        found = sp.zeros(7, 7)
        for x, y, f in entry["matrix"]:
            found[x, y] = sp.sympify(f.replace("^", "**").replace("i", "I"))
        assert expanded(found - (-UNIT) ** k * log) == sp.zeros(7, 7)
        assert entry["verdict"] == "proved" and entry["matrix"]
    assert entries["generator.truncated"]["verdict"] == "proved"
