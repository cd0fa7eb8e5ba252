"""The statistics against scipy, scikit-learn and printed tables.

Bounds: scipy.stats.beta.ppf (Clopper & Pearson 1934), binomtest, and the binomial sum in 60 decimal digits. Tolerance factors: scipy.stats.nct (one-sided), the defining
integral by scipy.integrate and Howe's approximation by scipy.stats.chi2 (two-sided), and the printed factors of ISO 16269-6 and
NBS Handbook 91 (from memory). Order statistics: scipy.stats.binom (Wilks 1941). Misses
against false rejects: sklearn.metrics.roc_curve, auc.
"""

import pathlib
from decimal import Decimal, getcontext

import numpy as np
from oracle import Oracle
from scipy import integrate, optimize
from scipy.stats import beta, binom, binomtest, chi2, nct, norm
from sklearn.metrics import auc, roc_curve

ROOT = pathlib.Path(__file__).resolve().parents[2]
PROGRAM = ROOT / "target/release/examples/stats_oracle"


def close(found, wanted, relative, what):
    assert abs(found - wanted) <= relative * abs(wanted), f"{what}: {found!r}, not {wanted!r}"


def check_bounds(oracle):
    rng = np.random.default_rng(4)
    rows = [(3, 1_000_000), (20, 20_000_001), (1, 300), (682, 925), (5, 100), (0, 312), (312, 312), (0, 0), (1, 1),
            (1, 1_000_000_000), (999_999, 1_000_000), (10_000_000, 20_000_000)]
    for of in rng.integers(1, 100_000, 300):
        rows.append((int(rng.integers(0, of + 1)), int(of)))
    worst = 0.0
    for hits, of in rows:
        for confidence in (0.95, 0.99, 0.8):
            ours = oracle.ask("bounds", hits=hits, of=of, confidence=confidence)
            for name, share, upper in [("low", (1 - confidence) / 2, False), ("high", (1 - confidence) / 2, True),
                                       ("at_least", 1 - confidence, False), ("at_most", 1 - confidence, True)]:
                if upper:
                    wanted = 1.0 if hits == of else beta.isf(share, hits + 1, of - hits)
                else:
                    wanted = 0.0 if hits == 0 else beta.ppf(share, hits, of - hits + 1)
                # scipy 1.17 is 9e-9 off for 1 of 1 000 000 000, as check_bounds_by_definition shows.
                close(ours[name], wanted, 1e-9 if of < 10**9 else 2e-8, f"{hits}/{of} {confidence} {name}")
                if wanted and of < 10**9:
                    worst = max(worst, abs(ours[name] / wanted - 1))
    for hits, of in [(7, 50), (0, 100), (100, 100), (3, 15)]:
        ours = oracle.ask("bounds", hits=hits, of=of, confidence=0.95)
        exact = binomtest(hits, of).proportion_ci(0.95, method="exact")
        close(ours["low"], exact.low, 1e-9, "binomtest")
        close(ours["high"], exact.high, 1e-9, "binomtest")
    print(f"   exact bounds: {len(rows)} counts, largest relative difference {worst:.1e}")


def at_most_by_definition(hits, of, p):
    """The binomial sum in 60 decimal digits."""
    p = Decimal(p)
    term = (1 - p) ** of
    total = term
    for j in range(hits):
        term = term * (of - j) / (j + 1) * p / (1 - p)
        total += term
    return total


def check_bounds_by_definition(oracle):
    """At the upper bound as few hits come with 2.5 % chance, at the lower one as many."""
    getcontext().prec = 60
    for hits, of in [(1, 1_000_000_000), (3, 1_000_000), (20, 20_000_001), (1, 300), (5, 100), (97, 100)]:
        ours = oracle.ask("bounds", hits=hits, of=of, confidence=0.95)
        close(float(at_most_by_definition(hits, of, ours["high"])), 0.025, 1e-11, f"{hits}/{of} high")
        close(float(1 - at_most_by_definition(hits - 1, of, ours["low"])), 0.025, 1e-11, f"{hits}/{of} low")


def check_without_failure(oracle):
    for at_most, confidence, wanted in [(0.05, 0.95, 59), (0.01, 0.95, 299), (0.001, 0.95, 2995), (0.0001, 0.95, 29956)]:
        n = oracle.ask("fewest_without_failure", at_most=at_most, confidence=confidence)["n"]
        assert n == wanted, (at_most, n)
        assert beta.isf(1 - confidence, 1, n) <= at_most < beta.isf(1 - confidence, 1, n - 1)
    assert oracle.ask("rule_of_three", n=300)["at_most"] == 0.01


def exact_two_sided(n, coverage, confidence):
    """The factor by integration over the mean's error (the definition, nothing of Howe's)."""
    def sure(k):
        def at(mean):
            half = optimize.brentq(lambda r: norm.cdf(mean + r) - norm.cdf(mean - r) - coverage, 0, 50)
            return chi2.sf((n - 1) * (half / k) ** 2, n - 1) * norm.pdf(mean, scale=n**-0.5)
        return 2 * integrate.quad(at, 0, 9 / n**0.5, epsabs=1e-9)[0]
    return optimize.brentq(lambda k: sure(k) - confidence, 0.1, 100, xtol=1e-7)


