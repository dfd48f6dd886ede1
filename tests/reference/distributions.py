"""Reference values of the distributions at exact double arguments, by mpmath with 360 digits.

Each incomplete beta or gamma function is summed as an all-positive series (DLMF 8.17.8 with 15.8.1,
and 8.7.1); the other tail is its complement, which at 360 digits keeps 60 of them down to 1e-300.
Where the shape parameters are small, mpmath's own betainc and gammainc are compared, and the script
stops if they differ. Quantiles: for the double p nearest to P(x), x corrected by one Newton step,
whose remainder is of the order of 1e-30.

Usage: python3 distributions.py > distributions.json
"""

import json
import math
import sys

import mpmath
from mpmath import mp, mpf

mp.dps = 360


def beta_lower_series(a, b, x, y):
    """I_x(a, b); few terms unless x is close to 1."""
    log_power = a * mp.log(x) + b * mp.log(y) - (
        mp.loggamma(a) + mp.loggamma(b) - mp.loggamma(a + b)
    )
    term = total = mpf(1)
    n = 0
    while term > total * mpf(10) ** (-mp.dps):
        term *= (a + b + n) / (a + 1 + n) * x
        total += term
        n += 1
    return mp.exp(log_power) * total / a


def beta_tails(a, b, x, y):
    """Both tails; the argument y = 1 - x comes separately so that neither is rounded."""
    if (a * y >= b * x and x < 0.9) or y > 0.9:
        lower = beta_lower_series(a, b, x, y)
        tails = lower, 1 - lower
    else:
        upper = beta_lower_series(b, a, y, x)
        tails = 1 - upper, upper
    if max(a, b) < 50 and min(tails) > mpf(10) ** -20:
        own = mp.betainc(a, b, 0, x, regularized=True)
        if abs(own / tails[0] - 1) > mpf(10) ** -25:
            sys.exit(f"mpmath disagrees at {a} {b} {x}: {own} {tails}")
    return tails


def gamma_tails(a, x):
    term = total = 1 / a
    n = 0
    while term > total * mpf(10) ** (-mp.dps):
        n += 1
        term *= x / (a + n)
        total += term
    lower = mp.exp(a * mp.log(x) - x - mp.loggamma(a)) * total
    if a < 50 and min(lower, 1 - lower) > mpf(10) ** -20:
        own = mp.gammainc(a, 0, x, regularized=True)
        if abs(own / lower - 1) > mpf(10) ** -25:
            sys.exit(f"mpmath disagrees at {a} {x}: {own} {lower}")
    return lower, 1 - lower


def text(value):
    return mpmath.nstr(value, 25, min_fixed=0, max_fixed=0)


SMALLEST = mpf(10) ** -300


def inverse(p_exact, x, density):
    """The quantile of the double nearest to p, near x."""
    p = float(p_exact)
    if not 1e-300 <= p < 1:
        return None
    return {"p": p, "x": text(x + (mpf(p) - p_exact) / density)}


def point(arguments, lower, upper, x, density):
    entry = {**arguments, "lower": text(lower), "upper": text(upper)}
    if lower >= SMALLEST and lower < mpf("0.999"):
        entry["lowerQuantile"] = inverse(lower, x, density)
    if upper >= SMALLEST and upper < mpf("0.999"):
        entry["upperQuantile"] = inverse(upper, x, -density)
    return entry


def student_t():
    points = []
    for nu in (1, 1.5, 2, 3, 5, 10, 30.7, 100, 1000, 12345.6, 1e5, 1e6):
        grid = [1e-12, 1e-5, 0.01, 0.1, 0.5, 0.9, 1.0, 1.1, 1.7, 2.3, 3, 4.2, 6, 8.5, 13, 20, 28]
        grid += [36.5, 50, 100, 1e3, 1e5, 1e8, 1e12, 1e30, 1e60, 1e100, 1e150, 1e200, 1e290]
        for t in grid:
            r = mpf(t) ** 2 / mpf(nu)
            x, y = r / (1 + r), 1 / (1 + r)
            a, b = mpf(1) / 2, mpf(nu) / 2
            inside, outside = beta_tails(a, b, x, y)
            lower, upper = (1 + inside) / 2, outside / 2
            if upper < SMALLEST:
                break
            log_density = mp.loggamma((mpf(nu) + 1) / 2) - mp.loggamma(b)
            log_density -= mp.log(mp.pi * nu) / 2 + (mpf(nu) + 1) / 2 * mp.log1p(r)
            points.append(point({"t": t, "df": nu}, lower, upper, mpf(t), mp.exp(log_density)))
    return points


