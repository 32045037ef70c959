# SPDX-License-Identifier: GPL-3.0-or-later
"""Window, spectra and coherence by scipy.signal for the test beside this file.

Usage: scipy_spectra.py SIGNALS SEGMENT RATE. SIGNALS holds two columns x, y. The mean of the whole record
is removed first, then nothing per segment (detrend=False): the convention of cross_spectra. Prints the window
on one line, then per frequency: frequency Pxx Pyy Re(Pxy) Im(Pxy) coherence.
"""
import sys

import numpy as np
from scipy import signal

x, y = np.loadtxt(sys.argv[1], unpack=True)
segment, rate = int(sys.argv[2]), float(sys.argv[3])
x, y = x - x.mean(), y - y.mean()
options = dict(fs=rate, window="hann", nperseg=segment, noverlap=segment // 2, detrend=False)
frequency, pxx = signal.welch(x, **options)
pyy = signal.welch(y, **options)[1]
pxy = signal.csd(x, y, **options)[1]
coherence = signal.coherence(x, y, **options)[1]
print(*(repr(float(w)) for w in signal.get_window("hann", segment)))
for row in zip(frequency, pxx, pyy, pxy.real, pxy.imag, coherence):
    print(*(repr(float(value)) for value in row))
