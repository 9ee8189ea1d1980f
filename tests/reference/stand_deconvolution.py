"""Writes stand_deconvolution.csv: a reading of a ringing stand and its deconvolution by scipy, for tests/stand_dynamics.rs.

Run with Python 3 and scipy (made with scipy 1.17.1, numpy 2.4.6):  python3 stand_deconvolution.py

Thrust: a smooth rise of 12 ms from 0.1 s on, a level that falls, a smooth fall of 60 ms from 0.8 s on. Reading: scipy.signal.lsim of
1 / (s^2/w^2 + 2 z s/w + 1), 34 Hz, z = 0.02, at 20 kHz, every 20th value kept, no noise.
Deconvolution: the spectrum of the reading times (1 + 2 z (jf/fn) - (f/fn)^2) times a Gaussian of 1.5 ms standard deviation, by
scipy.fft of the record padded with zeros. The Gaussian is what keeps the inverse regular.
"""
import numpy as np
from scipy import fft, signal

FN, ZETA, SMOOTHING_S = 34.0, 0.02, 1.5e-3


def step(x):
    x = np.clip(x, 0.0, 1.0)
    return x * x * x * (10.0 - 15.0 * x + 6.0 * x * x)


t = np.arange(0, 1.4, 5e-5)
thrust = 500.0 * step((t - 0.1) / 0.012) * (1.0 - 0.25 * (t - 0.1)) * (1.0 - step((t - 0.8) / 0.06))
w = 2 * np.pi * FN
system = signal.TransferFunction([1.0], [1.0 / w**2, 2 * ZETA / w, 1.0])
_, reading, _ = signal.lsim(system, thrust, t)
t, thrust, reading = t[::20], thrust[::20], reading[::20]
n = fft.next_fast_len(8 * len(t))
# What still swings at the end would jump to nil there: the fade lies beyond what is compared.
faded = reading * (1.0 - step((t - 1.25) / 0.14))
f = fft.rfftfreq(n, t[1] - t[0])
inverse = (1.0 + 2j * ZETA * f / FN - (f / FN) ** 2) * np.exp(-0.5 * (2 * np.pi * f * SMOOTHING_S) ** 2)
found = fft.irfft(fft.rfft(faded, n) * inverse, n)[: len(t)]
with open("stand_deconvolution.csv", "w") as out:
    out.write("t_s,thrust_N,reading_N,deconvolved_N\n")
    for row in zip(t, thrust, reading, found):
        out.write("%.3f,%.6f,%.6f,%.6f\n" % row)
