"""CPU time, ms, of scipy for four tests of 5,000 values against 5,000: Yuen's,
Mann-Whitney's, Kolmogorov's and Smirnov's, Brown's and Forsythe's. Median of five."""
import time

import numpy as np
from scipy import stats

rng = np.random.default_rng(5000)
x, y = np.round(rng.normal(3, 0.08, 5000), 3), np.round(rng.normal(3.01, 0.08, 5000), 3)
took = []
for _ in range(5):
    start = time.process_time()
    stats.ttest_ind(x, y, equal_var=False, trim=0.2)
    stats.mannwhitneyu(x, y)
    stats.ks_2samp(x, y)
    stats.levene(x, y, center="median")
    took.append(1e3 * (time.process_time() - start))
print(sorted(took)[2])
