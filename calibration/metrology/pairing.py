"""Which two tests of a transmitter may be compared to see it drift.

What a transmitter did between two tests is as-found(k) less as-left(k-1). That difference is drift only
when nothing else happened in between: the same transmitter at the same tag, never taken out, with the same
measuring head, range and points, and no intervention. Where nothing was adjusted at a test, its as-found
stands as its as-left. Every test that gives no difference is listed with the reason, so that nothing is
left out silently.
"""

from __future__ import annotations

from collections.abc import Hashable, Mapping, Sequence
from dataclasses import dataclass
from datetime import date, datetime
from enum import StrEnum
from itertools import pairwise

DAYS_PER_YEAR = 365.25


class Break(StrEnum):
    """Why a test gives no difference."""

    FIRST = "first test"
    SWAP = "another transmitter"
    TAG = "another tag"
    REFIT = "taken out and fitted again"
    HEAD = "another measuring head"
    RERANGE = "range changed"
    POINTS = "other points"
    INTERVENTION = "intervention"
    COULD_NOT_TEST = "could not be tested"
    INCOMPLETE_FOUND = "as-found incomplete"
    INCOMPLETE_LEFT = "as-left incomplete"
    SAME_DAY = "same day"


@dataclass(frozen=True)
class Visit:
    """One test as drift sees it.

    Parameters
    ----------
    when : date or datetime
        Day of the test.
    found : mapping or None
        As-found value of each channel (a check point, zero, span …), all in one unit; None if there is no
        as-found.
    left : mapping or None
        As-left values; None where nothing was adjusted, so that as-found stands.
    transmitter, tag, fitting, head, basis, points : hashable
        What must be the same in two tests to compare them; `basis` stands for range and transfer function.
    could_not_test : str
        The reason, where the visit ended without a test and without touching the transmitter.
    complete_found, complete_left : bool
        Whether all readings were taken.
    u_found, u_left : float or None
        Standard uncertainty of the values without what both tests share, in their unit; None if unknown.
        Without an adjustment `u_found` counts for both.
    u_shared : float
        Part of it common to as-found and as-left of this visit (same standards on the same day).
    label : str
        How the test is called.
    """

    when: date
    found: Mapping[str, float] | None
    left: Mapping[str, float] | None = None
    transmitter: Hashable = None
    tag: Hashable = None
    fitting: Hashable = None
    head: Hashable = None
    basis: Hashable = None
    points: Hashable = None
    could_not_test: str = ""
    complete_found: bool = True
    complete_left: bool = True
    u_found: float | None = None
    u_left: float | None = None
    u_shared: float = 0.0
    label: str = ""

    @property
    def adjusted(self) -> bool:
        """Whether the transmitter was adjusted."""
        return self.left is not None

    @property
    def after(self) -> Mapping[str, float] | None:
        """The values with which the transmitter was left."""
        return self.left if self.left is not None else self.found

    @property
    def u_after(self) -> float | None:
        """Standard uncertainty of `after`."""
        return self.u_left if self.left is not None else self.u_found

    @property
    def shared_variance(self) -> float:
        """Variance that the as-found and the as-left of this visit have in common."""
        if self.left is None:
            return (self.u_found or 0.0) ** 2
        return self.u_shared**2


@dataclass(frozen=True)
class Intervention:
    """Something done to a transmitter between tests that breaks its history.

    Parameters
    ----------
    when : date or datetime
        On the day of a test, a bare date counts as between that test and its neighbours on both sides.
    what : str
        What was done, in words.
    transmitter : hashable
        To which transmitter; it breaks no pair of another one.
    """

    when: date
    what: str
    transmitter: Hashable = None

    @property
    def words(self) -> str:
        """What was done, and when."""
        return f"{self.what} on {_day(self.when).isoformat()}"


