"""Tail probabilities far out, to 50 digits, with Python's decimal module alone.

Series of the incomplete beta function (Abramowitz and Stegun 1964, 26.5.4, from memory):
I_x(a,b) = x^a (1-x)^b / (a B(a,b)) * (1 + sum over n of prod (a+b+i)/(a+1+i) x^(n+1)).
Gamma at half-integers is exact up to the root of pi. Prints what fit/tail's tests hold.
"""
from decimal import Decimal as D, getcontext

getcontext().prec = 60
PI = D("3.14159265358979323846264338327950288419716939937510582097494459")


def gamma(twice):  # Gamma(twice/2)
    v, k = (D(1), D(1)) if twice % 2 == 0 else (PI.sqrt(), D(1) / 2)
    while k < D(twice) / 2:
        v, k = v * k, k + 1
    return v


def beta_tail(x, twice_a, twice_b):
    a, b = D(twice_a) / 2, D(twice_b) / 2
    term, total, i = D(1), D(1), 0
    while term > D("1e-58"):
        term *= (a + b + i) / (a + 1 + i) * x
        total, i = total + term, i + 1
    b_ab = gamma(twice_a) * gamma(twice_b) / gamma(twice_a + twice_b)
    return (a * x.ln()).exp() * (b * (1 - x).ln()).exp() / (a * b_ab) * total


def t(v, df):
    return beta_tail(D(df) / (D(df) + D(v) ** 2), df, 1)


def f(v, d1, d2):
    return beta_tail(D(d2) / (D(d2) + D(d1) * D(v)), d2, d1)


print("t(30) beyond 2.042:", +t("2.042", 30).quantize(D("1e-20")))
print("t(30) beyond 20: %.20e" % t(20, 30))
print("F(3,100) beyond 400: %.20e" % f(400, 3, 100))
