"""What Python hands over, as the values a worksheet would have: sympy, numpy and networkx objects, Fractions.

Nothing is imported here: an object is recognised by where its class comes from.  What cannot be taken exactly (a
float, a directed graph) is passed on as it is and refused with its place, or raises `BadInput` where no place is.
"""

from __future__ import annotations

from collections.abc import Mapping
from fractions import Fraction
from typing import Any

from derive.errors import BadInput, Fault
from derive.formula.tree import (
    I_UNIT,
    PI,
    Formula,
    call,
    constant,
    free_letters,
    letter,
    number,
    plus,
    power,
    times,
)
from derive.problem.conjugate import surely_real
from derive.problem.setting import Domain
from derive.worksheet.values import Decimal

_SAME_NAME = ("sin", "cos", "tan", "cot", "sinh", "cosh", "tanh", "coth", "exp", "floor", "asin", "acos", "atan")
_OTHER_NAME = {
    "Abs": "abs",
    "re": "Re",
    "im": "Im",
    "conjugate": "conj",
    "gamma": "Gamma",
    "factorial": "factorial",
    "binomial": "binomial",
    "besselj": "bessel_J",
    "besseli": "bessel_I",
    "elliptic_k": "elliptic_K",
    "log": "log",
}
_CONSTANTS = {
    "ImaginaryUnit": I_UNIT,
    "Pi": PI,
    "Exp1": call("exp", number(1)),
    "EulerGamma": constant("euler_gamma"),
    "Infinity": constant("infinity"),
}


def taken(value: Any) -> Any:
    """`value` with everything inside it turned into what a worksheet may hold."""
    if isinstance(value, Fraction):
        return number(value)
    source = type(value).__module__.split(".")[0]
    if source == "sympy":
        return _sympy(value)
    if source == "numpy":
        return _numpy(value)
    if source == "networkx":
        return graph_edges(value)
    if isinstance(value, Mapping):
        return {_key(k): taken(v) for k, v in value.items()}
    if isinstance(value, (list, tuple)):
        return [taken(v) for v in value]
    return value


def _key(key: Any) -> str:
    """Keys are text in a worksheet; a site's number, a symbol or a pair of coordinates will do."""
    if isinstance(key, tuple):
        return ",".join(str(k) for k in key)
    return str(key)


# numpy ------------------------------------------------------------------------------------------------------


def _numpy(value: Any) -> Any:
    """Arrays as lists, numbers as Python has them; floats stay floats and are refused where they stand."""
    kept = value.tolist() if hasattr(value, "tolist") else value
    return [taken(v) for v in kept] if isinstance(kept, list) else taken(kept) if kept is not value else kept


# networkx ---------------------------------------------------------------------------------------------------


def graph_edges(graph: Any) -> list[list[Any]]:
    """The edges of an undirected graph, sorted, with the attribute `hopping` (H_xy) where an edge has one.

    Nodes 0 to N-1 are the sites; other nodes become names, numbered by first appearance in the sorted edges, so
    that nothing depends on the order in which the graph was built.
    """
    if graph.is_directed() or graph.is_multigraph():
        raise _refused("this networkx graph is directed or has parallel edges.", "Give an undirected simple graph.")
    lonely = [n for n in graph.nodes if not any(m != n for m in graph.adj[n])]
    if lonely:
        raise _refused(f"the node {lonely[0]!r} has no edge.", "Leave it out, or give the whole matrix as hamiltonian.")
    numbered = all(isinstance(n, int) and not isinstance(n, bool) for n in graph.nodes)
    edges = []
    for x, y, data in graph.edges(data=True):
        pair = sorted((x, y)) if numbered else sorted((_key(x), _key(y)))
        edges.append([*pair, *_edge_value(x, y, data)])
    return sorted(edges, key=lambda e: (e[0], e[1]))


def _edge_value(x: Any, y: Any, data: Mapping[str, Any]) -> list[Any]:
    if "hopping" in data:
        value = taken(data["hopping"])
        if isinstance(value, str):
            from derive.formula.grammar import parse

            value = parse(value)
        if isinstance(value, Formula) and not _real(value):
            raise _refused(
                f"the hopping on {x!r}, {y!r} may be complex, and an edge here has no direction.",
                "Write complex elements in bonds = [[x, y, H_xy]].",
            )
        return [value]
    if data.get("weight", 1) != 1:
        raise _refused(
            f"the edge {x!r}, {y!r} has a weight.", "Name the attribute hopping: the matrix element H_xy on that edge."
        )
    return []


def _real(f: Formula) -> bool:
    return surely_real(f, {name: Domain("positive", "positive") for name in free_letters(f)})


# sympy ------------------------------------------------------------------------------------------------------


def _sympy(value: Any) -> Any:
    """A matrix as a list of rows, an expression as a formula; floats as decimals, to be refused."""
    if hasattr(value, "tolist") and getattr(value, "is_Matrix", False):
        return [[taken(v) for v in row] for row in value.tolist()]
    for inner in value.atoms() if hasattr(value, "atoms") else ():
        if getattr(inner, "is_Float", False):
            return Decimal(str(inner))
    return formula_from_sympy(value)


def formula_from_sympy(e: Any) -> Formula:
    """The formula that a sympy expression says; `BadInput` for what has no counterpart here."""
    if getattr(e, "is_Rational", False):
        return number(Fraction(int(e.p), int(e.q)))
    if getattr(e, "is_Symbol", False):
        return letter(str(e.name))
    kind = type(e).__name__
    if kind in _CONSTANTS:
        return _CONSTANTS[kind]
    if kind == "Add":
        return plus(*(formula_from_sympy(a) for a in e.as_ordered_terms()))
    if kind == "Mul":
        return times(*(formula_from_sympy(a) for a in e.as_ordered_factors()))
    if kind == "Pow":
        return _sympy_power(e)
    if kind in ("Sum", "Integral") and len(e.args) == 2 and len(e.args[1]) == 3:
        name, low, high = e.args[1]
        ends = (formula_from_sympy(low), formula_from_sympy(high))
        return Formula("sum" if kind == "Sum" else "integral", (str(name), *ends, formula_from_sympy(e.args[0])))
    if kind in _SAME_NAME or (kind in _OTHER_NAME and not (kind == "log" and len(e.args) != 1)):
        return call(_OTHER_NAME.get(kind, kind), *(formula_from_sympy(a) for a in e.args))
    raise _refused(f"the sympy expression {str(e)[:60]} has no counterpart here.", "Write it as text.")


def _sympy_power(e: Any) -> Formula:
    base, exponent = formula_from_sympy(e.args[0]), formula_from_sympy(e.args[1])
    if exponent == number(Fraction(1, 2)):
        return call("sqrt", base)
    return power(base, exponent)


def _refused(message: str, mend: str) -> BadInput:
    return BadInput([Fault(message, mend)])
