"""The checks of the full audit as one would write them plainly, with pandas and statsmodels.

For comparison of time, on the same orders: `python tests/benchmarks/plain_audit.py RUNS`.
"""

import sys
import time

import numpy as np
import pandas as pd
import statsmodels.api as sm
import statsmodels.formula.api as smf
from scipy import stats
from statsmodels.stats.diagnostic import acorr_ljungbox, normal_ad
from statsmodels.stats.multitest import multipletests

N_LAGS = 10


def von_neumann(x):
    """Bartels' ratio with its normal approximation."""
    ranks = pd.Series(x).rank().to_numpy()
    n = len(ranks)
    ratio = (np.diff(ranks) ** 2).sum() / ((ranks - ranks.mean()) ** 2).sum()
    variance = 4 * (n - 2) * (5 * n**2 - 2 * n - 9) / (5 * n * (n + 1) * (n - 1) ** 2)
    return stats.norm.cdf((ratio - 2) / variance**0.5)


def trend(x):
    """Kendall's tau with the order, as scipy has it."""
    return stats.kendalltau(np.arange(len(x)), x).pvalue


def pettitt(x):
    """Pettitt's statistic by a cumulated sum of ranks."""
    ranks = pd.Series(x).rank()
    n = len(ranks)
    largest = (2 * ranks.cumsum() - np.arange(1, n + 1) * (n + 1)).abs().max()
    return min(1.0, 2 * np.exp(-6 * largest**2 / (n**3 + n**2)))


def selected_shift(x):
    """The largest standardised difference over all splits, by an expanding mean."""
    n, x = len(x), pd.Series(x)
    before = x.expanding().mean()
    after = x[::-1].expanding().mean()[::-1].shift(-1)
    count = np.arange(1, n + 1)
    z = ((before - after).abs() / x.std() * np.sqrt(count * (n - count) / n)).iloc[5:-5].max()
    return min(1.0, 4 * stats.norm.pdf(z) / z + stats.norm.pdf(z) * (z - 1 / z) * 2 * np.log(99))


def cycle(frame):
    """A cosinor regression, clustered by day."""
    angle = 2 * np.pi * (frame["started"] % 86_400) / 86_400
    day = (frame["started"] // 86_400).astype(int)
    design = sm.add_constant(np.column_stack([np.sin(angle), np.cos(angle)]))
    fit = sm.OLS(frame["score"], design).fit(cov_type="cluster", cov_kwds={"groups": day})
    return float(fit.f_test(np.eye(3)[1:]).pvalue)


def plain_audit(frame, responses, nuisances):
    """Return the adjusted p-values of one campaign: columns cell, started, responses and nuisances."""
    found = {}
    for response in responses:
        p, values = {}, frame[response]
        frame = frame.assign(
            score=frame.groupby("cell")[response].transform(
                lambda x: stats.zscore(stats.norm.ppf(x.rank() / (len(x) + 1)))
            ),
            residual=values - frame.groupby("cell")[response].transform("mean"),
        )
        score = frame["score"].to_numpy()
        p["order", "neighbours"] = von_neumann(score)
        p["order", "lags"] = float(acorr_ljungbox(score, lags=N_LAGS)["lb_pvalue"].iloc[-1])
        p["order", "trend"] = trend(score)
        p["order", "shift"] = pettitt(score)
        p["order", "cycle"] = cycle(frame)
        for name in nuisances:
            p[name, "levels"] = float(
                sm.stats.anova_lm(smf.ols(f"score ~ C({name})", frame).fit())["PR(>F)"].iloc[0]
            )
            for check, ask in (("neighbours", von_neumann), ("trend", trend), ("shift", selected_shift)):
                by_level = [ask(part["score"].to_numpy()) for _, part in frame.groupby(name)]
                p[name, check] = min(1.0, len(by_level) * min(by_level))
            long = [part for _, part in frame.groupby(name) if np.ptp(part["started"]) > 3 * 86_400]
            if long:
                p[name, "cycle"] = min(1.0, min(cycle(part) for part in long) * len(long))
        adjusted = multipletests(list(p.values()), method="holm")[1]
        found[response] = dict(zip(p, adjusted, strict=True))
        found[response]["shape"] = normal_ad(frame["residual"].to_numpy())[1]
        found[response]["spread"] = stats.levene(
            *[part.to_numpy() for _, part in values.groupby(frame["cell"])], center="median"
        ).pvalue
    return found


def campaign_frame(n, n_responses=5, seed=1):
    """Return an exchangeable campaign of n runs: 8 cells, 16 hosts, 5 builds, 30 days."""
    rng = np.random.default_rng(seed)
    frame = pd.DataFrame(
        {
            "cell": rng.integers(0, 8, n),
            "host": rng.integers(0, 16, n),
            "build": rng.integers(0, 5, n),
            "day": np.arange(n) * 30 // n,
            "started": 1.8e9 + np.sort(rng.uniform(0, 30 * 86_400, n)),
        }
    )
    return frame.assign(**{f"y{k}": rng.normal(size=n) for k in range(n_responses)})


if __name__ == "__main__":
    runs = campaign_frame(int(sys.argv[1]))
    began = time.perf_counter()
    plain_audit(runs, [f"y{k}" for k in range(5)], ["host", "build", "day"])
    print(f"{len(runs):,} runs, 5 responses, 3 nuisances: {time.perf_counter() - began:.1f} s")
