"""Chance for the demo: uniform numbers from one named generator, and what is made of them.

Everything here is plain double arithmetic (add, subtract, multiply, divide, square root),
which every machine rounds alike. The mathematics library of the machine is not asked for
exp or log, whose last digit differs from one library to the next: a demo file must come
out byte for byte the same wherever it is written.
"""

from bisect import bisect_right
from collections.abc import Iterator, Sequence
from math import frexp, ldexp, sqrt

from numpy.random import PCG64

LOG_2 = 0.6931471805599453
SQUARE_ROOT_OF_HALF = 0.7071067811865476
TERMS_OF_LOG = 24
TERMS_OF_EXP = 18
CHUNK = 65536

# Wichura 1988, "Algorithm AS 241: The percentage points of the normal distribution", Applied
# Statistics 37(3), 477-484, routine PPND16: numerator and denominator for the middle, the
# near tail and the far tail, lowest power first.
MIDDLE = (
    (
        3.3871328727963666080e0,
        1.3314166789178437745e2,
        1.9715909503065514427e3,
        1.3731693765509461125e4,
        4.5921953931549871457e4,
        6.7265770927008700853e4,
        3.3430575583588128105e4,
        2.5090809287301226727e3,
    ),
    (
        1.0,
        4.2313330701600911252e1,
        6.8718700749205790830e2,
        5.3941960214247511077e3,
        2.1213794301586595867e4,
        3.9307895800092710610e4,
        2.8729085735721942674e4,
        5.2264952788528545610e3,
    ),
)
NEAR_TAIL = (
    (
        1.42343711074968357734e0,
        4.63033784615654529590e0,
        5.76949722146069140550e0,
        3.64784832476320460504e0,
        1.27045825245236838258e0,
        2.41780725177450611770e-1,
        2.27238449892691845833e-2,
        7.74545014278341407640e-4,
    ),
    (
        1.0,
        2.05319162663775882187e0,
        1.67638483018380384940e0,
        6.89767334985100004550e-1,
        1.48103976427480074590e-1,
        1.51986665636164571966e-2,
        5.47593808499534494600e-4,
        1.05075007164441684324e-9,
    ),
)
FAR_TAIL = (
    (
        6.65790464350110377720e0,
        5.46378491116411436990e0,
        1.78482653991729133580e0,
        2.96560571828504891230e-1,
        2.65321895265761230930e-2,
        1.24266094738807843860e-3,
        2.71155556874348757815e-5,
        2.01033439929228813265e-7,
    ),
    (
        1.0,
        5.99832206555887937690e-1,
        1.36929880922735805310e-1,
        1.48753612908506148525e-2,
        7.86869131145613259100e-4,
        1.84631831751005468180e-5,
        1.42151175831644588870e-7,
        2.04426310338993978564e-15,
    ),
)


def uniforms(seed: int) -> Iterator[float]:
    """Which chances does this seed give, one after the other, for ever?

    Strictly between 0 and 1. They are the top 52 bits of numpy's PCG64, whose raw stream
    numpy keeps the same from version to version; the derived streams of its Generator may
    change, so they are not used.

    Source: O'Neill 2014, "PCG: a family of simple fast space-efficient statistically good
    algorithms for random number generation".
    Checked by: tests/demo_data/test_draws.py
    """
    generator = PCG64(seed)
    while True:
        for raw in generator.random_raw(CHUNK).tolist():
            yield ((raw >> 12) + 0.5) * 2.0**-52


def natural_log(value: float) -> float:
    """What is the natural logarithm of a positive value, the same on every machine?

    Source: the series of the inverse hyperbolic tangent, ln m = 2 artanh((m-1)/(m+1)).
    Checked by: tests/demo_data/test_draws.py
    """
    mantissa, exponent = frexp(value)
    if mantissa < SQUARE_ROOT_OF_HALF:
        mantissa, exponent = 2.0 * mantissa, exponent - 1
    ratio = (mantissa - 1.0) / (mantissa + 1.0)
    square, total = ratio * ratio, 0.0
    for term in range(TERMS_OF_LOG, -1, -1):
        total = total * square + 1.0 / (2 * term + 1)
    return exponent * LOG_2 + 2.0 * ratio * total


