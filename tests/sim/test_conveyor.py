"""The conveyor against an exact queue of parcels: nothing lost, nothing smeared beyond its bound, in both
directions."""

from __future__ import annotations

from collections import deque

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from rigd_sim.physics.compiled import compiled
from rigd_sim.physics.conveyor import push

V = 0.25


@compiled
def pushed(cells, s, base, n, v, fill, amount, work):  # type: ignore[no-untyped-def]
    """``push`` for Python."""
    return push(cells, s, base, n, v, fill, amount, work)


class Conveyor:
    """One conveyor of ``n`` cells, one species, in a table that has foreign rows before and after."""

    def __init__(self, n: int) -> None:
        self.n, self.base = n, 3
        self.s, self.fill = self.base + (n + 1) // 2, 0.0
        self.cells = np.zeros((2 * (n + 1) + 6, 1))
        self.cells[: self.base] = self.cells[self.base + 2 * (n + 1) :] = -7.0
        self.work = np.zeros((8, n + 2))

    def push(self, amount: float, c: float) -> float:
        """Push a volume in at one end (negative: the other); amount of species that left."""
        self.work[0, 0], self.work[1, 0] = c, 0.0
        self.s, self.fill = pushed(self.cells, self.s, self.base, self.n, V, self.fill, amount, self.work)
        return float(self.work[1, 0])

    def profile(self) -> tuple[np.ndarray, np.ndarray]:
        """Volumes and concentrations of the slots."""
        volumes = np.full(self.n + 1, V)
        volumes[0], volumes[-1] = self.fill, V - self.fill
        return volumes, self.cells[self.s : self.s + self.n + 1, 0]

    def held(self) -> float:
        """Species inside."""
        volumes, c = self.profile()
        return float(volumes @ c)


class Queue:
    """Plug flow without any cells: parcels of exact volume."""

    def __init__(self, volume: float) -> None:
        self.parcels = deque([(volume, 0.0)])

    def push(self, amount: float, c: float) -> float:
        """As above."""
        ends = (
            (deque.appendleft, deque.pop, deque.append)
            if amount > 0
            else (deque.append, deque.popleft, deque.appendleft)
        )
        enter, leave, back = ends
        enter(self.parcels, (abs(amount), c))
        left, out = abs(amount), 0.0
        while left > 1e-15:
            size, inside = leave(self.parcels)
            take = min(size, left)
            out += take * inside
            left -= take
            if size > take:
                back(self.parcels, (size - take, inside))
        return out


MOVES = st.lists(
    st.tuples(st.floats(-3.0, 3.0).filter(lambda x: abs(x) > 1e-3), st.floats(0.0, 2.0)), min_size=1, max_size=60
)


@settings(max_examples=40, deadline=None)
@given(st.integers(1, 12), MOVES)
def test_amounts_and_places(n: int, moves: list[tuple[float, float]]) -> None:
    """Species are conserved to rounding over any reversal, no value leaves the range, foreign rows stay untouched,
    and what has left in all differs from plug flow by no more than one cell's content at each turn of the flow."""
    conveyor, queue = Conveyor(n), Queue(n * V)
    entered = left = exact = 0.0
    turns, direction = 1, 0.0
    for amount, c in moves:
        if amount * direction < 0.0:
            turns += 1
        direction = amount
        entered += abs(amount) * c
        left += conveyor.push(amount, c)
        exact += queue.push(amount, c)
        assert entered - left == pytest.approx(conveyor.held(), abs=1e-12 * max(entered, 1.0) + 1e-13)
        assert abs(left - exact) <= 2.0 * V * turns
    inside = conveyor.profile()[1]
    assert -1e-12 <= inside.min() <= inside.max() <= 2.0 + 1e-12
    foreign = np.concatenate([conveyor.cells[:3], conveyor.cells[3 + 2 * (n + 1) :]])
    assert (foreign == -7.0).all()


@pytest.mark.parametrize("step", [0.07, 0.25, 0.4, 1.3])
@pytest.mark.parametrize("n", [4, 40])
def test_a_front_is_smeared_by_less_than_its_bound(n: int, step: float) -> None:
    """Variance of the outlet of a step: at most v^2/4 of the one slot that is mixed, however many cells it has passed
    (the bound that sim/README.md states); reading it off in portions dV adds up to dV^2/4."""
    conveyor = Conveyor(n)
    conveyor.push(0.11, 0.0)  # the front does not begin at a cell's edge
    out, times = [], []
    passed = 0.0
    while passed < 2.0 * n * V:
        out.append(conveyor.push(step, 1.0) / step)
        passed += step
        times.append(passed - step / 2.0)
    density = np.diff([0.0, *out])
    at = np.array(times) - step / 2.0
    mean = float(density @ at)
    variance = float(density @ (at - mean) ** 2)
    assert density.min() > -1e-12
    assert mean == pytest.approx(n * V, abs=step / 2.0 + V / 2.0)
    assert variance <= V**2 / 4.0 + step**2 / 4.0 + 1e-12


def test_rows_do_not_run_out() -> None:
    """Ten thousand cells forward and as many backward through a short conveyor: the window comes back each time."""
    conveyor = Conveyor(3)
    for sign in (1.0, -1.0, 1.0):
        for _ in range(10_000):
            conveyor.push(sign * V, 1.0)
    assert conveyor.base <= conveyor.s <= conveyor.base + 4
    assert conveyor.held() == pytest.approx(3 * V, rel=1e-12)
