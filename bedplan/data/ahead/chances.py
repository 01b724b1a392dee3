"""How likely is each count, given its mean and its swing? Patients who come, or who are in beds that may run out."""

from __future__ import annotations

from functools import lru_cache
from typing import TYPE_CHECKING, Literal

import numpy as np
from scipy import special

if TYPE_CHECKING:
    from numpy.typing import NDArray

    Array = NDArray[np.float64]
    Whole = NDArray[np.int64]

# What patients of a full ward do: none is stopped, they go elsewhere, or they wait until there is a bed.
WhenFull = Literal["stays anyway", "leaves", "waits"]
ALMOST_POISSON = 1e-6
SWINGS = np.geomspace(0.02, 30.0, 96)  # variance ÷ mean; tables are kept for these, 8 % apart
CROWDING = np.concatenate((np.linspace(0.0, 1.5, 121)[1:], np.geomspace(1.55, 40.0, 30)))  # patients wanting ÷ beds


def at_most(mean: Array, swing: Array, top: int) -> Array:
    """How likely are at most 0, 1, … ``top``? ``mean`` and ``swing`` (variance ÷ mean) (d,) -> ``(d, top + 1)``.

    Poisson where swing is 1, negative binomial above it (a Poisson count whose rate is itself uncertain), binomial
    below it (booked patients).

    Source: Greenwood & Yule 1920 for the negative binomial.
    Checked by: tests/data/ahead/test_chances.py
    """
    counts = np.arange(top + 1.0)
    average, ratio = np.maximum(mean, 1e-9)[:, None], np.maximum(swing, SWINGS[0])[:, None]
    more, less = ratio > 1.0 + ALMOST_POISSON, ratio < 1.0 - ALMOST_POISSON
    result = special.gammaincc(counts + 1.0, average)
    if more.any():
        over = np.where(more, ratio, 2.0)
        result = np.where(more, special.betainc(average / (over - 1.0), counts + 1.0, 1.0 / over), result)
    if less.any():
        under = np.where(less, ratio, 0.5)
        trials = average / (1.0 - under)  # need not be whole: the binomial's sum is a beta integral
        within = special.betainc(np.maximum(trials - counts, 1e-12), counts + 1.0, under)
        result = np.where(less, np.where(counts < trials, within, 1.0), result)
    return result


def at_most_in_beds(mean: Array, swing: Array, beds: Whole, top: int, when_full: WhenFull) -> Array:
    """How likely are at most 0, 1, … ``top`` patients in ``beds`` (d,), if ``mean`` (d,) are in them on average?

    The demand behind is found so that the beds hold that mean. *Leaves*: the chances of so many wanting a bed, cut
    off at the beds (with Poisson arrivals exact, whatever the stays). *Waits*: everyone over the beds stands outside,
    so a full ward is as likely as that many or more wanting it. *Stays anyway*: beds stop nobody.

    Source: Erlang 1917 for *leaves*.
    Checked by: tests/data/ahead/test_chances.py
    """
    if when_full == "stays anyway":
        return at_most(mean, swing, top)
    result = np.ones((mean.size, top + 1))
    for limit, place, days in _alike(beds, swing):
        chances, carried, _ = _table(limit, place, when_full)
        at = np.interp(mean[days], carried, np.arange(carried.size))
        below = np.minimum(at.astype(int), carried.size - 2)
        share = (at - below)[:, None]
        shown = min(limit, top) + 1
        result[days, :shown] = (chances[below] * (1.0 - share) + chances[below + 1] * share)[:, :shown]
    return result


def variance_in_beds(mean: Array, swing: Array, beds: Whole, when_full: WhenFull) -> Array:
    """How far do patients in beds swing, as a variance, if beds may run out? ``(d,)``.

    Checked by: tests/data/ahead/test_chances.py
    """
    if when_full == "stays anyway":
        return mean * swing
    result = np.zeros(mean.size)
    for limit, place, days in _alike(beds, swing):
        _, carried, variances = _table(limit, place, when_full)
        result[days] = np.interp(mean[days], carried, variances)
    return result


