"""The strongest plain rival: numpy on fold cross-products, the same folds and alternatives (as-is, every drop, ridge over 101 penalties and every number
of components, tuned inside each training set). It reads arrays, not text, so that only arithmetic is timed.

    /usr/bin/python3 rival.py ROWS COLUMNS ARRAYS.npy FOLDS

prints seconds and the out-of-sample errors of as-is, ridge and components. With one more argument, a number of resamples, it draws rows (up to
10,000 of them) or a thousand groups of rows, dealt at random within folds, and learns the same alternatives in each, tuning chosen again; it prints
the seconds for these and the standard deviation of the first slope.
"""
import json, sys, time
import numpy as np


def moments(z):
    return len(z), z.sum(axis=0), z.T @ z


def centred(m):
    n, s, c = m
    mean = s / n
    return n, mean, c - np.outer(s, mean)


def spectrum(m):
    n, mean, c = centred(m)
    d = np.sqrt(np.diag(c)[:-1])
    r = c[:-1, :-1] / np.outer(d, d)
    lam, v = np.linalg.eigh(r)
    lam, v = lam[::-1], v[:, ::-1]
    return mean, d, lam, v, v.T @ (c[:-1, -1] / d)


def errors(m, sp, weights):
    """Squared errors of many fits on held-out moments m: weights is count x p on the components."""
    n, s, c = m
    mean, d, lam, v, u = sp
    h = c - np.outer(mean, s) - np.outer(s, mean) + n * np.outer(mean, mean)
    t = v / d[:, None]
    g, r = t.T @ h[:-1, :-1] @ t, t.T @ h[:-1, -1]
    b = weights * u
    return h[-1, -1] - 2 * b @ r + np.einsum("ij,ij->i", b @ g, b)


def pieces(z, fold):
    """Rows or groups of rows, in order of their folds: [1 z] products flattened, and where each fold begins."""
    n, q = z.shape
    rng = np.random.default_rng(1)
    if n <= 10000:
        order = np.argsort(fold, kind="stable")
        return z[order], None, np.searchsorted(fold[order], np.arange(11))
    unit = np.empty(n, dtype=np.int64)
    for f in range(10):
        rows = rng.permutation(np.flatnonzero(fold == f))
        unit[rows] = f * 100 + np.arange(len(rows)) % 100
    order = np.argsort(unit, kind="stable")
    edges = np.searchsorted(unit[order], np.arange(1001))
    sums = np.empty((1000, 1 + q + q * q))
    for g in range(1000):
        part = z[order[edges[g] : edges[g + 1]]]
        sums[g, 0], sums[g, 1 : 1 + q], sums[g, 1 + q :] = len(part), part.sum(axis=0), (part.T @ part).ravel()
    return None, sums, np.arange(0, 1001, 100)


def resample(z, fold, grid, count):
    n, q = z.shape
    p = q - 1
    counts = np.arange(p + 1)
    rng = np.random.default_rng(2)
    rows, sums, edges = pieces(z, fold)
    units = len(rows) if sums is None else len(sums)
    first = []
    start = time.perf_counter()
    for _ in range(count):
        w = np.bincount(rng.integers(0, units, units), minlength=units).astype(float)
        part = []
        for f in range(10):
            a, b = edges[f], edges[f + 1]
            if sums is None:
                x, v = rows[a:b], w[a:b]
                part.append((v.sum(), v @ x, x.T @ (x * v[:, None])))
            else:
                m = w[a:b] @ sums[a:b]
                part.append((m[0], m[1 : 1 + q], m[1 + q :].reshape(q, q)))
        total = tuple(sum(m[i] for m in part) for i in range(3))
        ridge = comps = 0.0
        for f in range(10):
            sp = spectrum(tuple(x - y for x, y in zip(total, part[f])))
            ridge = ridge + errors(part[f], sp, 1 / (sp[2] + grid[:, None]))
            comps = comps + errors(part[f], sp, (np.arange(p) < counts[:, None]) / sp[2])
        mean, d, lam, v, u = spectrum(total)
        k, m = grid[np.argmin(ridge)], np.argmin(comps)
        v @ (u / (lam + k)) / d
        v[:, :m] @ (u[:m] / lam[:m]) / d
        c = centred(total)[2]
        first.append((v @ (u / lam) / d)[0])
        inverse = np.linalg.inv(c[:-1, :-1])
        b = inverse @ c[:-1, -1]
        b - inverse * (b / np.diag(inverse))  # all drops at once
    return time.perf_counter() - start, float(np.std(first, ddof=1))


def main():
    n, p = int(sys.argv[1]), int(sys.argv[2])
    z = np.load(sys.argv[3], mmap_mode="r")
    folds = np.fromfile(sys.argv[4], dtype=np.uint8).reshape(5, n)
    start = time.perf_counter()
    z = np.column_stack([z[:, 1:], z[:, 0]])  # y last
    z = z - z[0]
    parts = [[moments(z[f == k]) for k in range(10)] for f in folds]
    total = tuple(sum(parts[0][k][i] for k in range(10)) for i in range(3))
    sub = lambda a, b: tuple(x - y for x, y in zip(a, b))
    lam = spectrum(total)[2]
    grid = np.concatenate([[0.0], np.exp(np.linspace(np.log(max(1e-10, 1e-3 * lam[-1])), np.log(10 * lam[0]), 100))])
    counts = np.arange(p + 1)
    ridge = lambda lam: 1 / (lam + grid[:, None])
    comps = lambda lam: (np.arange(p) < counts[:, None]) / lam
    sse = dict.fromkeys(["as-is", "ridge", "components"], 0.0)
    drops = np.zeros(p)
    for part in parts:
        for f in range(10):
            train = sub(total, part[f])
            inner = {"ridge": 0.0, "components": 0.0}
            for g in range(10):
                if g != f:
                    sp = spectrum(sub(train, part[g]))
                    inner["ridge"] = inner["ridge"] + errors(part[g], sp, ridge(sp[2]))
                    inner["components"] = inner["components"] + errors(part[g], sp, comps(sp[2]))
            sp = spectrum(train)
            sse["as-is"] += errors(part[f], sp, 1 / sp[2][None, :])[0]
            sse["ridge"] += errors(part[f], sp, ridge(sp[2]))[np.argmin(inner["ridge"])]
            sse["components"] += errors(part[f], sp, comps(sp[2]))[np.argmin(inner["components"])]
            _, mean, c = centred(train)
            for j in range(p):
                keep = [i for i in range(p) if i != j]
                b = np.zeros(p)
                b[keep] = np.linalg.solve(c[np.ix_(keep, keep)], c[keep, -1])
                m = part[f]
                h = m[2] - np.outer(mean, m[1]) - np.outer(m[1], mean) + m[0] * np.outer(mean, mean)
                drops[j] += h[-1, -1] - 2 * b @ h[:-1, -1] + b @ h[:-1, :-1] @ b
    seconds = time.perf_counter() - start
    extra = {}
    if len(sys.argv) > 5:
        took, spread = resample(z - z.mean(axis=0), folds[0], grid, int(sys.argv[5]))
        extra = {"resampling": took, "resamples": int(sys.argv[5]), "spread": spread}
    print(json.dumps({"seconds": seconds, **extra, **{k: float(np.sqrt(v / (5 * n))) for k, v in sse.items()}}))


main()
