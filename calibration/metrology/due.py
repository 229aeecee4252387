"""When a tag is due, until when it may be late, and what its schedule is called on a given day.

Due dates count whole calendar months from an anchor and are never stepped from one due date to the next: one
month after 31 January is the last of February, two months after it is 31 March.

- Anchor: the last accepted test, or a fixed calendar. On a fixed calendar the due date is the first of its
  dates after the last accepted test; a test made within the window before one of the dates counts for that
  date. Before the calendar begins a tag is due an interval after its last test at the latest.
- Limit: the earlier of due + grace and last accepted test + interval + grace. Without the second, a test
  made early on a fixed calendar, followed by grace, would give 18 months on an interval of 12. Where the next
  date of the calendar lies beyond that limit, a tag is due an interval after its last test: grace is never
  merged with the due date.
- The window opens a number of days before due, but never more than half of the interval before it: with a
  window longer than the interval every test would skip a date, and a tag just tested be due again.
- Grace: 25 % of the interval unless stated otherwise (NRC Generic Letter 91-04 practice: 18 → 22.5, 24 → 30
  months), in whole days, rounded down.
- States, the first that applies: not in service, never tested, deferred, overdue, in grace, due, not due. A
  limit day itself counts as the milder state: on the due day a tag is due, on the last day of grace in
  grace, on the last day of a deferral deferred.

Only dates are kept; a state is a condition on the plant's local today, which is an argument everywhere.
"""

from __future__ import annotations

from calendar import monthrange
from dataclasses import dataclass, field
from datetime import date, timedelta
from enum import StrEnum

import numpy as np
from numpy.typing import ArrayLike, NDArray

Days = NDArray[np.datetime64]

GRACE_PERCENT = 25.0
LEAD_DAYS = 42


class State(StrEnum):
    """Schedule states, in the order in which the first that applies is taken."""

    NOT_IN_SERVICE = "not in service"
    NEVER_TESTED = "never tested"
    DEFERRED = "deferred"
    OVERDUE = "overdue"
    IN_GRACE = "in grace"
    DUE = "due"
    NOT_DUE = "not due"


STATES = tuple(State)
"""States by code: code k of an array stands for STATES[k]."""


def add_months(day: date, months: int) -> date:
    """The same day of the month, a number of months on; the last of the month where it has no such day.

    Parameters
    ----------
    day : date
        Anchor.
    months : int
        Calendar months, negative backwards.

    Returns
    -------
    date
    """
    year, month = divmod(day.year * 12 + day.month - 1 + months, 12)
    return date(year, month + 1, min(day.day, monthrange(year, month + 1)[1]))


def grace_after(start: date, end: date, percent: float = GRACE_PERCENT) -> int:
    """Grace of the interval between two dates [days], rounded down.

    Parameters
    ----------
    start, end : date
        Begin and end of the interval.
    percent : float
        Grace [% of the interval].

    Returns
    -------
    int
    """
    # Rounded before the floor, so that 29 % of 100 days is 29 days and not 28.999… cut down to 28.
    return int(np.floor(round((end - start).days * percent / 100.0, 9)))


@dataclass(frozen=True)
class Schedule:
    """The dates of a tag and what they follow from.

    Attributes
    ----------
    last_accepted, interval_months, calendar_anchor, grace_days, grace_percent, lead_days, fitted_on
        As given to `plan_next`.
    due : date or None
        Due date, not later than `limit`; of a transmitter never tested the day it was fitted.
    limit : date or None
        Last day on which the tag is not overdue; None while it was never tested.
    opens : date or None
        First day on which a test is due, and on a fixed calendar counts for the due date.
    never_tested : bool
        No accepted test counts for this fitting yet.
    """

    last_accepted: date | None
    interval_months: int
    calendar_anchor: date | None
    grace_days: int | None
    grace_percent: float
    lead_days: int
    fitted_on: date | None
    due: date | None
    limit: date | None
    opens: date | None
    never_tested: bool

    def state(self, today: date, *, in_service: bool = True, deferred_until: date | None = None) -> State:
        """The schedule state on a day; see `state_on`."""
        return state_on(
            today,
            due=self.due,
            limit=self.limit,
            opens=self.opens,
            never_tested=self.never_tested,
            in_service=in_service,
            deferred_until=deferred_until,
        )


def _check(interval: int, grace_days: int | None, grace_percent: float, lead_days: int) -> None:
    if interval < 1:
        raise ValueError(f"The interval is {interval} months; it must be at least one month.")
    if (grace_days is not None and grace_days < 0) or not grace_percent >= 0.0:
        raise ValueError("The grace cannot be negative.")
    if lead_days < 0:
        raise ValueError(f"The window opens {lead_days} days before due; it cannot open after it.")


