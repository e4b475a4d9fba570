"""Why one security was or was not called on one path: a paragraph in plain words and a table, as text."""

from __future__ import annotations

import math
import textwrap
from dataclasses import replace
from typing import Any

import pandas as pd

from projector.questions.records import BY_BOUND, BY_SOLVE, CALLED, NO_RIGHT, CallStory
from projector.report.numbers import SYMBOLS, as_date, clean, count_of, fixed, percent, signed

WIDTH = 110  # characters of a line
MOST_ROWS = 24  # months with a live right that are all printed; of more, those around the decision
BEFORE, AFTER = 9, 3  # months printed around the decision, or around the month that came closest
CLOSE = 0.005  # per 100: a saving under it is printed with two decimals more
LIMIT = (
    "Optimal within the stated model, each decision solved on that month's own curve to 0.01 per 100, and again on "
    "finer grids near a tie. Issuers often call later than this."
)


def story_text(story: CallStory, every_month: bool = False, every_solve: bool = False) -> str:
    """The whole answer: paragraph, table, units, and what the decision rests on.

    every_month  every month instead of those around the decision
    every_solve  also what going on costs where the bound settled the decision, if the story holds it
    """
    if not every_solve:
        story = as_settled(story)
    parts = [textwrap.fill(clean(headline(story)), WIDTH)]
    shown = shown_months(story, every_month)
    if len(shown):
        left_out = len(story.live) - int(shown["call_price"].notna().sum())
        parts.append(table(story, shown))
        rest = f" {count_of(left_out, 'month')} with a live right not shown; --all prints them." if left_out else ""
        parts.append(textwrap.fill(UNITS + rest, WIDTH))
    if len(story.live):
        parts.append(textwrap.fill(LIMIT, WIDTH))
    return "\n\n".join(parts)


def as_settled(story: CallStory) -> CallStory:
    """The story with the cost of going on left empty where the bound settled the decision."""
    by_bound = story.months["settled_by"] == BY_BOUND
    gone = ["continuation", "issuer_saving", "issuer_saving_amount"]
    months = story.months.copy()
    months.loc[by_bound, gone] = float("nan")
    return replace(story, months=months)


UNITS = (
    "Per 100 of par; yields a year, bond-equivalent. bar = price + issuer's cost + accrued; with notice, of the month "
    "of payment, seen from the decision. Where going on is empty, the upper bound lies under the bar and settled the "
    "decision. The issuer calls where refunding is at or under critical."
)


def subject(story: CallStory) -> str:
    """The security: B1 (Issuer, 5.00% to 2030-01-31)."""
    issuer = f"{story.issuer}, " if story.issuer else ""
    return clean(f"{story.security_id} ({issuer}{percent(story.coupon_rate, 2)} to {story.maturity_date.isoformat()})")


def title(story: CallStory) -> str:
    """What the answer is about: B1 (Issuer, 5.00% to 2030-01-31) on S5 Gradual down."""
    return f"{subject(story)} on {clean(story.scenario_name)}"


def headline(story: CallStory) -> str:
    """What happened and why, in plain words."""
    if story.announced:
        paid = f"month {fixed(story.maturity)} at {fixed(story.redemption, 2)} per 100 of the par left"
        return f"{title(story)}: called before the valuation date; paid in {paid}. There was no decision left to take."
    if not len(story.live):
        return f"{title(story)}: {no_right(story)}"
    if story.decided is None:
        return f"{title(story)}: {not_called(story)}"
    return f"{title(story)}: {called(story, at(story, story.decided))}"


def at(story: CallStory, month: int) -> dict[str, Any]:
    """One month's row."""
    row: dict[str, Any] = story.months[story.months["month"] == month].to_dict("records")[0]
    return row


def when(row: dict[str, Any]) -> str:
    """month 31 (2025-07-31)"""
    day = as_date(row["date"])
    assert day is not None, "every month has its date"
    return f"month {row['month']} ({day.isoformat()})"


def money(story: CallStory, amount: float) -> str:
    """An amount in whole units of the study's currency."""
    return f"{SYMBOLS.get(story.currency, f'{story.currency} ')}{fixed(abs(amount))}"


def end_of_life(story: CallStory) -> str:
    """Where a story that ends without a call ends."""
    return doubled(story) + ending(story)


def doubled(story: CallStory) -> str:
    """Which sinking payments the issuer doubled, with a blank after; nothing where none was."""
    if not story.doubled:
        return ""
    months = ", ".join(fixed(m) for m in story.doubled)
    unit = "month" if len(story.doubled) == 1 else "months"
    return f"The issuer doubled {count_of(len(story.doubled), 'sinking payment')}, in {unit} {months}. "


