"""SciPy's side of the comparison: reads a request in JSON a line, answers in JSON a line.

Values and times come from the functions that SciPy computes in compiled code (scipy.special, and scipy.stats.nct.sf for
the one tail that scipy.special lacks), called once on a whole array; `scalar` times are of calls with one number each.
"""

import json
import sys
import time

import exact
import mpmath
import numpy as np
import scipy
from mpmath import mp, mpf
from scipy import special, stats


def chi_square_lower(nu, tail):
    return 2 * special.gammaincinv(nu / 2, tail)


# By name: the array function of (nu, delta, x).
FUNCTIONS = {
    "noncentral-t-cdf": lambda nu, delta, x: special.nctdtr(nu, delta, x),
    "noncentral-t-quantile": lambda nu, delta, x: special.nctdtrit(nu, delta, x),
    "chi-square-quantile-lower": lambda nu, delta, x: chi_square_lower(nu, x),
    "chi-square-quantile-upper": lambda nu, delta, x: special.chdtri(nu, x),
}


def best(work, rounds):
    least = float("inf")
    for _ in range(rounds):
        begin = time.perf_counter()
        work()
        least = min(least, time.perf_counter() - begin)
    return least


def times(request):
    """Microseconds an element, in one call on the array and in calls on single numbers."""
    function = FUNCTIONS[request["function"]]
    columns = [np.asarray(request[name], float) for name in ("nu", "delta", "x")]
    points = len(columns[0])
    # Long enough for the call's own cost not to count, short enough for some runs not to be interrupted on a busy machine.
    copies = max(1, 300 // points)
    arrays = [np.tile(column, copies) for column in columns]
    array = best(lambda: function(*arrays), 20) / (points * copies)
    singles = list(zip(*(column.tolist() for column in columns)))[:50]
    scalar = best(lambda: [function(*single) for single in singles], 3) / len(singles)
    return {"array": array * 1e6, "scalar": scalar * 1e6}


def errors(request):
    """Relative errors against 52 digits, ours and SciPy's: of the smaller tail, or of the quantile."""
    ours, scipys = [], []
    for row in zip(*(request[name] for name in ("nu", "delta", "x", "ours", "exact"))):
        nu, delta, x, own, true = row
        if request["function"] == "noncentral-t-cdf":
            tails = special.nctdtr(nu, delta, x), stats.nct.sf(x, nu, delta)
            if true:
                small = 0 if mpf(true[0]) < mpf(true[1]) else 1
                value = mpf(true[small])
            else:
                small = 0 if own[0] < own[1] else 1
                value = exact.noncentral_t_tail((-1, 1)[small], x, nu, delta)
            peer, own = tails[small], own[small]
        else:
            peer = float(FUNCTIONS[request["function"]](nu, delta, x))
            value = mpf(true) if true else quantile(request["function"], nu, delta, x, own)
        ours.append(float(abs(mpf(own) / value - 1)))
        scipys.append(float(abs(mpf(float(peer)) / value - 1)))
    return {"ours": ours, "scipy": scipys}


def quantile(function, nu, delta, tail, near):
    if function == "noncentral-t-quantile":
        if tail <= 0.5:
            return exact.noncentral_t_quantile(-1, mpf(tail), nu, delta, near)
        return exact.noncentral_t_quantile(+1, 1 - mpf(tail), nu, delta, near)
    return exact.chi_square_quantile(-1 if function.endswith("lower") else +1, mpf(tail), nu, near)


class Search:
    """The smallest n whose exact test finds a worse index: doubling, then halving, as the product's own search."""

    def __init__(self, claim, against, alpha, power):
        self.claim, self.against, self.alpha, self.wanted = claim, against, alpha, power
        self.evaluations = 0

    def power(self, n):
        self.evaluations += 1
        root = 3 * n**0.5
        t = special.nctdtrit(n - 1, root * self.claim, self.alpha)
        return special.nctdtr(n - 1, root * self.against, t)

    def smallest(self):
        self.evaluations = 0
        unmet, met = 1, 2
        while self.power(met) < self.wanted:
            unmet, met = met, 2 * met
        while met - unmet > 1:
            middle = unmet + (met - unmet) // 2
            if self.power(middle) >= self.wanted:
                met = middle
            else:
                unmet = middle
        # What the product tells besides: the power at n and one piece before.
        self.power(met)
        self.power(met - 1)
        return met


def search(request):
    job = Search(*(request[name] for name in ("claim", "against", "alpha", "power")))
    took = best(lambda: job.smallest(), 5)
    return {"n": job.smallest(), "evaluations": job.evaluations, "microseconds": took * 1e6}


def versions(_request):
    return {"scipy": scipy.__version__, "numpy": np.__version__, "mpmath": mpmath.__version__}


def main():
    # Numbers far out make SciPy warn, which would be noise here.
    np.seterr(all="ignore")
    tasks = {"times": times, "errors": errors, "search": search, "versions": versions}
    for line in sys.stdin:
        request = json.loads(line)
        print(json.dumps(tasks[request["do"]](request)), flush=True)


main()
