"""Reference values for fit/tail and fit/pretest to 20 digits, with mpmath: python3 .ci/reference/choosing.py (about ten minutes).

It writes testdata/choosing/values.json and shares no path with the Go code. Tails are areas under densities in closed form: the noncentral F
density holds a confluent hypergeometric function 1F1, the noncentral chi-square density 0F1 (both from the Poisson mixture summed by hand),
where the Go code sums probabilities. Coverage conditions on the estimate of the focal coefficient in the long model, where the Go code conditions
on the other one. Quantiles are roots of these areas.
"""
import json, os, platform
import mpmath
from mpmath import mp, mpf

mp.dps = 34
INF = mpf("inf")
HERE = os.path.join(os.path.dirname(__file__), "..", "..", "testdata", "choosing")


def area(f, lo, hi, centre, width):
    """The integral of f from lo to hi, in panels that are short about the centre. f is scaled to 1 there: mp.quad stops at an absolute error."""
    steps = [-40, -25, -16, -10, -6, -4, -2, -1, 0, 1, 2, 4, 6, 10, 16, 25, 40, 60]
    cuts = sorted({lo, hi} | {c for c in (centre + k * width for k in steps) if lo < c < hi})
    top = f(min(max(centre, lo), hi))
    return top * mp.fsum(mp.quad(lambda u: f(u) / top, [a, b]) for a, b in zip(cuts, cuts[1:]))


def kummer(a, b, z):
    """1F1(a; b; z), z >= 0: the library's, or for a large a, where it is slow, its series, whose terms are positive."""
    if a < 10 ** 4:
        return mp.hyp1f1(a, b, z)
    term = total = mpf(1)
    k = 0
    while term > mpf(10) ** -40 * total:
        term *= (a + k) * z / ((b + k) * (k + 1))
        total += term
        k += 1
    return total


def noncentral_f(x, q, df, ncp):
    """P(F > x)."""
    x, q, df, ncp = mpf(x), mpf(q), mpf(df), mpf(ncp)
    b, l = q / 2, ncp / 2
    if df == INF:
        m = q * x / 2
        g = lambda s: mp.exp(-l - s) * s ** (b - 1) / mp.gamma(b) * mp.hyp0f1(b, l * s)
        sd = mp.sqrt(b + 2 * l)
        lower = m < b + l - 3 * sd
        # From m on; the density falls at least like a normal one beyond the mean, so 80 standard deviations and a margin hold all of it.
        if lower:
            return 1 - area(g, mpf(0), m, b + l, sd)
        start = max(m, b + l)
        return area(g, m, start + 80 * sd + 200, start, sd / (1 + (start - b - l) / sd))
    # F = df s / (q (1 - s)), s in (0, 1); in v = ln(F) the density is smooth whatever df is.
    a = df / 2
    norm = mp.loggamma(a + b) - mp.loggamma(a) - mp.loggamma(b) - l

    def g(v):
        o = q * mp.exp(v) / df  # s = o / (1 + o)
        return mp.exp(norm + b * mp.log(o) - (a + b) * mp.log1p(o)) * kummer(a + b, b, l * o / (1 + o))

    v = mp.log(x)
    mean = mp.log(1 + ncp / q)
    sd = mp.sqrt(2 / df + (2 * q + 4 * ncp) / (q + ncp) ** 2)
    start = max(v, mean)
    # The rate at which the density falls at the start sets the width of the panels beyond it.
    rate = -mp.diff(lambda u: mp.log(g(u)), start) if start > mean else mpf(0)
    width = min(sd, 1 / rate) if rate > 0 else sd
    end = start + 4 * width
    while g(end) > mpf(10) ** -40 * g(start):
        end += 4 * width
    if v < mean - 3 * sd and q > 1:
        lo = v
        while g(lo) > mpf(10) ** -40:
            lo -= sd
        return 1 - area(g, lo, v, mean, sd)
    return area(g, v, end, start, width)