def _alike(beds: Whole, swing: Array) -> list[tuple[int, int, Whole]]:
    """Return groups of days with the same beds and nearly the same swing: (beds, place among SWINGS, days)."""
    places = np.rint(np.interp(np.log(np.maximum(swing, SWINGS[0])), np.log(SWINGS), np.arange(SWINGS.size)))
    keys = beds * SWINGS.size + places.astype(np.int64)
    return [
        (int(key) // SWINGS.size, int(key) % SWINGS.size, np.flatnonzero(keys == key))
        for key in np.unique(keys)
        if key >= SWINGS.size
    ]


@lru_cache(maxsize=256)
def _table(limit: int, place: int, when_full: WhenFull) -> tuple[Array, Array, Array]:
    """Return, for a row of demands, the chances of at most 0 … limit, the mean in beds, and its variance."""
    wanted = CROWDING * limit
    chances = at_most(wanted, np.full(wanted.size, SWINGS[place]), limit)
    if when_full == "leaves":
        chances = chances / np.maximum(chances[:, -1:], 1e-300)
    chances[:, -1] = 1.0
    more = 1.0 - chances[:, :-1]
    mean = more.sum(axis=1)
    square = more @ (2.0 * np.arange(limit) + 1.0)
    start = np.zeros((1, limit + 1)) + 1.0  # an empty ward
    return np.vstack([start, chances]), np.append(0.0, mean), np.append(0.0, square - mean**2)


def count_at(chances: Array, share: float) -> Whole:
    """Which count is not passed with this chance? The fewest whose chance of at most reaches ``share``: ``(d,)``."""
    return (chances < share - 1e-12).sum(axis=1)


def share_within(chances: Array, counts: Whole, level: float) -> Array:
    """Did each count fall into the middle ``level`` of its chances? 1, 0, or a part for a count on the edge: ``(d,)``.

    Whole numbers can't cut a band at exactly 10 %: the count on the edge has chances on both sides of it, and counts
    as inside by the part that lies inside. If the chances are right, the mean of this is ``level``, exactly.

    Source: Czado, Gneiting & Held 2009, Biometrics 65(4): the non-randomised transform of counts.
    Checked by: tests/data/ahead/test_chances.py
    """
    low, high = share_below(chances, counts)
    width = high - low
    inside = np.minimum(high, (1.0 + level) / 2.0) - np.maximum(low, (1.0 - level) / 2.0)
    return np.where(width > 1e-12, np.clip(inside, 0.0, None) / np.where(width > 1e-12, width, 1.0), 0.0)


def share_above(chances: Array, counts: Whole, share: float) -> Array:
    """Did each count lie above what its chances keep within with this share? 1, 0, or a part on the edge: ``(d,)``.

    If the chances are right, the mean of this is 1 − ``share``, exactly.

    Checked by: tests/data/ahead/test_chances.py
    """
    low, high = share_below(chances, counts)
    width = high - low
    above = np.clip(high - np.maximum(low, share), 0.0, None)
    return np.where(width > 1e-12, above / np.where(width > 1e-12, width, 1.0), (high > share).astype(float))


def share_below(chances: Array, counts: Whole) -> tuple[Array, Array]:
    """How likely was a smaller count, and how likely this one or a smaller? Two ``(d,)``."""
    days, last = np.arange(counts.size), chances.shape[1] - 1
    below = np.where(counts > 0, chances[days, np.clip(counts - 1, 0, last)], 0.0)
    return below, np.where(counts > last, below, chances[days, np.clip(counts, 0, last)])


def ranked_score(chances: Array, counts: Whole) -> float:
    """How far are these chances from what happened, in counts? Mean continuous ranked probability score; 0 is perfect.

    A single number told as certain scores its absolute error, so the two can be compared.

    Source: Gneiting & Raftery 2007, Journal of the American Statistical Association 102(477).
    Checked by: tests/data/ahead/test_chances.py
    """
    happened = np.arange(chances.shape[1]) >= counts[:, None]
    return float(((chances - happened) ** 2).sum(axis=1).mean())
