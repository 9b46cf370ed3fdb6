#!/usr/bin/python3
"""NumPy's and SciPy's answers to what server/optics computes, as JSON. Called by the tests of optics.

    optics_reference.py series FILE          FILE: float64 values of one series
    optics_reference.py frames FILE POINTS   FILE: float64 x[POINTS], y[POINTS], then frames of POINTS values
    optics_reference.py quantiles            no data: tables of Student's t and the normal distribution
"""

import json
import sys

import numpy as np
from scipy import special, stats

PERCENTS = [0, 1, 5, 10, 25, 50, 75, 90, 95, 99, 100]


def effective_samples(values):
    """Geyer's initial positive sequence, term by term."""
    count = len(values)
    centered = values - values.mean()
    sums = np.correlate(centered, centered, "full")[count - 1:]
    r = sums / sums[0]
    total = 0.0
    for lag in range(0, count - 1, 2):
        if r[lag] + r[lag + 1] <= 0:
            break
        total += (1 - lag / count) * r[lag] * (lag > 0) + (1 - (lag + 1) / count) * r[lag + 1]
    return count / (1 + 2 * total)


def series(path):
    values = np.fromfile(path)
    centered = values - values.mean()
    correlation = [float(np.sum(centered[: len(values) - k] * centered[k:]) / np.sum(centered**2)) for k in range(101)]
    counts, edges = np.histogram(values, bins=37)
    logarithm = np.log(values)
    mu, sigma = logarithm.mean(), logarithm.std(ddof=1)
    return {
        "mean": values.mean(),
        "std": values.std(ddof=1),
        "skewness": stats.skew(values),
        "kurtosis": stats.kurtosis(values, fisher=False),
        "percents": PERCENTS,
        "percentiles": np.percentile(values, PERCENTS).tolist(),
        "histogram_edges": edges.tolist(),
        "histogram_counts": counts.tolist(),
        "freedman_diaconis": float(2 * stats.iqr(values) / len(values) ** (1 / 3)),
        "log_mean": mu,
        "log_std": sigma,
        "log_ks": stats.kstest(logarithm, "norm", args=(mu, sigma)).statistic,
        "log_counts": (np.diff(stats.norm.cdf(np.log(edges), mu, sigma)) * len(values)).tolist(),
        "autocorrelation": correlation,
        "effective_samples": effective_samples(values),
    }


def frames(path, points):
    numbers = np.fromfile(path)
    x, y = numbers[:points], numbers[points: 2 * points]
    opd = numbers[2 * points:].reshape(-1, points)
    plane = np.stack([np.ones(points), x, y], axis=1)
    left = opd - (plane @ np.linalg.lstsq(plane, opd.T, rcond=None)[0]).T
    mean_map = left.mean(axis=0)
    fluctuation = left - mean_map
    rms = np.sqrt((fluctuation**2).mean(axis=1))
    return {
        "opd_rms": rms.tolist(),
        "mean_map": mean_map.tolist(),
        "rms_map": np.sqrt((fluctuation**2).mean(axis=0)).tolist(),
        "opd_rms_mean": rms.mean(),
        "opd_rms_std": rms.std(ddof=1),
        "opd_rms_overall": np.sqrt((fluctuation**2).mean()),
    }


def quantiles():
    table = []
    for probability in (0.55, 0.75, 0.9, 0.95, 0.975, 0.99, 0.995, 0.9995):
        for freedom in (1, 1.5, 2, 3, 5, 10, 29.5, 100, 315, 1e4, 1e6):
            table.append([probability, freedom, special.stdtrit(freedom, probability)])
    normal = [[p, special.ndtri(p)] for p in (1e-300, 1e-30, 1e-6, 0.01, 0.3, 0.5, 0.8, 0.975, 0.999999)]
    return {"student_t": table, "normal": normal}


if __name__ == "__main__":
    command, arguments = sys.argv[1], sys.argv[2:]
    if command == "series":
        answer = series(arguments[0])
    elif command == "frames":
        answer = frames(arguments[0], int(arguments[1]))
    else:
        answer = quantiles()
    print(json.dumps(answer))
