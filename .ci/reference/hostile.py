"""Writes testdata/hostile/*.csv: invented numbers under hostile column names. 

Run from the project's folder with any Python 3: python3 .ci/reference/hostile.py. The seeds are fixed: it writes the same bytes again.
"""
import csv, io, os, random

HERE = os.path.join(os.path.dirname(__file__), "..", "..", "testdata", "hostile")
NAMES = [
    "y", "</script><script>alert(1)</script>", "__proto__", "constructor", 'say "hi"', "it's", "\u202eright to left\u200f", "n" * 300,
    "<img src=x onerror=alert(3)>", "__f__alert(2)__f__", "=1+1", "\U0001F600", "a*b",
]


PADDED = ["y", " lead", "trail ", "  both  "]


def padded():
    """Names with blanks around them; the second and third column are tangled."""
    rng = random.Random(6)
    out = io.StringIO()
    w = csv.writer(out, lineterminator="\n")
    w.writerow(PADDED)
    for _ in range(60):
        base = rng.gauss(0, 1)
        x = [base + 0.1 * rng.gauss(0, 1), base + 0.1 * rng.gauss(0, 1), rng.gauss(0, 1)]
        w.writerow([f"{v:.4f}" for v in [x[0] + 0.5 * x[2] + rng.gauss(0, 1)] + x])
    with open(os.path.join(HERE, "padded.csv"), "w", encoding="utf-8", newline="") as f:
        f.write(out.getvalue())


def main():
    padded()
    rng = random.Random(5)
    out = io.StringIO()
    w = csv.writer(out, lineterminator="\n")
    w.writerow(NAMES + ["group"])
    for _ in range(60):
        base = rng.gauss(0, 1)
        x = [base + 0.1 * rng.gauss(0, 1), base + 0.1 * rng.gauss(0, 1)] + [rng.gauss(0, 1) for _ in range(len(NAMES) - 3)]
        y = x[0] - x[1] + 0.5 * sum(x[2:]) + rng.gauss(0, 1)
        w.writerow([f"{v:.4f}" for v in [y] + x] + [rng.choice(["<b>bold</b>", "__proto__", "plain"])])
    with open(os.path.join(HERE, "names.csv"), "w", encoding="utf-8", newline="") as f:
        f.write(out.getvalue())
    with open(os.path.join(HERE, "decimal-comma.csv"), "wb") as f:
        f.write("\ufeffy;x;z\r\n1,5;2,25;3\r\n2,5;3,5;1\r\n4;5,125;2\r\n3,75;4;7\r\n".encode("utf-8"))
    with open(os.path.join(HERE, "gaps.csv"), "w", newline="") as f:
        f.write("y,x\n1,2\n2,\n3,NA\n4,N/A\n5,n/a\n6,.\n7,null\n8,NaN\n9,3\n10,5\n11,4\n")


main()