def plan_next(
    last_accepted: date | None,
    interval_months: int,
    *,
    calendar_anchor: date | None = None,
    grace_days: int | None = None,
    grace_percent: float = GRACE_PERCENT,
    lead_days: int = LEAD_DAYS,
    fitted_on: date | None = None,
) -> Schedule:
    """Work out the dates that follow from the last accepted test.

    Parameters
    ----------
    last_accepted : date or None
        Date of the last accepted test that counts for this fitting; None if there is none.
    interval_months : int
        Interval [months].
    calendar_anchor : date, optional
        First date of a fixed calendar; without it due dates count from the last accepted test.
    grace_days : int, optional
        Grace [days]; otherwise `grace_percent` of the interval.
    grace_percent : float
        Grace [% of the interval].
    lead_days : int
        The window opens this many days before due.
    fitted_on : date, optional
        Day of fitting, on which a transmitter that was never tested is due.

    Returns
    -------
    Schedule

    Raises
    ------
    ValueError
        If the interval is less than a month, or grace or lead is negative.

    """
    _check(interval_months, grace_days, grace_percent, lead_days)
    due = limit = opens = None
    if last_accepted is None:
        due = opens = fitted_on
    else:

        def with_grace(start: date, end: date) -> date:
            return end + timedelta(grace_after(start, end, grace_percent) if grace_days is None else grace_days)

        start, due = last_accepted, add_months(last_accepted, interval_months)
        limit = with_grace(start, due)
        if calendar_anchor is not None:
            n = _calendar_step(calendar_anchor, interval_months, last_accepted, lead_days)
            day = add_months(calendar_anchor, n * interval_months)
            if day <= (due if n == 0 else limit):
                start, due = add_months(calendar_anchor, (n - 1) * interval_months), day
                limit = min(limit, with_grace(start, due))
        opens = _opens(start, due, lead_days)
    return Schedule(
        last_accepted=last_accepted,
        interval_months=interval_months,
        calendar_anchor=calendar_anchor,
        grace_days=grace_days,
        grace_percent=grace_percent,
        lead_days=lead_days,
        fitted_on=fitted_on,
        due=due,
        limit=limit,
        opens=opens,
        never_tested=last_accepted is None,
    )


