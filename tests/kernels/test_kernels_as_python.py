"""The kernels as plain Python, with index checks, and for a generic processor, on tiny sizes: the same bits."""

from __future__ import annotations

import os
import subprocess
import sys
from pathlib import Path

import pytest

import projector

CODE = """
import numpy as np
from valuation_bonds import Terms, every, solver
from projector.balance.statement_kernels import statement_path
from projector.bonds.call_odds import call_odds
from projector.bonds.exercise.pricing import Problem, operator_for, solve
from projector.bonds.exercise.step_operator import GRID_HALF_YEAR, GRID_MONTHLY
from projector.rates.curve import CurveReading, log_discount_nodes, monthly_discounts
out = []
for step, offset, n, grid in ((6, 6, 5, GRID_HALF_YEAR), (6, 2, 4, GRID_HALF_YEAR), (1, 1, 6, GRID_MONTHLY)):
    for lanes in (1, 3):
        ratio = np.full((n + 1, lanes), 0.98)
        flow = np.full((n + 1, lanes), 2.5); flow[n] += 100.0
        price = np.full((n + 1, lanes), np.inf); price[1:n] = 100.0
        problem = Problem(np.full(lanes, n), ratio, ratio * 0.999, flow, price, price + 0.5)
        out += [v.hex() for values in solve(operator_for(0.03, 0.01, step, offset, n, grid), problem) for v in values]
reading = CurveReading((1, 3, 6, 12, 60, 120, 360), True, False)
nodes = log_discount_nodes(np.array([0.04, 0.041, 0.042, 0.043, 0.04, 0.039, 0.04])[None, :, None], reading)
out += [v.hex() for v in monthly_discounts(nodes[0], 14)[:, 0]]
price = np.full(13, np.inf); price[6] = 101.0
coupon, accrued = np.zeros(13), np.zeros(13); coupon[[6, 12]] = 2.5; accrued[:12] = 2.5 * (np.arange(12) % 6) / 6
book, accretion, growth, worst = np.zeros(13), np.zeros(13), np.ones(13), np.zeros(13, dtype=np.int64)
statement_path(12, 12, 100.0, price, accrued, coupon, coupon, 102.0, book, accretion, growth, worst)
out += [float(v).hex() for v in (*book, *accretion, *growth)]
s = solver(Terms(18, 6, 5.0, 6, every(6, 18, 6)), Terms(5, 1, 6.0, 3, every(1, 5, 1)), Terms(9, 3, 5.0, 3, {3: 100.0}))
curve = np.exp(-0.045 * np.arange(19) / 12.0)
odds = call_odds(s, np.arange(3), curve)
for figures in (odds.odds, odds.never, odds.called, odds.alive):
    out += [float(v).hex() for v in figures.ravel()]
print(" ".join(out))
"""


def figures(tmp_path: Path, **extra: str) -> str:
    """The figures as hexadecimal, from a process of its own with its own kernel folder."""
    home = Path(projector.__file__).resolve().parents[1]
    paths = os.pathsep.join([str(home), str(Path(__file__).resolve().parents[1])])
    environment = {**os.environ, "PYTHONPATH": paths, "NUMBA_CACHE_DIR": str(tmp_path), **extra}
    done = subprocess.run([sys.executable, "-c", CODE], env=environment, capture_output=True, text=True, check=True)
    return done.stdout


@pytest.mark.long
def test_order_kernels_as_python_and_with_index_checks_give_the_same_bits(tmp_path: Path) -> None:
    compiled = figures(tmp_path / "plain")
    assert figures(tmp_path / "python", NUMBA_DISABLE_JIT="1") == compiled
    assert figures(tmp_path / "checked", NUMBA_BOUNDSCHECK="1") == compiled
    assert figures(tmp_path / "generic", NUMBA_CPU_NAME="generic") == compiled
    assert len(compiled.split()) > 60
