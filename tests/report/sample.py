"""Reports made by hand: nine coupled cavities with the middle one read out, and one claim for each verdict."""

from __future__ import annotations

from fractions import Fraction

from derive.formula.grammar import parse
from derive.formula.tree import I_UNIT, ONE, TAU, Formula, call, letter, number, operator, order, plus, power, times
from derive.problem.quantities import Quantity
from derive.problem.setting import (
    POSITIVE,
    Domain,
    Finite,
    Letter,
    Own,
    Question,
    Setting,
    Shape,
    Start,
    Watcher,
    Wish,
)
from derive.record.said import (
    Claim,
    Curve,
    Derivation,
    Expansion,
    Finding,
    Judged,
    Kind,
    Line,
    Matrix,
    Number,
    Plot,
    Report,
    Step,
)

REAL = Domain("real", "real")
g, Delta = letter("g"), letter("Delta")


MINUS_G = times(number(-1), g)


def chain(sites: int, names: tuple[str, ...] | None = None, detuned: int | None = None) -> Finite:
    rows = []
    for x in range(sites):
        row = []
        for y in (x - 1, x, x + 1):
            if y == x and detuned == x:
                row.append((y, Delta))
            if y != x and 0 <= y < sites:
                row.append((y, MINUS_G))
        rows.append(tuple(row))
    return Finite(tuple(rows), Shape("chain", (("sites", str(sites)),)), names)


def setting(title: str = "Nine coupled cavities, the middle one read out", **changes) -> Setting:
    detector = Watcher((((4, ONE),),))
    base = {
        "title": title,
        "letters": (Letter("g", POSITIVE), Letter("Delta", REAL)),
        "space": chain(9, detuned=4),
        "detectors": (detector,),
        "start": Start(((ONE, ((2, ONE),)),)),
    }
    return Setting(**{**base, **changes})


def matrix(entries: dict[tuple[int, int], str], size: int = 9) -> Matrix:
    rows: dict[int, list] = {}
    for (x, y), source in sorted(entries.items()):
        rows.setdefault(x, []).append((y, parse(source)))
    return Matrix(size, (), tuple((x, tuple(row)) for x, row in rows.items()))


def free_part() -> Matrix:
    bonds = [(0, 1), (1, 2), (2, 3), (5, 6), (6, 7), (7, 8)]
    return matrix({p: "-g" for x, y in bonds for p in ((x, y), (y, x))})


G1 = {(x, y): "-i*g^2/2" for x in (3, 5) for y in (3, 5)}
G2 = {(x, y): "-Delta*g^2/6" for x in (3, 5) for y in (3, 5)} | {
    p: "-g^3/12" for x, y in ((2, 3), (2, 5), (3, 6), (5, 6)) for p in ((x, y), (y, x))
}


def generator_claims() -> tuple[Claim, ...]:
    quantity = "generator"
    parts = (free_part(), matrix(G1), matrix(G2))
    single = tuple(
        Claim(f"generator.{k}", "generator", Quantity(quantity, (("order", k),)), m) for k, m in enumerate(parts)
    )
    series = Expansion("tau", (0, 1, 2), parts, 3)
    truncated = Claim(
        "generator.truncated", "generator", Quantity(quantity), series, Kind("order", "up to O(tau^3)", 3)
    )
    A, B0, B1 = operator("A"), operator("B", 0), operator("B", 1)
    words = plus(
        times(number(Fraction(1, 12)), plus(times(A, B0), times(B0, A))), times(number(Fraction(-1, 6)), B1)
    )
    universal = Claim("generator.universal.2", "generator", None, words)
    return (*single, truncated, universal)