def quantile(p, q, df, ncp):
    p = mpf(p)
    f = lambda v: mp.log(noncentral_f(mp.exp(v), q, df, ncp)) - mp.log(p)
    lo = mp.log(1 + mpf(ncp) / q)
    a, b = lo, lo + mpf("0.5")
    mp.dps, keep = 26, mp.dps
    root = mp.findroot(f, (a, b), solver="secant", tol=mpf(10) ** -42)
    mp.dps = keep
    return mp.exp(root)


def coverage(r, delta, cut, level):
    """z: the error of the focal estimate over its standard error, long model; t given z is normal with mean delta - r z, variance 1 - r^2."""
    r, delta, cut, level = abs(mpf(r)), mpf(delta), mpf(cut), mpf(level)
    c = mp.sqrt(2) * mp.erfinv(level)
    s = mp.sqrt(1 - r * r)
    inside = lambda z, t: mp.ncdf((t - delta + r * z) / s)  # P(t2 < t | z)
    kept = lambda z: mp.npdf(z) * (1 - inside(z, cut) + inside(z, -cut))

    def dropped(z):  # z + r t2 within c s, and t2 within the cut
        lo, hi = max(-cut, (-c * s - z) / r), min(cut, (c * s - z) / r)
        return mp.npdf(z) * (inside(z, hi) - inside(z, lo)) if hi > lo else mpf(0)

    h = s / r
    marks = lambda lo, hi, more: sorted({lo, hi} | {mpf(k) for k in range(-14, 15) if lo < k < hi} | {m for m in more if lo < m < hi})
    steps = (-12, -8, -5, -3, -1, 0, 1, 3, 5, 8, 12)
    turns = [(delta - t) / r + k * h for t in (cut, -cut) for k in steps]
    corners = [e * c * s - r * t for e in (-1, 1) for t in (cut, -cut)]
    centre = [-r * delta + k * s for k in steps]
    total = mpf(0)
    for f, lo, hi, more in ((kept, -c, c, turns), (dropped, mpf(-14), mpf(14), turns + corners + centre)):
        cuts = marks(lo, hi, more)
        total += mp.fsum(mp.quad(f, [a, b]) for a, b in zip(cuts, cuts[1:]))
    return total


def worst(r, cut, level, start):
    """The minimum over delta near start: the root of the slope, by differences of coverage. An error of 1e-8 in delta moves the minimum by 1e-16."""
    mp.dps, keep = 24, mp.dps
    f = lambda d: coverage(r, d, cut, level)
    h = mpf("1e-5")
    at = mp.findroot(lambda d: (f(d + h) - f(d - h)) / (2 * h), (mpf(start), mpf(start) * mpf("1.02")), solver="secant", tol=mpf(10) ** -21, verify=False)
    v = f(at)
    mp.dps = keep
    return v, at


def text(v):
    print(mp.nstr(v, 20), flush=True)
    return mp.nstr(v, 20)