def check_factors(oracle):
    worst = 0.0
    for n in (2, 3, 5, 10, 30, 43, 100, 300, 1000):
        for coverage in (0.5, 0.9, 0.99, 0.999):
            for confidence in (0.5, 0.9, 0.95, 0.99):
                ours = oracle.ask("factors", n=n, coverage=coverage, confidence=confidence)
                # scipy's ppf searches; its cdf is what it must agree with.
                at = nct.cdf(ours["one_sided"] * n**0.5, n - 1, norm.ppf(coverage) * n**0.5)
                close(at, confidence, 1e-8, f"noncentral t, n {n}, {coverage}, {confidence}")
                worst = max(worst, abs(at / confidence - 1))
    print(f"   one-sided factors against the noncentral t: largest relative difference of the chance {worst:.1e}")
    worst = {"exact": 0.0, "Howe": 0.0}
    for n, coverage, confidence in ((10, 0.9, 0.99), (10, 0.999, 0.95), (43, 0.9, 0.99), (100, 0.99, 0.95)):
        ours = oracle.ask("factors", n=n, coverage=coverage, confidence=confidence)["two_sided"]
        howe = norm.ppf((1 + coverage) / 2) * ((n - 1) * (1 + 1 / n) / chi2.ppf(1 - confidence, n - 1)) ** 0.5
        for name, wanted in (("exact", exact_two_sided(n, coverage, confidence)), ("Howe", howe)):
            worst[name] = max(worst[name], abs(ours / wanted - 1))
    assert worst["exact"] < 1e-6 and worst["Howe"] < 0.01, worst
    print(f"   two-sided factors: {worst['exact']:.1e} from the integral, {worst['Howe']:.1e} from Howe's approximation")
    # Printed to three places: ISO 16269-6 and NBS Handbook 91, tables of one-sided factors, 95 % confidence (from memory);
    # NIST/SEMATECH e-Handbook 7.2.6.3 for n = 43 (from memory).
    for n, coverage, confidence, wanted in [
            (5, 0.90, 0.95, 3.407), (10, 0.90, 0.95, 2.355), (10, 0.95, 0.95, 2.911), (10, 0.99, 0.95, 3.981),
            (20, 0.95, 0.95, 2.396), (30, 0.99, 0.95, 3.064), (50, 0.95, 0.95, 2.065), (43, 0.90, 0.99, 1.874)]:
        ours = oracle.ask("factors", n=n, coverage=coverage, confidence=confidence)["one_sided"]
        assert abs(ours - wanted) <= 5.1e-4, (n, coverage, ours, wanted)


def check_order(oracle):
    for coverage in (0.9, 0.95, 0.99, 0.999):
        for confidence in (0.9, 0.95, 0.99):
            for place in (1, 2, 3, 10):
                n = oracle.ask("fewest_for_order_limit", place=place, coverage=coverage, confidence=confidence)["n"]
                sure = [binom.sf(place - 1, m, 1 - coverage) for m in (n - 1, n)]
                assert sure[0] < confidence <= sure[1], (coverage, confidence, place, n, sure)
                found = oracle.ask("order_limit", n=n, coverage=coverage, confidence=confidence)["place"]
                assert found == place, (n, found, place)
    # The two-sided numbers of the books (from memory): 93 for 95/95, 473 for 99/95.
    for coverage, n in ((0.95, 93), (0.99, 473)):
        assert oracle.ask("fewest_for_order_limit", place=2, coverage=coverage, confidence=0.95)["n"] == n


def check_tradeoff(oracle):
    rng = np.random.default_rng(5)
    for good_count, bad_count, places in ((300, 40, 2), (1000, 1000, 1), (5, 3, 0), (1, 1, 3)):
        good = np.round(rng.gamma(2.0, 0.2, good_count), places)
        bad = np.round(rng.gamma(6.0, 0.3, bad_count), places)
        lost = rng.random(bad_count) < 0.2
        ours = oracle.ask("tradeoff", good=good.tolist(), bad=[None if gone else b for b, gone in zip(bad.tolist(), lost)])
        bad[lost] = 1e6
        figures = np.concatenate([good, bad])
        is_bad = np.repeat([0, 1], [good_count, bad_count])
        false, caught, _ = roc_curve(is_bad, figures, drop_intermediate=False)
        points = np.array(ours["points"])
        assert np.array_equal(points[::-1, 1], np.round(false * good_count).astype(int))
        assert np.array_equal(bad_count - points[::-1, 0], np.round(caught * bad_count).astype(int))
        close(ours["area"], auc(false, caught), 1e-12, "area")


with Oracle(PROGRAM) as oracle:
    check_bounds(oracle)
    check_bounds_by_definition(oracle)
    check_without_failure(oracle)
    check_factors(oracle)
    check_order(oracle)
    check_tradeoff(oracle)
print("statistics agree with scipy, scikit-learn and the printed tables")
