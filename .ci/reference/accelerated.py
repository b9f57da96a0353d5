"""Bias-corrected and accelerated interval of given replicates, with Python's statistics module alone (formula: Efron 1987, from memory).

Replicates exp(z) at 999 evenly spaced normal quantiles, estimate 0.9, delete-one values 1 + (i/50)^3. Prints what compare's test holds.
"""
import math
import platform
from statistics import NormalDist

N = NormalDist()
values = sorted(math.exp(N.inv_cdf((b + 0.5) / 999)) for b in range(999))
deleted = [1 + (i / 50) ** 3 for i in range(50)]


def quantile(p):  # order statistic (n+1)p
    h = p * (len(values) + 1)
    i = math.floor(h)
    return values[i - 1] + (h - i) * (values[i] - values[i - 1])


mean = math.fsum(deleted) / len(deleted)
d = [mean - v for v in deleted]
a = math.fsum(x**3 for x in d) / (6 * math.fsum(x * x for x in d) ** 1.5)
z0 = N.inv_cdf(sum(v < 0.9 for v in values) / len(values))
print("python", platform.python_version())
print("acceleration %.12f" % a)
print("z0 %.12f" % z0)
print("percentile %.10f %.10f" % (quantile(0.025), quantile(0.975)))
print("accelerated", " ".join("%.10f" % quantile(N.cdf(z0 + (z0 + N.inv_cdf(p)) / (1 - a * (z0 + N.inv_cdf(p))))) for p in (0.025, 0.975)))
