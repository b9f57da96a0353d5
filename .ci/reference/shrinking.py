"""Values of a general-purpose library for the tests: elastic net, lasso, partial least squares and double selection.

Run from the project's folder with Debian's python3 (packages python3-numpy, python3-scipy, python3-sklearn):

    /usr/bin/python3 .ci/reference/shrinking.py

It writes testdata/shrinking/values.json, on the sets and folds of testdata/reference-library. It shares nothing with the Go code.

The penalty k of an elastic net with mix m is on the correlation form: with regressors and dependent variable centred and of unit length it minimises

    |y - Zb|^2/2 + k m sum|b_j| + k (1-m)/2 sum b_j^2.

scikit-learn's ElasticNet(alpha, l1_ratio) minimises |y - Zb|^2/(2n) + alpha l1_ratio sum|b_j| + alpha (1-l1_ratio)/2 sum b_j^2, which is the same over n: alpha = k/n,
l1_ratio = m. Its stopping rule is a bound on the duality gap, set so low here that it runs to rounding.
"""
import csv, json, os, warnings
import numpy, scipy, sklearn
from scipy import stats
from sklearn.cross_decomposition import PLSRegression
from sklearn.exceptions import ConvergenceWarning
from sklearn.linear_model import ElasticNet, Lasso, LinearRegression

np = numpy
HERE = os.path.join(os.path.dirname(__file__), "..", "..", "testdata")
MIXES = (0.1, 0.5, 1)
PLACES = (8, 16, 24, 32, 40, 48, 54, 58)  # in the grid of penalties, of which 0 is least squares


def grid(mix):
    """The grid of the tool: zero, then 60 values evenly spaced in logarithms from 1e-4 to 1/mix."""
    return [0.0] + list(np.exp(np.linspace(np.log(1e-4), np.log(1 / mix), 60)))


def standard(x, y):
    mean, ymean = x.mean(axis=0), y.mean()
    xc, yc = x - mean, y - ymean
    length, ylength = np.sqrt((xc ** 2).sum(axis=0)), np.sqrt((yc ** 2).sum())
    return xc / length, yc / ylength, mean, length, ymean, ylength


def raw(b, mean, length, ymean, ylength):
    slopes = b * ylength / length
    return np.concatenate([[ymean - mean @ slopes], slopes])


def net(x, y, k, mix):
    z, v, *back = standard(x, y)
    n = len(v)
    fit = ElasticNet(alpha=k / n, l1_ratio=mix, fit_intercept=False, tol=1e-15, max_iter=2000000)
    with warnings.catch_warnings():
        warnings.simplefilter("ignore", ConvergenceWarning)  # the bound on the gap lies below rounding; the conditions are checked instead
        b = fit.fit(z, v).coef_
    g = z.T @ (v - z @ b) - k * (1 - mix) * b
    gap = np.where(b != 0, np.abs(g - k * mix * np.sign(b)), np.maximum(0, np.abs(g) - k * mix)).max()
    assert gap < 1e-9, (k, mix, gap)
    return raw(b, *back)


def partial(x, y, m):
    z, v, *back = standard(x, y)
    if m == 0:
        return raw(np.zeros(z.shape[1]), *back)
    with warnings.catch_warnings():
        warnings.simplefilter("ignore", FutureWarning)  # of the shape of coef_, which is flattened here
        b = PLSRegression(n_components=m, scale=False, tol=1e-15, max_iter=10000).fit(z, v).coef_.reshape(-1)
    return raw(b, *back)


def pooled(x, y, assignment, fit):
    """Mean squared error over all held-out rows of all repeats."""
    total = rows = 0.0
    for folds in assignment:
        for f in range(max(folds) + 1):
            held = folds == f
            b = fit(x[~held], y[~held])
            total += ((y[held] - b[0] - x[held] @ b[1:]) ** 2).sum()
            rows += held.sum()
    return total / rows