def fisher_f():
    points = []
    pairs = [(1, 1), (1, 5), (2, 7), (3, 40), (1.62, 24.3), (5, 2), (10, 10), (4, 1000)]
    pairs += [(50, 200), (1000, 3), (1000, 1000), (3, 1e6), (1e5, 1e5), (1e6, 1), (1e6, 1e6)]
    for first, second in pairs:
        for f in (1e-30, 1e-10, 1e-4, 0.02, 0.3, 0.8, 0.95, 0.995, 0.9999, 1.0, 1.0001, 1.003,
                  1.05, 1.4, 2.2, 3.9, 7.1, 15, 40, 200, 1500, 1e5, 1e8, 1e15, 1e25, 1e60, 1e150):
            a, b = mpf(first) / 2, mpf(second) / 2
            r = mpf(first) / mpf(second) * mpf(f)
            x, y = r / (1 + r), 1 / (1 + r)
            mean_distance = abs(a * y - b * x) ** 2 / (x * y * (a + b))
            if mean_distance > 3000 and min(a, b) > 10:
                continue
            lower, upper = beta_tails(a, b, x, y)
            if lower < SMALLEST or upper < SMALLEST:
                continue
            log_density = a * mp.log(x) + b * mp.log(y) - mp.log(mpf(f))
            log_density -= mp.loggamma(a) + mp.loggamma(b) - mp.loggamma(a + b)
            arguments = {"f": f, "df1": first, "df2": second}
            points.append(point(arguments, lower, upper, mpf(f), mp.exp(log_density)))
    return points


def chi_square():
    points = []
    for nu in (1, 1.5, 2, 3, 5, 10, 44.4, 300, 10000, 1e5, 1e6):
        spread = math.sqrt(2 * nu)
        grid = [nu + k * spread for k in (-36, -20, -8, -3, -1, -0.1, 0, 0.1, 1, 3, 8, 20, 36)]
        grid += [nu * k for k in (1e-200, 1e-40, 1e-8, 1e-3, 0.1, 0.5, 2, 5, 20, 100, 300, 1000)]
        for x in sorted(set(grid)):
            if x <= 0 or abs(x - nu) > 40 * spread and nu > 1000:
                continue
            lower, upper = gamma_tails(mpf(nu) / 2, mpf(x) / 2)
            if lower < SMALLEST or upper < SMALLEST:
                continue
            half = mpf(nu) / 2
            log_density = half * mp.log(mpf(x) / 2) - mpf(x) / 2 - mp.loggamma(half) - mp.log(mpf(x))
            points.append(point({"x": x, "df": nu}, lower, upper, mpf(x), mp.exp(log_density)))
    return points


def normal():
    points = []
    for z in (1e-15, 1e-6, 0.01, 0.3, 0.6744897501960817, 1.0, 1.4, 1.41, 1.42, 1.959963984540054,
              2.5, 3.3, 5, 8, 12.5, 20, 27, 33, 37):
        upper = mp.erfc(mpf(z) / mp.sqrt(2)) / 2
        points.append(point({"z": z}, 1 - upper, upper, mpf(z), mp.npdf(mpf(z))))
    return points


def gamma_and_beta():
    grid = (1e-3, 0.1, 0.5, 1.5, 2.7, 3, 7.25, 9.99, 10, 33, 250.5, 1e4, 5e5, 1e9)
    return {
        "logGamma": [{"z": z, "value": text(mp.loggamma(mpf(z)))} for z in grid],
        "logBeta": [
            {"a": a, "b": b,
             "value": text(mp.loggamma(mpf(a)) + mp.loggamma(mpf(b)) - mp.loggamma(mpf(a) + mpf(b)))}
            for a in grid for b in grid if a <= b
        ],
    }


json.dump(
    {
        "generator": "distributions.py",
        "versions": {"python": sys.version.split()[0], "mpmath": mpmath.__version__},
        "digits": mp.dps,
        "studentT": student_t(),
        "fisherF": fisher_f(),
        "chiSquare": chi_square(),
        "normal": normal(),
        **gamma_and_beta(),
    },
    sys.stdout,
    indent=1,
)
