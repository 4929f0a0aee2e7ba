"""A Hamiltonian or a unitary step written out as a matrix, and whether it is one."""

from __future__ import annotations

from typing import Any

from derive.exact.zero import vanishes
from derive.formula.text import text
from derive.formula.tree import Formula, negate, number, plus, times
from derive.problem.conjugate import conjugate
from derive.problem.graphs import matrix_graph, matrix_rows, step_graph
from derive.worksheet.bonds import AT, is_real
from derive.worksheet.places import Sites
from derive.worksheet.values import Reader, shown

LARGEST_MATRIX = 1_500  # rows of a matrix written out
LARGEST_STEP = 100  # rows of a unitary: checking it takes N^3 products


def _matrix(r: Reader, kind: str, value: Any, largest: int) -> list[list[Formula]] | None:
    path = (*AT, kind)
    if not isinstance(value, (list, tuple)):
        r.faults.add(
            path, f"{shown(value)} stands here, where {kind} is a list of rows.", 'Write [[0, "-g"], ["-g", 0]].'
        )
        return None
    size = len(value)
    if not size:
        r.faults.add(path, f"{kind} has no rows.", 'Write [[0, "-g"], ["-g", 0]].')
        return None
    if size > largest:
        r.faults.add(
            path, f"{kind} has {size:,} rows.", f"At most {largest:,} are read; write a larger graph by edges."
        )
        return None
    out, whole = [], True
    for x, row in enumerate(value):
        if not isinstance(row, (list, tuple)) or len(row) != size:
            has = f"has {len(row)} entries" if isinstance(row, (list, tuple)) else f"is {shown(row)}"
            r.faults.add(
                (*path, x),
                f"row {x} {has}, and {kind} has {size} row{'s' if size > 1 else ''}.",
                "A matrix is as wide as it is high.",
            )
            whole = False
            continue
        read = [r.formula((*path, x, y), v) for y, v in enumerate(row)]
        whole = whole and None not in read
        out.append([f for f in read if f is not None])
    return out if whole else None


def read_hamiltonian(r: Reader, value: Any) -> Sites:
    size = len(value) if isinstance(value, (list, tuple)) and value else None
    matrix = _matrix(r, "hamiltonian", value, LARGEST_MATRIX)
    if matrix is None:
        return Sites(size)
    _check_hermitian(r, matrix)
    return Sites(len(matrix), None, matrix_graph(matrix))


def _check_hermitian(r: Reader, matrix: list[list[Formula]]) -> None:
    known: dict[tuple[Formula, Formula], bool | None] = {}
    for x, row in enumerate(matrix):
        is_real(r, (*AT, "hamiltonian", x, x), row[x])
        for y in range(x):
            pair = (matrix[y][x], row[y])
            if pair not in known:
                wanted = conjugate(pair[0], r.domains)
                known[pair] = wanted == pair[1] or vanishes(plus(pair[1], negate(wanted)), r.domains)
            if not known[pair]:
                _not_hermitian(r, x, y, pair[0], known[pair])


def _not_hermitian(r: Reader, x: int, y: int, above: Formula, same: bool | None) -> None:
    path = (*AT, "hamiltonian", x, y)
    wanted = text(conjugate(above, r.domains))
    if same is None:
        message = f"it could not be decided whether H_{x}_{y} is the conjugate of H_{y}_{x}."
        r.faults.add(path, message, f'Write it as  "{wanted}".')
    else:
        message = (
            f"H is not Hermitian: this entry ({x}, {y}) is not the conjugate of entry ({y}, {x}), {shown(text(above))}."
        )
        r.faults.add(path, message, f'Write  "{wanted}"  here, or change the entry ({y}, {x}).')


def read_step(r: Reader, value: Any) -> Sites:
    size = len(value) if isinstance(value, (list, tuple)) and value else None
    matrix = _matrix(r, "step", value, LARGEST_STEP)
    if matrix is None:
        return Sites(size)
    _check_unitary(r, matrix)
    r.use("step", (*AT, "step"))
    return Sites(len(matrix), None, step_graph(matrix))


def _check_unitary(r: Reader, matrix: list[list[Formula]]) -> None:
    """sum_z U_xz conj(U_yz) = delta_xy."""
    rows = [dict(row) for row in matrix_rows(matrix)]
    for x in range(len(rows)):
        for y in range(x + 1):
            shared = sorted(rows[x].keys() & rows[y].keys())
            terms = [times(rows[x][z], conjugate(rows[y][z], r.domains)) for z in shared]
            off = plus(*terms, number(-1 if x == y else 0))
            same = vanishes(off, r.domains)
            if same is True:
                continue
            what = f"row {x} has length 1" if x == y else f"rows {y} and {x} are orthogonal"
            message = (
                f"it could not be decided whether {what}."
                if same is None
                else f"the step is not unitary: {_denied(what)}."
            )
            r.faults.add((*AT, "step", x), message, "The rows of a unitary have length 1 and are orthogonal.")


def _denied(what: str) -> str:
    return what.replace(" has length 1", " does not have length 1").replace(" are orthogonal", " are not orthogonal")