def chosen(z, v, df):
    """Columns that a lasso keeps at the penalty 1.1 sigma z(1 - 0.05/(2p)), sigma in rounds; z and v centred, z of unit length."""
    n, p = z.shape
    sigma, kept = np.sqrt(v @ v / df), None
    for _ in range(15):
        l = 1.1 * sigma * stats.norm.ppf(1 - 0.05 / (2 * p))
        b = Lasso(alpha=l / n, fit_intercept=False, tol=1e-14, max_iter=2000000).fit(z, v).coef_
        now = list(np.flatnonzero(b))
        if now == kept:
            break
        kept = now
        res = v
        if kept:
            res = v - z[:, kept] @ np.linalg.lstsq(z[:, kept], v, rcond=None)[0]
        sigma = np.sqrt(res @ res / (df - len(kept)))
    return kept


def double(x, y, focal):
    """Double selection for one column: what is kept for y, for the column, and least squares on the column with both."""
    n, p = x.shape
    controls = [j for j in range(p) if j != focal]
    xc, yc = x - x.mean(axis=0), y - y.mean()
    z = xc[:, controls] / np.sqrt((xc[:, controls] ** 2).sum(axis=0))
    with warnings.catch_warnings():
        warnings.simplefilter("ignore", ConvergenceWarning)
        by_y = [controls[i] for i in chosen(z, yc, n - 1)]
        by_focal = [controls[i] for i in chosen(z, xc[:, focal], n - 1)]
    union = sorted(set(by_y) | set(by_focal))
    cols = [focal] + union
    fit = LinearRegression().fit(x[:, cols], y)
    res = y - fit.predict(x[:, cols])
    inverse = np.linalg.inv(xc[:, cols].T @ xc[:, cols])
    return {"byY": [int(j) for j in by_y], "byFocal": [int(j) for j in by_focal], "coefficient": float(fit.coef_[0]),
            "standardError": float(np.sqrt(res @ res / (n - len(cols) - 1) * inverse[0, 0]))}


def data(name, library):
    with open(os.path.join(HERE, library["data"], "data.csv")) as f:
        t = list(csv.DictReader(f))
    if name == "imports":
        t = [r for r in t if int(r["year"]) <= 1959]
    left = library["equation"].split(" = ")[0]
    y = np.log([float(r["wage"]) for r in t]) if left == "ln(wage)" else np.array([float(r[left]) for r in t])
    cols = []
    for n in library["regressors"]:
        key, _, level = n.partition("=")
        cols.append([float(r[key] == level) if level else float(r[key]) for r in t])
    return np.array(cols).T, y


def main():
    out = {"library": f"numpy {numpy.__version__}, scipy {scipy.__version__}, scikit-learn {sklearn.__version__}",
           "command": "/usr/bin/python3 .ci/reference/shrinking.py", "places": PLACES, "cases": {}}
    for name in ("longley", "hald", "imports", "wages", "wages-age"):
        with open(os.path.join(HERE, "reference-library", name + ".json")) as f:
            library = json.load(f)
        x, y = data(name, library)
        p = x.shape[1]
        assignment = [np.array(a) for a in library["assignment"]]
        case = {"net": [], "partial": [], "double": [double(x, y, j) for j in range(p)]}
        for mix in MIXES:
            g = grid(mix)
            for i in PLACES:
                case["net"].append({"mix": mix, "place": i, "penalty": g[i], "coefficients": list(net(x, y, g[i], mix)),
                                    "error": pooled(x, y, assignment, lambda a, c: net(a, c, g[i], mix))})
        for m in range(p + 1):
            # All components are least squares, which the tests hold elsewhere; where training rows are exactly dependent the library cannot go on.
            error = None if m == p else pooled(x, y, assignment, lambda a, c: partial(a, c, m))
            case["partial"].append({"components": m, "coefficients": list(partial(x, y, m)), "error": error})
        out["cases"][name] = case
        print(name, flush=True)
    with open(os.path.join(HERE, "shrinking", "values.json"), "w") as f:
        json.dump(out, f, indent=0)
        f.write("\n")


main()
