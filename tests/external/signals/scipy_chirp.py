# SPDX-License-Identifier: GPL-3.0-or-later
"""Reference chirps from SciPy for chirp_test.cpp.

Usage: scipy_chirp.py METHOD LOW_HZ HIGH_HZ DURATION_S RATE_HZ FADE_S
Prints one value per sample, 17 significant digits. scipy.signal.chirp is a cosine: -90 degrees make it start as a
sine. The fades are those of a Tukey window, whose two tapers are raised cosines.
"""
import sys

import numpy as np
from scipy import signal

method = sys.argv[1]
low_hz, high_hz, duration_s, rate_hz, fade_s = (float(word) for word in sys.argv[2:])
count = round(duration_s * rate_hz) + 1
time_s = np.arange(count) / rate_hz
value = signal.chirp(time_s, low_hz, duration_s, high_hz, method=method, phi=-90)
value = value * signal.windows.tukey(count, alpha=2 * fade_s / duration_s)
print("\n".join(f"{sample:.17g}" for sample in value))
