"""What is left, and what was taken, after many asks: powers of the undetected step in balls, shared between asks.

    K^n psi                                  the undetected state after n asks, for a fixed step
    (K†)^n X K^n                             the same seen from an observable X, averaged where intervals are random
    Z(n) = sum_(m<n) (K†)^m X K^m            what is taken within n asks, where X is what one click takes

A state is moved ask by ask where that is less work than squaring K, else through K, K^2, K^4, ...; observables go
through the doublings of `asks.py`, Z(a + b) = Z(a) + (K†)^a Z(b) K^a.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass, field

from flint import acb_mat

from derive.numerics.asks import Undetected


def enclose_states(K: acb_mat, psi: acb_mat, asks: Iterable[int]) -> dict[int, acb_mat]:
    """K^n psi (N x 1) for every n >= 0 of `asks`."""
    found: dict[int, acb_mat] = {}
    squares, now, state = [K], 0, psi
    for n in sorted(set(asks)):
        state, now = _moved(squares, n - now, state), n
        found[n] = state
    return found


def _moved(squares: list[acb_mat], steps: int, state: acb_mat) -> acb_mat:
    """K^steps state; `squares` grows where it is worth it."""
    size, new = int(state.nrows()), max(steps.bit_length() - len(squares), 0)
    if steps <= new * size + steps.bit_length():
        for _ in range(steps):
            state = squares[0] * state
        return state
    for _ in range(new):
        squares.append(squares[-1] * squares[-1])
    for bit, square in enumerate(squares):
        if steps >> bit & 1:
            state = square * state
    return state


@dataclass
class Doublings:
    """An undetected step repeated 1, 2, 4, ... times, each made once."""

    made: list[Undetected]
    taken: dict[str, list[acb_mat]] = field(default_factory=dict)

    def carried(self, x: acb_mat, n: int) -> acb_mat:
        """(K†)^n x K^n."""
        for step in self._powers(n):
            x = step.carried(x)
        return x

    def within(self, name: str, x: acb_mat, n: int) -> acb_mat:
        """sum_(m<n) (K†)^m x K^m; `name` is x's own, under which its partial sums are kept."""
        held = self.taken.setdefault(name, [x])
        self._grow(n)
        while len(held) < n.bit_length():
            held.append(held[-1] + self.made[len(held) - 1].carried(held[-1]))
        total = acb_mat(x.nrows(), x.ncols())
        for bit in range(n.bit_length()):
            if n >> bit & 1:
                total = held[bit] + self.made[bit].carried(total)
        return total

    def _powers(self, n: int) -> list[Undetected]:
        self._grow(n)
        return [self.made[bit] for bit in range(n.bit_length()) if n >> bit & 1]

    def _grow(self, n: int) -> None:
        while len(self.made) < n.bit_length():
            self.made.append(self.made[-1].doubled())
