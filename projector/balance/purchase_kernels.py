"""Purchased bullets by cohort: coupons by month of the half-year, redemptions, values on the path's curve (C8).

principal  [class, month bought, segment, path] as bought, cut by later sales; defaults by the survival of its age
running    [class, month of half-year, segment, path] half-year coupon amount of what is alive
par        [class, segment, path] par alive
coupon     [class, month bought, path] coupon rate [1/year]
"""

from __future__ import annotations

from projector.arithmetic.elementary import exp_one
from projector.arithmetic.kernels import Flags, Floats, Integers, kernel


@kernel
def cohort_month(
    m: int, term: Integers, survival: Floats, age_survival: Floats, principal: Floats, running: Floats, par: Floats,
    coupon: Floats, paid: Floats, matured: Floats, lost: Floats, lost_accrued: Floats,
) -> None:  # fmt: skip
    """Month m of every class: default on opening par, then coupons and redemptions; results [class, segment, path].

    survival [class] monthly, age_survival [class, age in months]
    """
    r = m % 6
    for c in range(term.shape[0]):
        bought = m - term[c]
        for s in range(par.shape[1]):
            for p in range(par.shape[2]):
                opening = par[c, s, p]
                kept = opening * survival[c]
                lost[c, s, p] = opening - kept
                gone = 0.0
                for q in range(6):
                    # accrued at the opening: half-year coupon x months since it last paid over six
                    age = (m - 1 - q) % 6
                    gone += running[c, q, s, p] * (1.0 - survival[c]) * age / 6.0
                    running[c, q, s, p] = running[c, q, s, p] * survival[c]
                lost_accrued[c, s, p] = gone
                paid[c, s, p] = running[c, r, s, p]
                due = 0.0
                if bought >= 1:
                    due = principal[c, bought, s, p] * age_survival[c, term[c]]
                    running[c, r, s, p] -= 0.5 * due * coupon[c, bought, p]
                    principal[c, bought, s, p] = 0.0
                matured[c, s, p] = due
                par[c, s, p] = kept - due


@kernel
def bullet_coupons(term: Integers, spread: Floats, discount: Floats, out: Floats) -> None:
    """Coupon rate at which each class is worth par on each path's curve plus its spread. [1/year], [class, path]

    discount  P(tau) [tau, path]; spread [class] continuously compounded [1/year]
    """
    for c in range(term.shape[0]):
        decay = exp_one(-0.5 * spread[c])
        for p in range(discount.shape[1]):
            factor = 1.0
            annuity = 0.0
            last = 1.0
            for t in range(6, term[c] + 1, 6):
                factor = factor * decay
                last = discount[t, p] * factor
                annuity += last
            out[c, p] = 2.0 * (1.0 - last) / annuity


@kernel
def cohort_values(
    m: int, term: Integers, spread: Floats, age_survival: Floats, principal: Floats, coupon: Floats, discount: Floats,
    wanted: Flags, out: Floats,
) -> None:  # fmt: skip
    """Market value incl. accrued of all cohorts alive after month m. [currency], [segment, path]; others set to 0

    Promised payments on the par that has survived, on the path's curve plus the class spread (the spread at which it
    was bought).
    """
    for s in range(out.shape[0]):
        for p in range(out.shape[1]):
            out[s, p] = 0.0
            if not wanted[s, p]:
                continue
            total = 0.0
            for c in range(term.shape[0]):
                month_decay = exp_one(-spread[c] / 12.0)
                for start in range(1, 7):
                    # payments at m + start, m + start + 6, ...: cohorts bought in the months of that half-year day
                    count = (term[c] - start) // 6
                    # from the last payment back: a cohort's coupon is due at every earlier date of its own kind
                    amount = 0.0
                    power = 1.0
                    for _ in range(start + 6 * count):
                        power = power * month_decay
                    back = 1.0
                    for _ in range(6):
                        back = back / month_decay
                    for k in range(count, -1, -1):
                        tau = start + 6 * k
                        bought = m + tau - term[c]
                        flow = amount
                        if bought >= 1 and bought <= m:
                            alive = principal[c, bought, s, p] * age_survival[c, m - bought]
                            half = 0.5 * alive * coupon[c, bought, p]
                            amount += half
                            flow = amount + alive
                        total += flow * discount[tau, p] * power
                        power = power * back
            out[s, p] = total