def _calendar_step(anchor: date, interval: int, tested: date, lead: int) -> int:
    """Number n ≥ 0 of the first calendar date for which a test on `tested` does not count yet."""
    apart = (tested.year - anchor.year) * 12 + tested.month - anchor.month
    n = max(apart // interval - 1, 0)
    while True:
        day = add_months(anchor, n * interval)
        if _opens(add_months(anchor, (n - 1) * interval), day, lead) > tested:
            return n
        n += 1


def _opens(start: date, end: date, lead: int) -> date:
    """The day on which the window before the end of an interval opens."""
    return end - timedelta(min(lead, (end - start).days // 2))


def state_on(
    today: date,
    *,
    due: date | None,
    limit: date | None,
    opens: date | None,
    never_tested: bool,
    in_service: bool = True,
    deferred_until: date | None = None,
) -> State:
    """The schedule state on a day, from the dates that are kept.

    Parameters
    ----------
    today : date
        The plant's local today.
    due, limit, opens : date or None
        Dates of `Schedule`; a tag that has no requirement has none and is not due.
    never_tested : bool
        No accepted test counts for this fitting yet.
    in_service : bool
        Whether a transmitter is fitted and the tag in service.
    deferred_until : date, optional
        Last day of an authorised deferral that is open.

    Returns
    -------
    State
    """
    if not in_service:
        return State.NOT_IN_SERVICE
    if never_tested:
        return State.NEVER_TESTED
    if deferred_until is not None and today <= deferred_until:
        return State.DEFERRED
    if limit is not None and today > limit:
        return State.OVERDUE
    if due is not None and today > due:
        return State.IN_GRACE
    if opens is not None and today >= opens:
        return State.DUE
    return State.NOT_DUE


def add_months_array(days: ArrayLike, months: ArrayLike) -> Days:
    """`add_months` over arrays.

    Parameters
    ----------
    days : array of datetime64[D]
        Anchors; NaT stays NaT.
    months : int or array of int
        Calendar months.

    Returns
    -------
    array of datetime64[D]
    """
    day = np.asarray(days, dtype="datetime64[D]")
    month = day.astype("datetime64[M]")
    target = month + np.asarray(months, dtype="timedelta64[M]")
    first = target.astype("datetime64[D]")
    length = (target + 1).astype("datetime64[D]") - first
    return np.asarray(first + np.minimum(day - month.astype("datetime64[D]"), length - 1))


@dataclass(frozen=True, eq=False)
class ScheduleArrays:
    """Dates of many tags; arrays of datetime64[D], NaT where there is none, as in `Schedule`.

    Attributes
    ----------
    last_accepted, interval_months, calendar_anchor, fitted_on : array
        As given to `plan_next_array`.
    due, limit, opens : array of datetime64[D]
    never_tested : array of bool
    """

    last_accepted: Days = field(repr=False)
    interval_months: NDArray[np.int64] = field(repr=False)
    calendar_anchor: Days = field(repr=False)
    fitted_on: Days = field(repr=False)
    due: Days
    limit: Days
    opens: Days
    never_tested: NDArray[np.bool_]


def _grace_array(start: Days, end: Days, grace_days: ArrayLike | None, percent: ArrayLike) -> NDArray[np.timedelta64]:
    if grace_days is not None:
        return np.asarray(grace_days, dtype="timedelta64[D]")
    length = (end - start).astype(np.float64)
    whole = np.floor(np.round(length * np.asarray(percent) / 100.0, 9))
    return np.where(np.isnat(end), 0.0, whole).astype("timedelta64[D]")


def _opens_array(start: Days, end: Days, lead: NDArray[np.timedelta64]) -> Days:
    return np.asarray(end - np.minimum(lead, (end - start) // 2))


def plan_next_array(
    last_accepted: ArrayLike,
    interval_months: ArrayLike,
    *,
    calendar_anchor: ArrayLike = "NaT",
    grace_days: ArrayLike | None = None,
    grace_percent: ArrayLike = GRACE_PERCENT,
    lead_days: ArrayLike = LEAD_DAYS,
    fitted_on: ArrayLike = "NaT",
) -> ScheduleArrays:
    """`plan_next` over arrays that broadcast against each other.

    Parameters
    ----------
    last_accepted, calendar_anchor, fitted_on : array of datetime64[D]
        NaT where there is none.
    interval_months : int or array of int
        Intervals [months].
    grace_days : int or array of int, optional
        Grace [days]; otherwise `grace_percent` of each interval.
    grace_percent : float or array
        Grace [% of the interval].
    lead_days : int or array of int
        Windows [days].

    Returns
    -------
    ScheduleArrays

    Raises
    ------
    ValueError
        If any interval is less than a month, or any grace or lead is negative.
    """
    shape = np.broadcast_shapes(*(np.shape(a) for a in (last_accepted, interval_months, calendar_anchor, fitted_on)))
    last = np.broadcast_to(np.asarray(last_accepted, dtype="datetime64[D]"), shape)
    anchor = np.broadcast_to(np.asarray(calendar_anchor, dtype="datetime64[D]"), shape)
    fitted = np.broadcast_to(np.asarray(fitted_on, dtype="datetime64[D]"), shape)
    interval = np.broadcast_to(np.asarray(interval_months, dtype=np.int64), shape)
    lead = np.broadcast_to(np.asarray(lead_days, dtype="timedelta64[D]"), shape)
    for values, name, least in (
        (interval, "interval", 1),
        (lead_days, "lead", 0),
        (grace_percent, "grace", 0),
    ):
        if np.size(values) and np.min(values) < least:
            raise ValueError(f"The smallest {name} is {np.min(values)}; it must be at least {least}.")

    after = add_months_array(last, interval)
    fixed = ~np.isnat(anchor) & ~np.isnat(last)
    # Where no calendar is set the test itself anchors its one and only date.
    root = np.where(fixed, anchor, last)
    apart = np.where(fixed, (last.astype("datetime64[M]") - root.astype("datetime64[M]")).astype(np.int64), 0)
    n = np.where(fixed, np.maximum(apart // interval - 1, 0), 1)
    for _ in range(4):
        day, before = add_months_array(root, n * interval), add_months_array(root, (n - 1) * interval)
        n = n + (fixed & (_opens_array(before, day, lead) <= last))
    day, before = add_months_array(root, n * interval), add_months_array(root, (n - 1) * interval)
    latest = after + _grace_array(last, after, grace_days, grace_percent)
    kept = day <= np.where(n == 0, after, latest)
    day, before = np.where(kept, day, after), np.where(kept, before, last)
    limit = np.minimum(day + _grace_array(before, day, grace_days, grace_percent), latest)
    never = np.isnat(last)
    due = np.where(never, fitted, day)
    return ScheduleArrays(
        last_accepted=last,
        interval_months=interval,
        calendar_anchor=anchor,
        fitted_on=fitted,
        due=due,
        limit=limit,
        opens=np.where(never, fitted, _opens_array(before, day, lead)),
        never_tested=never,
    )


def states_on(
    today: date | np.datetime64,
    *,
    due: ArrayLike,
    limit: ArrayLike,
    opens: ArrayLike,
    never_tested: ArrayLike,
    in_service: ArrayLike = True,
    deferred_until: ArrayLike = "NaT",
) -> NDArray[np.int8]:
    """`state_on` over arrays.

    Parameters
    ----------
    today : date or array of datetime64[D]
        Local today, of each plant where plants differ.
    due, limit, opens, deferred_until : array of datetime64[D]
        NaT where there is none.
    never_tested, in_service : bool or array of bool

    Returns
    -------
    array of int8
        Index into `STATES`.
    """
    now = np.asarray(today, dtype="datetime64[D]")
    conditions = [
        ~np.asarray(in_service, dtype=bool),
        np.asarray(never_tested, dtype=bool),
        now <= np.asarray(deferred_until, dtype="datetime64[D]"),
        now > np.asarray(limit, dtype="datetime64[D]"),
        now > np.asarray(due, dtype="datetime64[D]"),
        now >= np.asarray(opens, dtype="datetime64[D]"),
    ]
    conditions = [np.asarray(c) for c in np.broadcast_arrays(*conditions)]
    return np.select(conditions, np.arange(len(conditions)), len(conditions)).astype(np.int8)
