"""The script a laboratory would write for itself: fixed windows, fitted phase speed, one pass. For comparison only.

usage: python lab_script.py RECORD.csv OUT.npz [FIGURE.png]
"""

import sys

import numpy as np
from scipy.integrate import cumulative_trapezoid

E, RHO, D, X_I, X_T = 200e9, 8000.0, 0.020, 1.0, 0.6
AREA, C0 = np.pi * D**2 / 4, np.sqrt(E / RHO)
L_S, D_S = 0.005, 0.010
A_S = np.pi * D_S**2 / 4
GAUGE = 4 / (2 * 2.1 * 5.0 * 200.0)

table = np.loadtxt(sys.argv[1], delimiter=",", skiprows=1)
t = table[:, 0]
dt = t[1] - t[0]
incident_gauge = -GAUGE * table[:, 1]
transmitted_gauge = -GAUGE * table[:, 2]
quiet = t < -70e-6
incident_gauge -= incident_gauge[quiet].mean()
transmitted_gauge -= transmitted_gauge[quiet].mean()


def carried(strain, start, length, distance):
    i = int((start - t[0]) / dt)
    n = int(length / dt)
    pulse = strain[i : i + n]
    size = 2 ** int(np.ceil(np.log2(2 * n)))
    spectrum = np.fft.rfft(pulse, size)
    f = np.fft.rfftfreq(size, dt)
    x = np.minimum(f * D / 2 / C0, 0.6)  # a/Lambda from f a/c0, one step of a fixed-point iteration
    for _ in range(4):
        c = 0.5746 + 0.42555 / (21.326 * x**4 + 19.224 * x**3 - 7.3258 * x**2 + 2.4713 * x**1.5 + 1)
        x = np.minimum(f * D / 2 / C0 / c, 2.0)
    spectrum *= np.exp(-2j * np.pi * f * distance * (1 / c - 1) / C0)
    return np.fft.irfft(spectrum, size)[:n]


arrival = -55e-6
length = 150e-6
inc = carried(incident_gauge, arrival, length, X_I)
ref = carried(incident_gauge, arrival + 2 * X_I / C0, length, -X_I)
tra = carried(transmitted_gauge, arrival + (X_I + X_T) / C0, length, -X_T)
n = min(len(inc), len(ref), len(tra))
inc, ref, tra = inc[:n], ref[:n], tra[:n]
time = dt * np.arange(n)
f_in, f_out = E * AREA * (inc + ref), E * AREA * tra
rate = C0 / L_S * (inc - ref - tra)
strain = cumulative_trapezoid(rate, time, initial=0)
stress = (f_in + f_out) / (2 * A_S)
true_strain, true_stress = -np.log(1 - strain), stress * (1 - strain)
np.savez(sys.argv[2], time=time, f_in=f_in, f_out=f_out, rate=rate, strain=true_strain, stress=true_stress)

if len(sys.argv) > 3:
    import matplotlib

    matplotlib.use("Agg")
    import matplotlib.pyplot as plt

    fig, axes = plt.subplots(2, 2, figsize=(11, 8))
    axes[0, 0].plot(t, table[:, 1], t, table[:, 2])
    axes[0, 1].plot(time, f_in, time, f_out)
    axes[1, 0].plot(true_strain, true_stress)
    axes[1, 1].plot(time, rate)
    fig.savefig(sys.argv[3], dpi=120)
print(f"rate {rate[n // 2]:.0f} /s, stress {1e-6 * true_stress[n // 2]:.0f} MPa")