def ending(story: CallStory) -> str:
    """A put, maturity, or the horizon."""
    if story.put is not None:
        paid, decided, price = story.put
        said = "" if paid == decided else f" (decided in month {fixed(decided)})"
        return f"The holder puts it in {when(at(story, paid))} at {fixed(price, 2)}{said}: holding on was worth less."
    last = story.months.to_dict("records")[-1]
    if story.maturity <= story.horizon:
        return f"It pays what was promised and matures in {when(last)}."
    return f"It is still outstanding at the horizon, {when(last)}, and matures in month {fixed(story.maturity)}."


def no_right(story: CallStory) -> str:
    """A security that could not be called on this path."""
    if story.rights:
        first = story.rights[0]
        if story.put is not None and story.put[0] <= first:
            return f"not called: its rights begin in month {fixed(first)}. {end_of_life(story)}"
        beyond = f"its rights begin in month {fixed(first)}, after the horizon of {fixed(story.horizon)} months"
        return f"not called, because {beyond}. {end_of_life(story)}"
    if story.make_whole:
        only = "its only right is a make-whole call, which this version reads and never uses"
        return f"not called, because {only}. {end_of_life(story)}"
    return f"it has no right of call, so there was no decision to take. {end_of_life(story)}"


def called(story: CallStory, row: dict[str, Any]) -> str:
    """The call: when, at what price, why, and what it meant to both sides."""
    paid = at(story, story.paid) if story.paid not in (None, story.decided) and story.paid is not None else None
    kind = "" if story.stated_price else ", a par call"
    accrued = f" plus accrued {fixed(row['accrued'], 2)}" if row["accrued"] else ""
    accrued = " plus interest accrued by then" if paid else accrued
    head = f"called in {when(row)} at {fixed(row['call_price'], 2)}{accrued}{kind}"
    head += f", paid in {when(paid)}." if paid else "."
    places = 3 if row["issuer_saving"] >= CLOSE else 5
    going_on = (
        f"Going on would cost the issuer {fixed(row['continuation'], places)} per 100; calling costs "
        f"{fixed(row['bar'], places)} ({costs(story, row)})."
    )
    return " ".join([head, going_on, yields(row), *both_sides(story, row), before(story)])


def costs(story: CallStory, row: dict[str, Any]) -> str:
    """What the bar is made of."""
    if story.notice:
        due = f"cost {fixed(story.cost, 2)} and all interest until then"
        return (
            f"price {fixed(row['call_price'], 2)} paid {count_of(story.notice, 'month')} later, {due}, seen from the "
            "decision"
        )
    return f"price {fixed(row['call_price'], 2)}, cost {fixed(story.cost, 2)}, accrued {fixed(row['accrued'], 2)}"


def yields(row: dict[str, Any]) -> str:
    """Refunding yield against the critical one, at the call."""
    now = f"Its refunding yield was {percent(row['refunding_yield'], 3)}"
    if math.isnan(row["critical_yield"]):
        return f"{now}; no parallel shift of the curve makes both equal."
    under = 1e4 * (row["critical_yield"] - row["refunding_yield"])
    return f"{now}, {fixed(under, 1)} bp under the {percent(row['critical_yield'], 3)} at which both cost the same."


def both_sides(story: CallStory, row: dict[str, Any]) -> list[str]:
    """What the issuer saved and what the holder lost."""
    lost = row["holder_loss"]
    verb = "lost" if lost >= 0.0 else "gained"
    saved = f"The issuer saved {fixed(row['issuer_saving'], 3 if row['issuer_saving'] >= CLOSE else 5)} per 100"
    hurt = f"the holder {verb} {fixed(abs(lost), 3)} against holding on"
    if row["par_held"] <= 0.0:
        return [f"{saved}; {hurt}. None of it was held by then: all had been sold."]
    par = f"on the {money(story, row['par_held'])} of par held"
    return [
        f"{saved} ({money(story, row['issuer_saving_amount'])} {par}); {hurt} "
        f"({money(story, row['holder_loss_amount'])})."
    ]


def before(story: CallStory) -> str:
    """How the rights before the call were settled."""
    earlier = story.live[story.live["decision"] != CALLED]
    if not len(earlier):
        return "It was the first month with a live right."
    return f"Before it a right was live in {count_of(len(earlier), 'month')}: {settled(earlier)}."