def main():
    out = {"library": f"mpmath {mpmath.__version__}, Python {platform.python_version()}", "command": "python3 .ci/reference/choosing.py"}
    out["normal"] = [{"z": z, "below": text(mp.ncdf(mpf(z)))} for z in (-37, -20.3, -8, -3.1, -1, 0.25, 2)]
    mp.dps = 340
    near = lambda p: mp.findroot(lambda z: mp.log(mp.ncdf(z)) - mp.log(mpf(p)), -mp.sqrt(-2 * mp.log(mpf(p))) + mpf("0.1"))
    exact = {p: mpf(float(p)) for p in ("1e-300", "1e-40", "1e-17", "1e-9", "0.0001", "0.025", "0.3", "0.45", "0.6", "0.999")}
    out["normalQuantile"] = []
    for p, v in exact.items():  # the quantile of the float64, so that its digits are not those of the rounding of p
        mp.dps = 340 if v < mpf("1e-30") else 60
        z = near(v) if v < mpf("0.02") else mp.sqrt(2) * mp.erfinv(2 * v - 1)
        mp.dps = 34
        out["normalQuantile"].append({"p": float(p), "z": text(+z)})
    out["central"] = []
    for q, df, xs in ((1, 5, (0.3, 4, 900)), (3, 60, (0.2, 2.5, 90)), (20, 1000, (0.5, 1.5, 12)), (1, 1e5, (0.5, 4, 40)), (2, 2e7, (0.7, 3, 200)),
                      (7, 2e7, (0.7, 3, 60)), (4, 1e12, (0.5, 2.4, 30)), (4, "inf", (0.5, 2.4, 30)), (200, 3e6, (0.9, 1.2, 3)), (0.7, 3.3, (0.1, 2.5, 80))):
        for x in xs:
            out["central"].append({"x": x, "q": q, "df": df, "above": text(noncentral_f(x, q, df, 0))})
    out["noncentral"] = []
    for x, q, df, ncp in (
        (3, 1, 10, 1), (9.2858, 1, 10, 1), (0.05, 1, 10, 1), (0.5, 3, 20, 3), (40, 2, 60, 2), (800, 2, 60, 2), (4.3211, 2, "inf", 1), (60, 2, "inf", 1),
        (0.5, 5, "inf", 5), (2, 5, 2e7, 4), (1.2, 10, 1e9, 30), (9, 10, 1e9, 30), (2.5, 0.7, 3.3, 1.4), (1.5, 40, 80, 40), (30, 4, 25, 90),
        (9500, 1, 50, 1e4), (12000, 1, 500, 1e4), (15000, 1, "inf", 1e4), (9700, 1, "inf", 1e4), (11000, 1, "inf", 1e4), (45, 20, 200, 1e3),
        (60, 20, 200, 1e3), (150, 20, 200, 1e3), (52, 20, 1e5, 300), (334000, 3, "inf", 1e6),
    ):
        out["noncentral"].append({"x": x, "q": q, "df": df, "ncp": ncp, "above": text(noncentral_f(x, q, df, ncp))})
    out["quantile"] = []
    for df in (10, 20, 30, 60, 120, "inf"):
        for q, ncp in ((1, 0), (1, 1), (2, 0), (2, 1), (2, 2), (3, 1), (3, 3)):
            out["quantile"].append({"p": 0.05, "q": q, "df": df, "ncp": ncp, "x": text(quantile(mpf(0.05), q, df, ncp))})
    for p, q, df, ncp in ((0.01, 1, 25, 1), (0.1, 6, 40, 6), (0.5, 3, 12, 3), (0.95, 4, 30, 1), (1e-12, 2, 100, 2), (0.05, 12, 2e7, 12), (0.05, 40, 500, 300)):
        out["quantile"].append({"p": p, "q": q, "df": df, "ncp": ncp, "x": text(quantile(mpf(p), q, df, ncp))})
    out["coverage"] = []
    for r, delta, cut, level in (
        (0.5, 0, 1.96, 0.95), (0.5, 1.5, 1.96, 0.95), (0.9, 0.7, 1.96, 0.95), (0.9, 3, 1.96, 0.95), (0.9, 5, 1.96, 0.95), (0.99, 0.3, 1.96, 0.95),
        (0.999, 0.1, 1.96, 0.95), (0.99, 2.5, 1, 0.99), (0.7, 2, 1, 0.9), (0.2, 1, 3, 0.5), (0.95, 4, 5, 0.95), (0.99999, 0.01, 1.5, 0.95),
    ):
        out["coverage"].append({"r": r, "delta": delta, "cut": cut, "level": level, "covered": text(coverage(r, delta, cut, level))})
    out["worst"] = []
    for r, cut, level, start in ((0.5, 1.96, 0.95, 1.7), (0.7, 1.96, 0.95, 1.6), (0.8, 1.96, 0.95, 1.5), (0.9, 1.96, 0.95, 1.2), (0.95, 1.96, 0.95, 0.9),
                                 (0.99, 1.96, 0.95, 0.5), (0.9, 1, 0.95, 1), (0.6, 3, 0.99, 2.9)):
        v, at = worst(r, cut, level, start)
        out["worst"].append({"r": r, "cut": cut, "level": level, "covered": text(v), "delta": mp.nstr(at, 9)})
    os.makedirs(HERE, exist_ok=True)
    with open(os.path.join(HERE, "values.json"), "w") as f:
        json.dump(out, f, indent=1)
        f.write("\n")


if __name__ == "__main__":
    main()