@dataclass(frozen=True)
class Pair:
    """Two tests that may be compared.

    Attributes
    ----------
    start_index, end_index : int
        Visits whose as-left and as-found are compared.
    start, end : date
        Their days.
    years : float
        Time between them [years of 365.25 days].
    differences : mapping
        As-found less as-left, for each channel that both have.
    u_start, u_end : float or None
        Standard uncertainty of the two.
    """

    start_index: int
    end_index: int
    start: date
    end: date
    years: float
    differences: Mapping[str, float]
    u_start: float | None
    u_end: float | None


@dataclass(frozen=True)
class LeftOut:
    """A test that gives no difference, and why.

    Attributes
    ----------
    index : int
        The visit.
    when : date
        Its day.
    reason : Break
    words : str
        The reason in words, with what is known of it.
    """

    index: int
    when: date
    reason: Break
    words: str


@dataclass(frozen=True)
class Pairing:
    """All pairs of a history and all tests left out.

    Attributes
    ----------
    visits, interventions
        As given.
    pairs : tuple of Pair
    left_out : tuple of LeftOut
    bases : tuple of int or None
        For each visit the one whose as-left stands after it; None where no as-left is known.
    """

    visits: tuple[Visit, ...]
    interventions: tuple[Intervention, ...]
    pairs: tuple[Pair, ...]
    left_out: tuple[LeftOut, ...]
    bases: tuple[int | None, ...]

    @property
    def channels(self) -> tuple[str, ...]:
        """Channels that at least one pair compares, in the order met."""
        return tuple(dict.fromkeys(name for pair in self.pairs for name in pair.differences))

    def last_of(self, transmitter: Hashable) -> int | None:
        """The last visit of a transmitter, whatever came of it."""
        return max((i for i, visit in enumerate(self.visits) if visit.transmitter == transmitter), default=None)

    def standing(self, transmitter: Hashable) -> tuple[int | None, str]:
        """The visit whose as-left a transmitter still carries, with which its next as-found would be compared.

        Parameters
        ----------
        transmitter : hashable
            Which transmitter.

        Returns
        -------
        int or None, str
            The visit; or None and the reason in words.
        """
        last = self.last_of(transmitter)
        if last is None:
            return None, "there is no test of it"
        visit, base = self.visits[last], self.bases[last]
        if base is None or self.visits[base].transmitter != transmitter:
            words = visit.label or "no complete as-left"
            return None, f"test of {_day(visit.when).isoformat()}: {words}"
        since = [i for i in self.interventions if i.transmitter == transmitter and _follows(i, self.visits[base])]
        if since:
            return None, "; ".join(i.words for i in since)
        return base, ""


@dataclass(frozen=True)
class Segment:
    """A stretch of the cumulative curve between two breaks.

    Attributes
    ----------
    indices : tuple of int
        Visits.
    dates : tuple of date
    values : tuple of float
        Drift since the start of the stretch, in the unit of the channel.
    """

    indices: tuple[int, ...]
    dates: tuple[date, ...]
    values: tuple[float, ...]


def _day(when: date) -> date:
    return when.date() if isinstance(when, datetime) else when


def _between(what: Intervention, before: Visit, after: Visit) -> bool:
    moments = (before.when, what.when, after.when)
    if all(isinstance(m, datetime) for m in moments):
        return before.when < what.when <= after.when
    return _day(before.when) <= _day(what.when) <= _day(after.when)


def _follows(what: Intervention, visit: Visit) -> bool:
    if isinstance(what.when, datetime) and isinstance(visit.when, datetime):
        return visit.when < what.when
    return _day(visit.when) <= _day(what.when)


_KEYS = (
    ("transmitter", Break.SWAP, "another transmitter was fitted since the test before"),
    ("tag", Break.TAG, "the test before was made at another tag"),
    ("fitting", Break.REFIT, "the transmitter was taken out and fitted again since the test before"),
    ("head", Break.HEAD, "the transmitter has another measuring head than at the test before"),
    ("basis", Break.RERANGE, "the range or its transfer function was changed since the test before"),
    ("points", Break.POINTS, "the test before was made at other points"),
)


