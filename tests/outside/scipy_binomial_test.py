#!/usr/bin/python3
"""Intervals and exact tests of the audit against SciPy, live, on counts from 1 to 200 000."""
import pathlib
import random
import subprocess
import sys
import tempfile

from scipy import stats

top = pathlib.Path(__file__).resolve().parents[2]
rng = random.Random(12)
cases = [(k, n, c) for n in (1, 2, 5, 9, 27, 60) for k in range(n + 1) for c in (0.9, 0.95, 0.99)]
for n in (300, 5000, 20000, 200000):
    cases += [(k, n, 0.95) for k in [0, 1, 2, n // 2, n - 1, n] + [rng.randrange(n) for _ in range(6)]]

with tempfile.TemporaryDirectory() as work:
    helper = work + "/helper"
    subprocess.run(["gcc", "-std=c17", "-D_GNU_SOURCE", "-O2", "-ffp-contract=off", "-I", str(top), "-o", helper,
                    str(top / "tests/outside/audit_binomial_helper.c"), str(top / "server/audit/binomial.c"),
                    str(top / "server/base/check.c"), "-lgsl", "-lgslcblas", "-lm"], check=True)
    lines = "".join(f"{k} {n} {c!r}\n" for k, n, c in cases)
    out = subprocess.run([helper], input=lines, capture_output=True, text=True, check=True).stdout.splitlines()

worst = {}


def hold(name, got, want, where):
    """Keeps the largest relative error of each quantity."""
    scale = max(abs(want), 1e-12)
    error = abs(got - want) / scale
    if error > worst.get(name, (0, None))[0]:
        worst[name] = (error, where)


for (k, n, c), line in zip(cases, out, strict=True):
    got = [float(x) for x in line.split()]
    result = stats.binomtest(k, n)
    wilson = result.proportion_ci(c, method="wilson")
    hold("wilson", got[0], wilson.low if k > 0 else 0.0, (k, n, c))
    hold("wilson", got[1], wilson.high if k < n else 1.0, (k, n, c))
    # The beta quantile, since proportion_ci(method="exact") stops its root search at an absolute 1e-12.
    hold("clopper_pearson", got[2], stats.beta.ppf((1 - c) / 2, k, n - k + 1) if k > 0 else 0.0, (k, n, c))
    hold("clopper_pearson", got[3], stats.beta.ppf((1 + c) / 2, k + 1, n - k) if k < n else 1.0, (k, n, c))
    tail = stats.poisson.sf(k - 1, n / 7)
    if tail > 1e-200:
        hold("poisson upper tail", got[4], tail, (k, n))
    p = stats.binomtest(k, n, 0.3).pvalue
    if p > 1e-200:
        hold("two-sided binomial", got[5], p, (k, n))

limits = {"wilson": 1e-12, "clopper_pearson": 1e-9, "poisson upper tail": 1e-9, "two-sided binomial": 1e-9}
failed = 0
for name, limit in limits.items():
    error, where = worst[name]
    good = error <= limit
    failed += not good
    print(f"{'ok' if good else 'not ok'} {name}: largest relative error {error:.1e} at {where}, {len(cases)} cases")
sys.exit(failed > 0)