def exponential(value: float) -> float:
    """What is e to this power, the same on every machine?

    Source: Taylor's series after taking out whole powers of two.
    Checked by: tests/demo_data/test_draws.py
    """
    powers_of_two = round(value / LOG_2)
    rest = value - powers_of_two * LOG_2
    total = 1.0
    for term in range(TERMS_OF_EXP, 0, -1):
        total = 1.0 + total * rest / term
    return ldexp(total, powers_of_two)


def _ratio(polynomials: tuple[Sequence[float], Sequence[float]], value: float) -> float:
    """Return numerator over denominator at `value`, by Horner's rule."""
    top = bottom = 0.0
    for above, below in zip(reversed(polynomials[0]), reversed(polynomials[1]), strict=True):
        top, bottom = top * value + above, bottom * value + below
    return top / bottom


def normal_quantile(chance: float) -> float:
    """Below which value does a standard normal quantity stay with this chance (0 < chance < 1)?

    Source: Wichura 1988, algorithm AS 241, Applied Statistics 37(3), 477-484.
    Checked by: tests/demo_data/test_draws.py
    """
    from_middle = chance - 0.5
    if abs(from_middle) <= 0.425:
        return from_middle * _ratio(MIDDLE, 0.180625 - from_middle * from_middle)
    tail = sqrt(-natural_log(min(chance, 1.0 - chance)))
    size = _ratio(NEAR_TAIL, tail - 1.6) if tail <= 5.0 else _ratio(FAR_TAIL, tail - 5.0)
    return size if from_middle > 0.0 else -size


def lognormal_quantile(chance: float, mean: float, variation: float) -> float:
    """Below which value does a lognormal quantity of this mean and variation stay?

    `variation` is the standard deviation over the mean, above 0.

    Source: Johnson, Kotz & Balakrishnan 1994, Continuous Univariate Distributions 1, ch. 14:
    sigma^2 = ln(1 + variation^2), mu = ln mean - sigma^2 / 2.
    Checked by: tests/demo_data/test_draws.py
    """
    spread = natural_log(1.0 + variation * variation)
    return exponential(
        natural_log(mean) - spread / 2.0 + sqrt(spread) * normal_quantile(chance),
    )


def poisson_quantile(chance: float, mean: float) -> int:
    """How many come, when this many come on average and chance stands here?

    The fewest n with P(at most n) above `chance`; `mean` up to about 700.

    Source: Devroye 1986, Non-Uniform Random Variate Generation, ch. X.3: inversion by
    sequential search.
    Checked by: tests/demo_data/test_draws.py
    """
    term = exponential(-mean)
    total, count = term, 0
    while chance > total and term > 0.0:
        count += 1
        term *= mean / count
        total += term
    return count


def running_shares(shares: Sequence[float]) -> tuple[float, ...]:
    """Where does each share end, when they are laid end to end from 0 to 1?

    Checked by: tests/demo_data/test_draws.py
    """
    whole, total, ends = sum(shares), 0.0, []
    for share in shares:
        total += share
        ends.append(total / whole)
    ends[-1] = 1.0
    return tuple(ends)


def pick(chance: float, ends: Sequence[float]) -> int:
    """Which of these running shares does this chance fall on?

    Checked by: tests/demo_data/test_draws.py
    """
    return bisect_right(ends, chance)


def minute_of_day(chance: float, ends: Sequence[float]) -> int:
    """At which minute of the day, given the running shares of its 24 hours?

    Hours by their share, minutes evenly within the hour: 0 to 1439.

    Checked by: tests/demo_data/test_draws.py
    """
    hour = pick(chance, ends)
    before = ends[hour - 1] if hour else 0.0
    return hour * 60 + min(59, int(60.0 * (chance - before) / (ends[hour] - before)))
