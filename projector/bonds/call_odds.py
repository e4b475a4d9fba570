"""Model call probabilities at the valuation date: a pricing measure, not a forecast.

They are the chances, under the measure that prices today's curve, that an issuer who decides as the model says calls
in a given month. They hold the risk-neutral drift of rates and no view, and real issuers are often later.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from projector.arithmetic.elementary import exp_array
from projector.bonds.call_odds_kernels import odds_of_units
from projector.bonds.exercise.pricing import operator_for
from projector.bonds.exercise.step_operator import Grid, Operator
from projector.bonds.solving import MonthSolver

Array = npt.NDArray[np.float64]
IntArray = npt.NDArray[np.int64]

GRID_ODDS = Grid(0.5, 5.0, 6.0)  # the fine grid on a wider range: both measures must fit on its nodes


@dataclass(frozen=True)
class CallOdds:
    """Seen from month 0; shapes (unit, month 0..last).

    odds    chance of being called in the month, pricing measure [-]
    never   chance of reaching maturity [-], shape (unit,); with the odds it makes one; nan: no odds (`plain_calls`)
    called  weight of a payment made at a call of the month: chance under the measure of that month's discount [-]
    alive   weight of the month's promised payment, the same [-]
    """

    odds: Array
    never: Array
    called: Array
    alive: Array


def cash_transition(op: Operator) -> tuple[IntArray, Array]:
    """Band start and weights of one step under the measure of rolled-over cash: no drift, no discounting. [-]

    Source: Hull and White 1990, the state r - phi reverting to zero (cited from memory).
    """
    nodes = op.first_row + np.arange(op.band_start.size)
    centre = op.model.g(op.step)
    m = (1.0 - op.model.a * centre) * nodes  # e^(-a step) = 1 - a G(step)
    start = np.rint(m).astype(np.int64) - op.half_band
    z = (
        (start[:, None] + np.arange(2 * op.half_band + 1)[None, :] - m[:, None])
        * op.h
        / op.model.variance(op.step) ** 0.5
    )
    w = exp_array(-0.5 * z * z)
    return start, w / w.sum(axis=1)[:, None]


def plain_calls(solver: MonthSolver) -> npt.NDArray[np.bool_]:
    """Securities whose rights are calls without notice on par that stays: the others have no odds. shape (security,)"""
    bonds = solver.bonds
    months = np.arange(bonds.last_month + 1)[None, :]
    whole = ((bonds.outstanding == 1.0) | (months >= bonds.maturity[:, None])).all(axis=1)
    return np.asarray((bonds.call_lag == 0) & ~bonds.puttable & ~bonds.may_double & whole)


def call_odds(solver: MonthSolver, units: IntArray, discount: Array) -> CallOdds:
    """Odds and weights of every security on the starting curve.

    discount  P(tau) of month 0, shape (tau,)
    """
    bonds = solver.bonds
    shape = (units.size, bonds.last_month + 1)
    out = CallOdds(np.zeros(shape), np.ones(units.size), np.zeros(shape), np.zeros(shape))
    live = bonds.with_rights()[units] & plain_calls(solver)[units]
    out.never[bonds.with_rights()[units] & ~live] = np.nan
    months = np.arange(shape[1])
    out.alive[~live] = months[None, :] <= bonds.maturity[units[~live], None]
    if solver.model.normal_volatility == 0.0:
        for n in np.flatnonzero(live):
            certain_odds(solver, int(units[n]), int(n), discount, out)
        return out
    step = bonds.step[units]
    offset = (bonds.maturity[units] - 1) % step + 1
    for s, o in sorted({(int(a), int(b)) for a, b in zip(step[live], offset[live])}):
        rows = np.flatnonzero(live & (step == s) & (offset == o))
        one_grid(solver, units, rows, s, o, discount, out)
    return out


def one_grid(
    solver: MonthSolver, units: IntArray, rows: IntArray, step: int, offset: int, discount: Array, out: CallOdds
) -> None:
    """Fills the rows of securities that share a grid step and the months to its first date."""
    bonds, model, mine = solver.bonds, solver.model, units[rows]
    steps = int((bonds.maturity[mine].max() - offset) // step + 1)
    op = operator_for(model.mean_reversion, model.normal_volatility, step, offset, steps, GRID_ODDS)
    times = np.array([0.0] + [op.offset + k * op.step for k in range(op.lo.size - 1)])
    cash_start, cash_weights = cash_transition(op)
    shape = (rows.size, out.odds.shape[1])
    odds, never, called, alive = np.zeros(shape), np.ones(rows.size), np.zeros(shape), np.zeros(shape)
    odds_of_units(
        op.half_band, op.lo, op.hi, op.conv, op.first_row, op.band_start, op.weights, op.growth, op.straight_conv,
        cash_start, cash_weights, op.h, 1.0 - op.model.a * op.model.g(op.step),
        np.array([op.model.variance(t) for t in times]), np.array([op.model.mean(t) for t in times]),
        np.array([op.model.g(k * op.step) for k in range(op.lo.size)]), offset, step, mine, bonds.maturity, bonds.flow,
        bonds.dirty_price, model.cost, solver.spreads.refunding[mine, 0], np.ascontiguousarray(discount), odds, never,
        called, alive,
    )  # fmt: skip
    out.odds[rows], out.never[rows], out.called[rows], out.alive[rows] = odds, never, called, alive


def certain_odds(solver: MonthSolver, unit: int, row: int, discount: Array, out: CallOdds) -> None:
    """Without volatility: the issuer takes the cheapest date on the forward curve, the later of equals."""
    bonds = solver.bonds
    tau = np.arange(1, int(bonds.maturity[unit]) + 1)
    d = discount[tau] * exp_array(-solver.spreads.refunding[unit, 0] * tau / 12.0)
    paid = np.cumsum(bonds.flow[unit, tau] * d)
    stop = paid + (bonds.dirty_price[unit, tau] + solver.model.cost) * d
    stop[-1] = paid[-1]
    k = int(tau[stop.size - 1 - int(np.argmin(stop[::-1]))])
    out.alive[row, : k + 1] = 1.0
    if k < bonds.maturity[unit]:
        out.odds[row, k], out.never[row], out.called[row, k] = 1.0, 0.0, 1.0


def value_from_weights(odds: CallOdds, flow: Array, price: Array, discount: Array) -> Array:
    """What the weights make of payments and call prices. [per 100], shape (unit,)

    flow, price  [unit, month] promised payments, and what a call of the month pays (any number where there is none)
    discount     [unit, month] on the curve of the one who asks

    With dirty call prices and the holder's discounts it is the holder's value, with the bars and the issuer's discounts
    the issuer's cost: the check that the odds belong to the prices.
    """
    paid = np.where(odds.called > 0.0, price, 0.0) * odds.called
    return np.asarray(((flow * odds.alive + paid) * discount).sum(axis=1), dtype=np.float64)