def _broken(before: Visit, after: Visit, interventions: Sequence[Intervention]) -> tuple[Break, str] | None:
    for key, reason, words in _KEYS:
        if getattr(before, key) != getattr(after, key):
            return reason, words
    done = [i for i in interventions if i.transmitter == after.transmitter and _between(i, before, after)]
    if done:
        return Break.INTERVENTION, "; ".join(i.words for i in done)
    if _day(before.when) == _day(after.when):
        return Break.SAME_DAY, "the test before was made on the same day"
    return None


def pair_tests(visits: Sequence[Visit], interventions: Sequence[Intervention] = ()) -> Pairing:
    """Pair each as-found with the as-left before it.

    Parameters
    ----------
    visits : sequence of Visit
        Tests in order of time.
    interventions : sequence of Intervention
        What was done between tests.

    Returns
    -------
    Pairing

    Raises
    ------
    ValueError
        If the tests are not in order of time.

    Notes
    -----
    A visit that ended without a test leaves the transmitter as it was: the next as-found is compared
    with the as-left before that visit, over the longer time. So does an incomplete as-found without
    adjustment.
    """
    for earlier, later in pairwise(visits):
        if _day(later.when) < _day(earlier.when):
            raise ValueError(f"Tests must be in order of time; {later.when} follows {earlier.when}.")
    pairs: list[Pair] = []
    left_out: list[LeftOut] = []
    base: int | None = None
    bases: list[int | None] = []
    why_none = (Break.FIRST, "the first test: there is no as-left before it")
    for index, visit in enumerate(visits):
        bases.append(base)
        if visit.could_not_test:
            left_out.append(LeftOut(index, visit.when, Break.COULD_NOT_TEST, visit.could_not_test))
            continue
        found_whole = visit.found is not None and visit.complete_found
        reason = why_none if base is None else _broken(visits[base], visit, interventions)
        if base is not None and reason is None:
            if found_whole:
                pairs.append(_pair(visits, base, index))
            else:
                words = "the as-found run is incomplete: a reading is missing, or is only a bound"
                left_out.append(LeftOut(index, visit.when, Break.INCOMPLETE_FOUND, words))
                if not visit.adjusted:
                    continue
        elif reason is not None:
            left_out.append(LeftOut(index, visit.when, *reason))
        whole = visit.complete_left if visit.adjusted else found_whole
        base = bases[-1] = index if whole else None
        if not whole:
            words = "was adjusted without a complete as-left" if visit.adjusted else "ended with an incomplete run"
            why_none = (Break.INCOMPLETE_LEFT, f"the test before {words}")
    return Pairing(tuple(visits), tuple(interventions), tuple(pairs), tuple(left_out), tuple(bases))


def _pair(visits: Sequence[Visit], start: int, end: int) -> Pair:
    before, after = visits[start], visits[end]
    left, found = before.after or {}, after.found or {}
    return Pair(
        start_index=start,
        end_index=end,
        start=before.when,
        end=after.when,
        years=(_day(after.when) - _day(before.when)).days / DAYS_PER_YEAR,
        differences={name: found[name] - left[name] for name in found if name in left},
        u_start=before.u_after,
        u_end=after.u_found,
    )


def cumulative_curve(pairing: Pairing, channel: str) -> tuple[Segment, ...]:
    """Add up the differences for drawing, starting again at every broken pair.

    Parameters
    ----------
    pairing : Pairing
        The pairs.
    channel : str
        Which channel.

    Returns
    -------
    tuple of Segment

    Notes
    -----
    This curve is for the eye only. Its points share their errors, so a line or a trend test laid
    through it claims far too much.
    """
    segments: list[Segment] = []
    indices: list[int] = []
    values: list[float] = []

    def close() -> None:
        if indices:
            days = tuple(pairing.visits[i].when for i in indices)
            segments.append(Segment(tuple(indices), days, tuple(values)))
        indices.clear()
        values.clear()

    for pair in pairing.pairs:
        step = pair.differences.get(channel)
        if step is None or step != step:
            continue
        if not indices or indices[-1] != pair.start_index:
            close()
            indices.append(pair.start_index)
            values.append(0.0)
        indices.append(pair.end_index)
        values.append(values[-1] + step)
    close()
    return tuple(segments)
