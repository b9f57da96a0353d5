"""The strongest plain rival: numpy on fold cross-products, the same folds and alternatives (as-is, every drop, ridge over 101 penalties and every number
of components, tuned inside each training set). It reads arrays, not text, so that only arithmetic is timed.

    /usr/bin/python3 rival.py ROWS COLUMNS ARRAYS.npy FOLDS

prints seconds and the out-of-sample errors of as-is, ridge and components.
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
    print(json.dumps({"seconds": seconds, **{k: float(np.sqrt(v / (5 * n))) for k, v in sse.items()}}))


main()
