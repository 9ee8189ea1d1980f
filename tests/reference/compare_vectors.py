"""Writes compare_vectors.json: scipy's answers for the tests of tests/compare_reference.rs. Run in this folder."""
import json
import numpy as np
import scipy
from scipy import stats

rng = np.random.default_rng(20261201)
groups = [np.round(rng.normal(mean, sd, n), 4).tolist() for mean, sd, n in ((100, 1.5, 5), (101, 2.5, 3), (104, 1.0, 6), (99, 2.0, 4))]
pairs = [(a, b) for a in range(4) for b in range(a + 1, 4)]
tukey = stats.tukey_hsd(*groups)
interval = tukey.confidence_interval(0.95)
anova = stats.f_oneway(*groups)
welch_anova = stats.f_oneway(*groups, equal_var=False)
x = np.round(rng.uniform(10, 30, 9), 3)
y = np.round(50 - 0.4 * x + rng.normal(0, 1, 9), 4)
line = stats.linregress(x, y)
out = {
    "made_by": f"scipy {scipy.__version__}, numpy {np.__version__}: compare_vectors.py",
    "groups": groups,
    "anova": {"F": anova.statistic, "p": anova.pvalue},
    "welch_anova": {"F": welch_anova.statistic, "p": welch_anova.pvalue},
    "pairs": [
        {
            "a": a, "b": b,
            "welch_t": stats.ttest_ind(groups[a], groups[b], equal_var=False).statistic,
            "welch_p": stats.ttest_ind(groups[a], groups[b], equal_var=False).pvalue,
            "welch_df": stats.ttest_ind(groups[a], groups[b], equal_var=False).df,
            "tukey_low": interval.low[a, b], "tukey_high": interval.high[a, b],
        }
        for a, b in pairs
    ],
    "studentized_range": [
        {"p": p, "k": k, "df": df, "q": stats.studentized_range.ppf(p, k, df)}
        for p, k, df in ((0.95, 2, 3), (0.95, 3, 6), (0.95, 4, 14), (0.99, 5, 20), (0.95, 10, 90), (0.95, 3, 2))
    ],
    "noncentral_t_factor": [
        {"n": n, "content": c, "confidence": g, "k": stats.nct.ppf(g, n - 1, stats.norm.ppf(c) * n**0.5) / n**0.5}
        for n, c, g in ((2, 0.95, 0.95), (3, 0.95, 0.95), (5, 0.95, 0.95), (12, 0.9, 0.99), (40, 0.95, 0.95))
    ],
    "line": {
        "x": x.tolist(), "y": y.tolist(), "slope": line.slope, "intercept": line.intercept,
        "slope_se": line.stderr, "intercept_se": line.intercept_stderr, "p": line.pvalue,
    },
}
json.dump(out, open("compare_vectors.json", "w"), indent=1)