def settled(rows: pd.DataFrame) -> str:
    """How many rights the bound settled, and how many were solved."""
    counts = rows["settled_by"].value_counts()
    near = len(rows) - int(counts.get(BY_BOUND, 0)) - int(counts.get(BY_SOLVE, 0))
    said = [(int(counts.get(BY_BOUND, 0)), "settled by the bound"), (int(counts.get(BY_SOLVE, 0)), "solved"),
            (near, "solved again near a tie")]  # fmt: skip
    kinds = [(n, how) for n, how in said if n]
    if len(kinds) == 1:
        return kinds[0][1] if len(rows) == 1 else f"all {kinds[0][1]}"
    return ", ".join(f"{fixed(n)} {how}" for n, how in kinds)


def closest(story: CallStory) -> dict[str, Any]:
    """The month with a live right whose refunding yield came nearest to the critical one."""
    live = story.live
    gap = live["refunding_yield"] - live["critical_yield"]
    found = gap.idxmin() if gap.notna().any() else (live["bar"] - live["upper_bound"]).idxmin()
    row: dict[str, Any] = live.loc[found].to_dict()
    return row


def not_called(story: CallStory) -> str:
    """A security whose rights were never worth using, and how near it came."""
    live, row = story.live, closest(story)
    head = f"not called. A right was live in {count_of(len(live), 'month')}: {settled(live)}."
    if math.isnan(row["continuation"]):
        cost = f"going on costs at most {fixed(row['upper_bound'], 3)} per 100 by the bound"
    else:
        cost = f"going on costs {fixed(row['continuation'], 3)} per 100"
    near = f"It came closest in {when(row)}: {cost}, calling {fixed(row['bar'], 3)} ({costs(story, row)})."
    if math.isnan(row["critical_yield"]):
        need = f"Its refunding yield was {percent(row['refunding_yield'], 3)}; no parallel shift makes both equal."
    else:
        over = 1e4 * (row["refunding_yield"] - row["critical_yield"])
        need = (
            f"Its refunding yield was {percent(row['refunding_yield'], 3)}, {fixed(over, 1)} bp over the "
            f"{percent(row['critical_yield'], 3)} at which both cost the same."
        )
    return " ".join([head, near, need, end_of_life(story)])


def shown_months(story: CallStory, every_month: bool) -> pd.DataFrame:
    """Every month when asked; else the months with a live right, of many the first and those around the decision."""
    live = story.live
    if every_month:
        return story.months
    if len(live) <= MOST_ROWS:
        return live
    middle = story.decided if story.decided is not None else int(closest(story)["month"])
    place = int((live["month"] <= middle).sum()) - 1
    around = live.iloc[max(place - BEFORE, 0) : place + AFTER + 1]
    first = live.iloc[:1]
    return around if first.index[0] in around.index else pd.concat([first, around])


def table(story: CallStory, rows: pd.DataFrame) -> str:
    """Months as lines, figures right and words left; a row of dots where months are left out."""
    cells = [HEAD_1, HEAD_2, *(line(row) for row in rows.to_dict("records"))]
    widths = [max(len(row[k]) for row in cells) for k in range(len(HEAD_1))]
    text = [
        "  ".join(cell.ljust(w) if k in WORDS else cell.rjust(w) for k, (cell, w) in enumerate(zip(row, widths)))
        for row in cells
    ]
    out = [text[0].rstrip(), text[1].rstrip()]
    months = rows["month"].tolist()
    rights = story.live["month"].tolist()
    for k, month in enumerate(months):
        if k and any(months[k - 1] < m < month for m in rights):
            out.append("...".rjust(widths[0]))
        out.append(text[k + 2].rstrip())
    return "\n".join(out)


HEAD_1 = ("", "", "", "call", "", "upper", "going", "", "refunding", "critical", "", "calling")
HEAD_2 = ("month", "date", "promised", "price", "bar", "bound", "on", "settled by", "yield", "yield", "decision",
          "saves")  # fmt: skip
WORDS = (1, 7, 10)  # columns of words and dates


def line(row: dict[str, Any]) -> tuple[str, ...]:
    """One month's cells; empty where a figure does not apply."""
    day = as_date(row["date"])
    return (
        str(row["month"]),
        day.isoformat() if day else "",
        figure(row["promised"], 3) if row["promised"] else "",
        figure(row["call_price"], 2),
        figure(row["bar"], 3),
        figure(row["upper_bound"], 3),
        figure(row["continuation"], 3),
        row["settled_by"],
        rate(row["refunding_yield"]),
        rate(row["critical_yield"]),
        "" if row["decision"] == NO_RIGHT else row["decision"],
        "" if math.isnan(row["issuer_saving"]) else signed(row["issuer_saving"], 4),
    )


def figure(value: float, decimals: int) -> str:
    """A figure, or nothing."""
    return "" if math.isnan(value) else fixed(value, decimals)


def rate(value: float) -> str:
    """A yield in percent with a thousandth of a point, or nothing."""
    return "" if math.isnan(value) else percent(value, 3)
