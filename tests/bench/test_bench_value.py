"""Spreads, effective and key-rate durations of 10,000 callable securities, and the whole of `projector value`.

Seconds of CPU in fresh processes, kernels from the cache, the least of three. Prints figures, asserts no times.

Run: python -m pytest tests/bench/test_bench_value.py -m bench -s
"""

from __future__ import annotations

import importlib.util
import json
import subprocess
import sys
from pathlib import Path

import pytest

pytestmark = pytest.mark.bench

RUNS = 3
HERE = Path(__file__).parent

FIGURES = """
import json, resource, sys
from pathlib import Path
import numpy as np
def cpu():
    r = resource.getrusage(resource.RUSAGE_SELF)
    return r.ru_utime + r.ru_stime
from projector.bonds.call_odds import call_odds
from projector.bonds.mapped import map_bonds
from projector.bonds.refunding import refunding_yields
from projector.bonds.sensitivities import KEY_SHIFT, SHIFT, rate_sensitivity
from projector.rates.key_rates import key_rate_shifts, shifted_discounts, written_out
from projector.rates.paths import build_paths
from projector.run.prepare import spreads_and_prices
from projector.run.runner import stage
from projector.run.value_table import value_staged
from projector.study.reading import read_study
folder, out = Path(sys.argv[1]), {}
def stage_of(name, work):
    start = cpu()
    value = work()
    out[name] = cpu() - start
    return value
study, _ = read_study(folder)
paths = build_paths(study)
bonds = map_bonds(study.tables.securities, study.tables.call_rights, study.valuation_date)
stage_of("spreads", lambda: spreads_and_prices(study, paths, bonds))
prepared = stage(folder).prepared
solver, units = prepared.solver, np.arange(len(bonds.ids))
yields, dense = written_out(prepared.paths.yields[0, :, 0], prepared.paths.reading)
def sensitivities():
    shifts = key_rate_shifts(dense.tenor_months, SHIFT, KEY_SHIFT)
    return rate_sensitivity(solver, units, shifted_discounts(yields, dense, shifts, bonds.last_month + 6))
found = stage_of("effective and 12 key-rate durations", sensitivities)
out["the two together"] = sum(out.values())
start = shifted_discounts(yields, dense, np.zeros((1, 1)), bonds.last_month + 6)[:, 0]
stage_of("critical refunding yields", lambda: refunding_yields(solver, units, yields, dense))
stage_of("call odds by month", lambda: call_odds(solver, units, start))
staged = stage_of("read, check, prepare", lambda: stage(folder))
stage_of("all tables of value", lambda: value_staged(staged))
out["securities with a right"] = int(bonds.with_rights().sum())
out["of them monthly"] = int((bonds.with_rights() & (bonds.step == 1)).sum())
out["key rates less duration, years"] = float(np.abs(found.key_rate.sum(axis=1) - found.duration).max())
out["peak MB"] = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024
print(json.dumps(out))
"""


@pytest.mark.parametrize(("title", "monthly"), [("half-year rights", 0.0), ("15 % monthly rights", 0.15)])
def test_bench_ten_thousand_callable_securities(title: str, monthly: float, tmp_path: Path) -> None:
    spec = importlib.util.spec_from_file_location("synthetic_portfolio", HERE / "synthetic_portfolio.py")
    assert spec is not None
    assert spec.loader is not None
    portfolio = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(portfolio)
    folder = portfolio.write_study(tmp_path / "study", 10_400, 10_400, monthly=monthly)  # 4 % mature too soon
    runs = []
    for _ in range(RUNS):
        done = subprocess.run([sys.executable, "-c", FIGURES, str(folder)], capture_output=True, text=True, check=True)
        runs.append(json.loads(done.stdout.strip().splitlines()[-1]))
    least = {name: min(run[name] for run in runs) for name in runs[0]}
    print(f"\n10,400 callable securities, {title}: CPU s, least of {RUNS}")
    for name, value in least.items():
        print(f"  {name:<36} {value:10.3f}")
    assert least["securities with a right"] > 9_900
