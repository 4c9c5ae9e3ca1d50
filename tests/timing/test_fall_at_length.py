"""The long run of the comparison with an ODE solver."""

from __future__ import annotations

import numpy as np
import pytest
from test_fall import by_solver, column, lowering

from stackmill.timing.fall import fall


@pytest.mark.slow
@pytest.mark.independent
def test_five_hundred_random_stacks_and_recipes_against_solve_ivp():
    random = np.random.default_rng(11)
    for _ in range(500):
        n, steps = random.integers(1, 12), random.integers(1, 5)
        materials = random.integers(0, 5, n).tolist()
        thickness = random.lognormal(4.5, 1.2, n).tolist()
        plan = [(random.lognormal(-0.5, 0.8, 5).tolist(), float(random.lognormal(6.0, 1.0))) for _ in range(steps)]
        ours = fall([[column(materials, thickness)]], [lowering(r, t) for r, t in plan])
        times = np.array([ours.reach(0, 0, k + 1)[0] for k in range(n)])
        judge = by_solver(materials, thickness, plan)
        assert (np.isfinite(times) == np.isfinite(judge)).all()
        met = np.isfinite(times)
        np.testing.assert_allclose(times[met], judge[met], rtol=1e-9)
