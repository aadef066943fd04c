"""The figures in components.slt, forecast.slt and diagnostics.slt that are marked "dense.py".

One series of sales.inc under given variances, solved as one big generalised least squares problem: no recursion, no
start-up, nothing in common with the program but the definition of the model. Needs numpy.
"""

import numpy as np

VARIANCES = {"irregular": 1.5, "level": 0.6, "slope": 0.01, "season": 0.04}
HORIZON = 3
Z90 = 1.6448536269514722  # 95 % point of the normal distribution


def butter():
    """Litres, price and promotion of Butter in Coldwater (r = p = 0), as sales.inc makes them."""
    w = np.arange(64)
    wobble = ((w * w * 37 + w * 19) % 211 - 105) / 52.5
    wander = np.cumsum(((w * w * 53 + w * 29) % 199 - 99) / 66.0)
    price = 2.0 + ((w * w * 11 + w * 7) % 13) / 20.0
    promo = ((w * 5) % 9 == 0).astype(float)
    season = np.array([9.0, -3.0, -11.0, 5.0])[w % 4]
    return np.round(100 + 0.4 * w + wander + season - 12 * (price - 2) + 8 * promo + wobble, 2), price, promo


def transition():
    """Level, slope and three states of a dummy season of four steps."""
    t = np.zeros((5, 5))
    t[0, 0] = t[0, 1] = t[1, 1] = 1.0
    t[2, 2:] = -1.0
    t[3, 2] = t[4, 3] = 1.0
    return t


def solve(y, drivers, plan):
    """Estimates and variances of all states, of the coefficients and of the observations to come."""
    n, steps = len(y), len(y) + len(plan)
    m, t = 5, transition()
    q = np.diag([VARIANCES["level"], VARIANCES["slope"], VARIANCES["season"], 0.0, 0.0])
    mean, blocks = np.zeros((steps * m, m)), np.zeros((steps * m, steps * m))
    power, p = np.eye(m), np.zeros((m, m))
    for i in range(steps):
        mean[i * m:(i + 1) * m] = power
        ahead = p.copy()
        for j in range(i, steps):
            blocks[j * m:(j + 1) * m, i * m:(i + 1) * m] = ahead
            blocks[i * m:(i + 1) * m, j * m:(j + 1) * m] = ahead.T
            ahead = t @ ahead
        power, p = t @ power, t @ p @ t.T + q
    z = np.zeros((steps, steps * m))
    for i in range(steps):
        z[i, i * m] = z[i, i * m + 2] = 1.0
    x = np.vstack([drivers, plan]) if drivers.size else np.zeros((steps, 0))
    k = x.shape[1]
    # Everything that is wanted, as a linear function of the start, the coefficients and the disturbances.
    fixed = np.hstack([z @ mean, x])
    v = z @ blocks @ z.T + VARIANCES["irregular"] * np.eye(steps)
    vi = np.linalg.inv(v[:n, :n])
    design = fixed[:n]
    s = np.linalg.inv(design.T @ vi @ design)
    delta = s @ design.T @ vi @ y
    rest = y - design @ delta

    def blup(function, covariance, variance):
        """function: rows of the fixed part; covariance: with the observed y; variance: of the random part."""
        estimate = function @ delta + covariance @ vi @ rest
        gap = function - covariance @ vi @ design
        return estimate, variance - covariance @ vi @ covariance.T + gap @ s @ gap.T

    states = blup(np.hstack([mean, np.zeros((steps * m, k))]), blocks @ z[:n].T, blocks)
    signal = blup(fixed, (z @ blocks @ z.T)[:, :n], z @ blocks @ z.T)
    future = blup(fixed[n:], v[n:, :n], v[n:, n:])
    d = m + k
    log_likelihood = -0.5 * ((n - d) * np.log(2 * np.pi) + np.linalg.slogdet(v[:n, :n])[1]
                             - np.linalg.slogdet(s)[1] + rest @ vi @ rest)
    return states, signal, future, (delta[m:], np.sqrt(np.diag(s)[m:])), log_likelihood


def main():
    y, price, promo = butter()
    x = np.column_stack([price, promo])
    plan = np.array([[2.10, 0.0], [2.10, 1.0], [2.45, 0.0]])  # as in forecast.slt
    (state, p), (signal, f), (ahead, v), (beta, beta_se), log_likelihood = solve(y, x, plan)
    error = np.sqrt(np.diag(p))
    print("components.slt: week level se slope se seasonal se effects fitted lower upper")
    for i in (0, 31, 63):
        five = [value for j in range(3) for value in (state[5 * i + j], error[5 * i + j])]
        half = Z90 * np.sqrt(f[i, i])
        five += [beta[0] * x[i, 0], beta[1] * x[i, 1], signal[i], signal[i] - half, signal[i] + half]
        print(i, *np.round(five, 6))
    print("forecast.slt: step expected se lower upper total lower upper")
    for i in range(HORIZON):
        one, total = np.sqrt(v[i, i]), ahead[:i + 1].sum()
        half = Z90 * np.sqrt(v[:i + 1, :i + 1].sum())
        print(i + 1, *np.round([ahead[i], one, ahead[i] - Z90 * one, ahead[i] + Z90 * one,
                                total, total - half, total + half], 6))
    print("diagnostics.slt: log-likelihood", round(log_likelihood, 6), "coefficients", *np.round(beta, 6), "se",
          *np.round(beta_se, 6))


if __name__ == "__main__":
    main()
