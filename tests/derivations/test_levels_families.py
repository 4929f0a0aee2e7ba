"""Levels with the size as a letter against explicit sizes (another derivation), and published rates."""

import pytest

from derive.derivations.levels.topic import derive_levels
from derive.errors import NotCovered
from derive.exact.zero import vanishes
from derive.formula.grammar import parse
from derive.formula.tree import number, replace
from derive.problem.setting import Wish
from derive.problem.sized import sized
from derive.record.said import Expansion
from tests.settings_of_graphs import family

ODD = family("chain", {"sites": "2*L + 1"}, "centre", {"L": 1, "j": 1}, distance="j")
END = family("chain", {"sites": "N"}, "end", {"N": 2})
STAR = family("star", {"arms": "m", "length": "L"}, 0, {"m": 1, "L": 1})
RING = family("ring", {"sites": "N"}, 0, {"N": 3})
FLUX = family("ring", {"sites": "N"}, 0, {"N": 3}, known=("g", "phi"), flux="phi")
DETUNED = family("chain", {"sites": "2*L + 1"}, "centre", {"L": 1}, known=("g", "Delta"), energies=[("L", "Delta")])


def claims_of(setting, order=3):
    return {c.id: c.value for c in derive_levels(setting, Wish("levels", (("order", order),))).claims}


@pytest.mark.parametrize("setting, sizes, bright", [
    (ODD, {"L": 3, "j": 2}, 3), (END, {"N": 6}, 5), (STAR, {"m": 5, "L": 2}, 2), (RING, {"N": 6}, 3),
    (RING, {"N": 5}, 2), (FLUX, {"N": 4}, 3), (FLUX, {"N": 5}, 4), (DETUNED, {"L": 2}, 2),
])
def test_at_a_size_it_is_the_explicit_graph(setting, sizes, bright):
    """Every coefficient of the formula in k and the size, at numbers, equals that of the explicit graph, exactly."""
    put = {name: number(n) for name, n in sizes.items()}
    general, special = claims_of(setting, 5), claims_of(sized(setting, put), 5)
    written = sorted(name for name in special if name.endswith(".rate") and isinstance(special[name], Expansion))
    assert len(written) == bright
    for k in range(1, bright + 1):
        for part in ("energy", "rate", "weight"):
            ours, theirs = general.get(f"levels.k.{part}"), special.get(f"levels.{k}.{part}")
            for a, b in zip(coefficients(ours), coefficients(theirs), strict=True):
                gap = replace(a, {**put, "k": number(k)}) - b
                assert vanishes(gap, setting.domains()) is True


def coefficients(value):
    if value is None:
        return []
    if isinstance(value, Expansion):
        parts = dict(zip(value.powers, value.terms, strict=True))
        return [parts.get(n, number(0)) for n in range(value.remainder)]
    return [value]


@pytest.mark.parametrize("setting, law", [
    (STAR, "2*m*g^2/(L+1)*sin(pi*k/(L+1))^2"),  # path states, textbook
    (ODD, "4*g^2/(L+1)*sin(pi*k/(L+1))^2"),
    (END, "2*g^2/N*sin(pi*k/N)^2"),
    (RING, "8*g^2/N*sin(pi*(2*k-1)/N)^2"),
    (FLUX, "4*g^2/N*sin(pi*k/N)^2*(1 - (-1)^k*cos(phi))"),
])
def test_leading_rates(setting, law):
    """Hand-made laws of the order tau, at every size from 3 to 8 and every k below it."""
    leading = claims_of(setting, 1)["levels.k.rate"].terms[0]
    for size in range(3, 9):
        put = {name: number(size) for name in ("L", "N", "m")}
        for k in range(1, size // 2 + 1):
            gap = replace(leading, {**put, "k": number(k)}) - replace(parse(law), {**put, "k": number(k)})
            assert vanishes(gap, setting.domains()) is True


def test_complete_graph_by_hand():
    """K_N: one bright level (N-2) t with rate (N-1) t^2 tau; N - 2 dark ones at -t (all-ones matrix, textbook)."""
    claims = claims_of(family("complete", {"sites": "N"}, 0, {"N": 3}))
    domains = RING.domains()
    assert vanishes(claims["levels.1.energy"].terms[0] - parse("-(N-2)*g"), domains) is True
    assert vanishes(claims["levels.1.rate"].terms[0] - parse("(N-1)*g^2"), domains) is True
    assert vanishes(claims["levels.dark.1.multiplicity"] - parse("N - 2"), domains) is True


@pytest.mark.parametrize("setting", [
    family("ring", {"sites": "N"}, 0, {"N": 3}, flux="pi"),
    family("tree", {"branching": "2", "depth": "d"}, 0, {"d": 2}),
    family("chain", {"sites": "N"}, "end", {"N": 5}, known=("Delta",), hopping="Delta"),
    family("chain", {"sites": "N"}, "end", {"N": 5}, energies=[(1, "g")]),
])
def test_what_is_not_served_is_one_sentence(setting):
    with pytest.raises(NotCovered) as said:
        derive_levels(setting, Wish("levels"))
    assert "\n" not in str(said.value) and len(str(said.value)) < 160


def test_a_whole_turn_of_flux_is_none():
    """exp(2 pi i) = 1: half of the levels are dark again."""
    whole, none = claims_of(family("ring", {"sites": "N"}, 0, {"N": 3}, flux="2*pi")), claims_of(RING)
    assert {k: v for k, v in whole.items() if k != "levels.secular"} == {
        k: v for k, v in none.items() if k != "levels.secular"}


def test_order_beyond_five_is_refused():
    with pytest.raises(NotCovered, match="to order 5"):
        derive_levels(ODD, Wish("levels", (("order", 6),)))