def steps() -> tuple[Step, ...]:
    A, V, Q, G = operator("A"), operator("V"), operator("Q"), call("G", TAU)
    Vd, C, H = operator("V", None, True), operator("C"), operator("H")
    m = letter("m")
    x = letter("x")
    logarithm = call("log", plus(ONE, Formula("sum", ("m", ONE, parse("infinity"), times(
        power(x, m), power(call("factorial", m), number(-1)), operator("H^m", "QQ"))))))
    return (
        Step(
            ("With ", Q, " the projector on everything but the detector, the step is split into blocks:"),
            (Line(A, times(Q, H, Q), ":="), Line(V, times(Q, H, operator("D")), ":="),
             Line(C, times(operator("D", None, True), H, operator("D")), ":=")),
            where=(A, " acts inside the unwatched part, ", V, " carries into the detector."),
        ),
        Step(
            ("The generator is the logarithm of the null-outcome step, with ", x, " for ",
             times(number(-1), I_UNIT, TAU), ":"),
            (Line(times(x, G), logarithm),),
        ),
        Step(("Nothing of order 0 but the free part is left:",), (Line(operator("G", 0), free_part()),),
             earns="generator.0"),
        Step(("At first order the detector drains its neighbours:",),
             (Line(operator("G", 1), times(number(Fraction(-1, 2)), I_UNIT, V, Vd)),
              Line(operator("G", 1), matrix(G1))), earns="generator.1"),
        Step(("At second order the energy of the detector shows:",), (Line(operator("G", 2), matrix(G2)),),
             earns="generator.2"),
        Step(("Together:",), (Line(G, plus(operator("G", 0), times(TAU, operator("G", 1)),
             times(power(TAU, number(2)), operator("G", 2)), order(power(TAU, number(3))))),),
             earns="generator.truncated"),
    )


def proved(claim: Claim) -> Judged:
    found = (Finding("proved", "exact"), Finding("agrees", "coefficient", digits=41, points=4))
    return Judged(claim, "proved", found)


def slope_plot() -> Plot:
    tau = tuple(f"0.{k}" for k in ("1", "05", "025", "0125"))
    error = ("2.1e-3", "2.6e-4", "3.3e-5", "4.1e-6")
    return Plot(
        "error", "Halving the interval makes the error eight times smaller.", "$\\tau$ / $1/g$", "state error",
        (Curve("order 2", "measured", tau, error), Curve("8x per halving", "derived", tau, error)), "log", "log",
    )


def demo(title: str = "Nine coupled cavities, the middle one read out", **changes) -> Report:
    """The usual case: everything proved."""
    here = setting(title, **changes)
    claims = generator_claims()
    derivation = Derivation("generator", claims, steps(), (("The full lattice was not simulated.",),))
    question = Question(here, (Wish("generator", (("order", 2),)),), name="nine-cavities")
    return Report(question, (derivation,), tuple(proved(c) for c in claims), (slope_plot(),), (), "0.1.0")


def every_verdict() -> Report:
    """One user's claim for each verdict, besides the demo."""
    base = demo()
    q = Quantity("generator", (("order", 1), ("entry", (3, 5))))
    judged = tuple(_claimed(v, q) for v in ("refuted", "undecided", "untested", "agrees", "proved"))
    owns = tuple(Own(j.claim.id.split(".")[1], "generator", formula=parse("-i*g^2/2")) for j in judged)
    question = Question(base.question.setting, base.question.wishes, owns, base.question.check, "verdicts")
    return Report(question, base.derivations, (*base.judged, *judged), base.plots, (), "0.1.0")


def _claimed(verdict: str, q: Quantity) -> Judged:
    source = "-2*i*g^2" if verdict == "refuted" else "-i*g^2/2"
    claim = Claim(f"claim.{verdict}-one", "generator", q, parse(source), source="yours", origin="claimed")
    digits = {"agrees": 41, "undecided": 3}.get(verdict)
    point = (("g", "1"), ("Delta", "1/3"), ("tau", "1/50")) if verdict == "refuted" else ()
    evidence = {"refuted": "too large by 4", "untested": "no point met the assumptions"}.get(verdict, "")
    roads = {"proved": ("exact", "coefficient"), "untested": ()}.get(verdict, ("coefficient",))
    found = tuple(
        Finding("agrees" if (verdict, r) == ("proved", "coefficient") else verdict, r, digits, 4, point, evidence)
        for r in roads
    )
    numbers = (
        (Number("-0.50000000000000000000000000000000000000000", "3e-41", (("g", "1"), ("tau", "1/50"))),)
        if verdict in ("agrees", "refuted") else ()
    )
    diagnosis = "The claim is 4 times the derived entry." if verdict == "refuted" else ""
    return Judged(claim, verdict, found, numbers, diagnosis)
