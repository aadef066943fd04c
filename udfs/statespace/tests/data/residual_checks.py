"""Fills the "computed" block of each case in residual_checks.json, in 40-digit arithmetic.

Needs mpmath (1.3.0 was used) and nothing else: python3 residual_checks.py
It shares no code with the library. From the stored residuals it works out the p-values of the stored
statistics, and, where a case holds the series, the one-step errors v and their variances F, the
sum of squared errors and the two R-squared, by the definitions written out below.
"""

import json
import pathlib
from fractions import Fraction

from mpmath import betainc, erfc, gammainc, inf, mp, mpf, sqrt

mp.dps = 40
PATH = pathlib.Path(__file__).with_name("residual_checks.json")


def chi_square_tail(x, df):
    return gammainc(mpf(df) / 2, mpf(x) / 2, inf, regularized=True)


def f_two_sided(x, h):
    tail = betainc(mpf(h) / 2, mpf(h) / 2, 0, 1 / (1 + mpf(x)), regularized=True)
    return 2 * min(tail, 1 - tail)


def normal_two_sided(z):
    return erfc(abs(z) / sqrt(mpf(2)))


def p_values(case):
    checks, n = case["diagnostics"], case["diagnostics"]["n_resid"]
    relative = max(case["n_hyper"] - 1, 0)
    return {
        "Q_p": {k: float(chi_square_tail(q, max(int(k) - relative, 1))) for k, q in checks["Q"].items()},
        "H_p": float(f_two_sided(checks["H_round"]["H"], checks["H_round"]["h"])),
        "skewness_p": float(normal_two_sided(mpf(checks["skewness"]) * sqrt(mpf(n) / 6))),
        "kurtosis_p": float(normal_two_sided((mpf(checks["kurtosis"]) - 3) * sqrt(mpf(n) / 24))),
    }


def squares_around_means(observed, period):
    """Squares of first differences of observed neighbours around the mean of their season, per degree of
    freedom, times the degrees of freedom of a series of as many observations without gaps."""
    seasons = {}
    for t in range(len(observed) - 1):
        if observed[t] is not None and observed[t + 1] is not None:
            step = Fraction(observed[t + 1]) - Fraction(observed[t])
            seasons.setdefault(t % period, []).append(step)
    squares = Fraction(0)
    for steps in seasons.values():
        mean = sum(steps) / len(steps)
        squares += sum((step - mean) ** 2 for step in steps)
    count, means = sum(map(len, seasons.values())), len(seasons)
    present = sum(y is not None for y in observed)
    return squares * (present - 1 - means) / (count - means)


def goodness_of_fit(case):
    pairs = [(Fraction(v), Fraction(f)) for v, f in zip(case["v"], case["F"]) if v is not None]
    late = sorted(f for _, f in pairs[2 * len(pairs) // 3 :])
    pev = late[(len(late) - 1) // 2]
    sse = pev * sum(v * v / f for v, f in pairs)
    result = {
        "sse": float(sse),
        "last_F": case["F"][-1],
        "r_squared_drift": float(1 - sse / squares_around_means(case["observed"], 1)),
    }
    if case["period"] > 1:
        result["r_squared_season"] = float(1 - sse / squares_around_means(case["observed"], case["period"]))
    return result


def main():
    cases = json.loads(PATH.read_text())
    for case in cases.values():
        case["computed"] = p_values(case)
        if "v" in case:
            case["computed"] |= goodness_of_fit(case)
    blocks = []
    for name, case in cases.items():
        fields = ",\n".join(f' "{key}": {json.dumps(value, separators=(",", ":"))}' for key, value in case.items())
        blocks.append(f'"{name}": {{\n{fields}\n}}')
    PATH.write_text("{\n" + ",\n".join(blocks) + "\n}\n")


if __name__ == "__main__":
    main()
