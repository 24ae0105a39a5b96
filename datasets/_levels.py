"""What generators of spectra share."""

import numpy as np


def mean_gap_ratio(levels, count):
    """Mean of min(d_n, d_n+1) / max(d_n, d_n+1) over the `count` levels closest to zero (Oganesyan, Huse 2007)."""
    levels = np.sort(levels)
    first = np.searchsorted(levels, 0.0) - count // 2
    first = min(max(first, 0), levels.size - count)
    gaps = np.diff(levels[first : first + count])
    return np.mean(np.minimum(gaps[1:], gaps[:-1]) / np.maximum(gaps[1:], gaps[:-1]))
